"""What an engine is given and what it must give back."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Protocol

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray
    from scipy import sparse

    from recon.reconcile.linearise import Local, Point
    from recon.reconcile.state import State

    Vector = NDArray[np.float64]
    Gradients = Vector | sparse.csr_array


@dataclass(frozen=True, kw_only=True)
class Step:
    """
    The solution of one local problem.

    Attributes
    ----------
    move : ndarray
        Step of scaled unknowns and offsets, shape (N,).
    equal_force, bound_force : ndarray
        Multipliers of the equalities (p,) and of the inequalities (q,), the latter not negative.
    """

    move: Vector
    equal_force: Vector
    bound_force: Vector


@dataclass(frozen=True, kw_only=True)
class Solution:
    """
    An answer before anybody has believed it.

    Attributes
    ----------
    point : Point
    local : Local
        The problem around that point; its misfit and gap are those printed.
    equal_force, bound_force : ndarray
        Multipliers there.
    objective : float
        Sum of squared standardised misfits [-].
    engine : str
        Name and version of what solved it.
    iterations : int
    seconds : float
    """

    point: Point
    local: Local
    equal_force: Vector
    bound_force: Vector
    objective: float
    engine: str
    iterations: int
    seconds: float


class Sensitivities(Protocol):
    """
    Linear algebra of the least squares problem at one point, equalities only.

    The data are m readings and g priors of draws, standardised, so each has variance one; h held
    readings enter through their equalities. Inequality bounds take no part.
    """

    @property
    def degrees_of_freedom(self) -> int:
        """Rank of what the data are checked against [-]."""
        ...

    @property
    def leverage(self) -> Vector:
        """Share of each datum's variance that is left in its residual, shape (m + g,)."""
        ...

    @property
    def residuals(self) -> Vector:
        """Standardised residuals of the minimum, shape (m + g,); positive reads high."""
        ...

    def rows(self, gradients: Gradients) -> Vector:
        """
        Give the change of quantities per unit change of each datum and each held value.

        Parameters
        ----------
        gradients : ndarray or csr_array
            Derivatives of k quantities to scaled unknowns and offsets, shape (k, N).

        Returns
        -------
        ndarray
            Shape (k, m + g + h): per standard uncertainty of a datum, then per unit [t or 1] of a
            held value.
        """
        ...

    def variances(self, gradients: Gradients) -> Vector:
        """Variances of k quantities from all data, held values taken as exact, shape (k,)."""
        ...

    def shared_rows(self, gradients: Gradients) -> Vector:
        """Give the last columns of ``rows``: draws' priors and held values, shape (k, g + h)."""
        ...

    def determined(self, gradients: Gradients) -> NDArray[np.bool_]:
        """Which of k quantities the data and equalities determine, shape (k,)."""
        ...

    def residual_covariance(self, data: NDArray[np.intp]) -> Vector:
        """Columns of the covariance of standardised residuals, shape (m + g, len(data))."""
        ...


class Engine(Protocol):
    """Finds the optimum of a problem and the sensitivities there."""

    name: str

    def solve(self, state: State) -> Solution:
        """
        Find the optimum.

        Raises
        ------
        ContradictionError
            The equalities and bounds cannot be met together.
        NotAcceptedError
            The search ended without an answer.
        """
        ...

    def sensitivities(self, local: Local) -> Sensitivities:
        """Factorise the equality-constrained problem around a point."""
        ...
