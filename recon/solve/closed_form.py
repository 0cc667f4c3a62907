"""The closed form: a dense null-space solution of the equality-constrained least squares.

Balances are met exactly by working inside their null space; everything else is one orthogonal
factorisation. Ranks are read off singular values, so nothing that cannot be found is mistaken for
something known badly. Cost grows with the cube of the unknowns; it is meant for a test survey or a
day, and as the reference every other engine is checked against.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

from recon.errors import ContradictionError, NotAcceptedError
from recon.reconcile.solver import Step
from recon.solve.bounds import settle_bounds
from recon.solve.iterate import iterate

if TYPE_CHECKING:
    from numpy.typing import NDArray
    from scipy import sparse

    from recon.reconcile.linearise import Local
    from recon.reconcile.solver import Solution
    from recon.reconcile.state import State

    Vector = NDArray[np.float64]
    Matrix = NDArray[np.float64]
    Gradients = Vector | sparse.csr_array

RANK = 1e-11
"""A singular value below this share of the largest is zero."""
OPEN = 1e-8
"""An equality open by more than this, per typical flow, cannot be met."""
SEEN = 1e-7
"""A figure whose gradient has a larger share than this in the null space is not determined."""


class ClosedForm:
    """Engine that solves each local problem by dense factorisation."""

    name = "closed form"

    def solve(self, state: State) -> Solution:
        """Find the optimum; see ``recon.reconcile.solver.Engine``."""
        return iterate(state, solve_local, engine=self.name)

    def sensitivities(self, local: Local) -> DenseSensitivities:
        """Factorise the problem around a point, inequality bounds left out."""
        return DenseSensitivities.of(local)


def solve_local(local: Local) -> Step:
    """
    Solve one local problem with its bounds by changing sets of active bounds.

    Raises
    ------
    ContradictionError
        The equalities, with the bounds that must hold, cannot be met.
    NotAcceptedError
        The active sets repeat.
    """
    bound = local.bound.toarray()
    step, _ = settle_bounds(
        local,
        lambda active: _with_active(local, bound, active),
        start=np.zeros(len(local.room), dtype=np.bool_),
        engine="closed form",
    )
    return step


def _with_active(local: Local, bound: Matrix, active: NDArray[np.bool_]) -> Step:
    equal = np.vstack([local.equal.toarray(), bound[active]])
    gap = np.concatenate([local.gap, local.room[active]])
    parts = _Parts.of(local.data.toarray(), equal)
    move = parts.move(local.misfit, gap)
    left = gap - equal @ move
    if np.max(np.abs(left), initial=0.0) > OPEN:
        names = [*local.equal_names, *np.array(local.bound_names, dtype=object)[active]]
        worst = [
            f"{names[i]} (open by {abs(left[i]):.2g} of its size)"
            for i in np.argsort(-np.abs(left))[:5]
            if abs(left[i]) > OPEN
        ]
        if active.any():
            raise NotAcceptedError([f"closed form: with its bounds, {worst[0]} stays open."])
        raise ContradictionError(worst)
    pull = parts.data.T @ (local.misfit - parts.data @ move)
    forces = -(parts.inverse.T @ pull)
    bound_force = np.zeros(len(local.room))
    bound_force[active] = forces[len(local.gap) :]
    return Step(move=move, equal_force=forces[: len(local.gap)], bound_force=bound_force)


@dataclass(frozen=True, kw_only=True)
class _Parts:
    """Factors of one local problem: pseudo-inverse of the equalities, null space, data in it."""

    data: Matrix
    inverse: Matrix
    basis: Matrix
    left: Matrix
    values: Vector
    right: Matrix

    @classmethod
    def of(cls, data: Matrix, equal: Matrix) -> _Parts:
        width = data.shape[1]
        if equal.shape[0]:
            u, s, vt = np.linalg.svd(equal, full_matrices=True)
            rank = int(np.sum(s > RANK * s[0])) if len(s) else 0
            inverse = (vt[:rank].T / s[:rank]) @ u[:, :rank].T
            basis = vt[rank:].T
        else:
            inverse, basis = np.zeros((width, 0)), np.eye(width)
        left, values, right = np.linalg.svd(data @ basis, full_matrices=False)
        return cls(data=data, inverse=inverse, basis=basis, left=left, values=values, right=right)

    @cached_property
    def rank(self) -> int:
        return int(np.sum(self.values > RANK * self.values[0])) if len(self.values) else 0

    @cached_property
    def pull(self) -> Matrix:
        """Move per unit of each standardised datum, shape (N, m + g)."""
        r = self.rank
        inner = (self.right[:r].T / self.values[:r]) @ self.left[:, :r].T
        return np.asarray(self.basis @ inner)

    def move(self, misfit: Vector, gap: Vector) -> Vector:
        particular = self.inverse @ gap
        return np.asarray(particular + self.pull @ (misfit - self.data @ particular))

    @cached_property
    def unseen(self) -> Matrix:
        """Orthonormal directions that neither data nor equalities see, shape (N, k)."""
        _, _, right = np.linalg.svd(self.data @ self.basis, full_matrices=True)
        return np.asarray(self.basis @ right[self.rank :].T)


@dataclass(frozen=True, kw_only=True)
class DenseSensitivities:
    """Sensitivities by dense factors; see ``recon.reconcile.solver.Sensitivities``."""

    local: Local
    parts: _Parts

    @classmethod
    def of(cls, local: Local) -> DenseSensitivities:
        """Factorise the local problem without its inequality bounds."""
        return cls(local=local, parts=_Parts.of(local.data.toarray(), local.equal.toarray()))

    @property
    def _live(self) -> NDArray[np.bool_]:
        live = np.ones(self.parts.data.shape[0], dtype=np.bool_)
        live[: len(self.local.standing)] = ~self.local.standing
        return live

    @property
    def degrees_of_freedom(self) -> int:
        """Data in force less the rank of what they determine."""
        return int(self._live.sum()) - self.parts.rank

    @cached_property
    def leverage(self) -> Vector:
        """Share of each datum's variance left in its residual, shape (m + g,)."""
        fitted = np.sum(self.parts.left[:, : self.parts.rank] ** 2, axis=1)
        return np.where(self._live, np.clip(1.0 - fitted, 0.0, 1.0), 0.0)

    @cached_property
    def residuals(self) -> Vector:
        """Standardised residuals at the minimum without inequality bounds, shape (m + g,)."""
        move = self.parts.move(self.local.misfit, self.local.gap)
        return np.asarray(self.local.misfit - self.parts.data @ move)

    def rows(self, gradients: Gradients) -> Vector:
        """Sensitivities of k quantities, shape (k, m + g + h)."""
        to_data = gradients @ self.parts.pull
        rows = self.local.held_rows
        onto = self.parts.inverse[:, rows]
        to_gap = gradients @ onto - to_data @ (self.parts.data @ onto)
        return np.hstack([to_data, to_gap * self.local.held_pull])

    def variances(self, gradients: Gradients) -> Vector:
        """Variances of k quantities from all data, held values taken as exact, shape (k,)."""
        return np.asarray(np.sum((gradients @ self.parts.pull) ** 2, axis=1))

    def shared_rows(self, gradients: Gradients) -> Vector:
        """Sensitivities to draws' priors and held values only, shape (k, g + h)."""
        return self.rows(gradients)[:, len(self.local.standing) :]

    def determined(self, gradients: Gradients) -> NDArray[np.bool_]:
        """Which quantities have no share in the unseen directions, shape (k,)."""
        share = np.linalg.norm(gradients @ self.parts.unseen, axis=1)
        squares = gradients * gradients if isinstance(gradients, np.ndarray) else gradients.power(2)
        lengths = np.sqrt(np.asarray(squares.sum(axis=1)).ravel())
        return np.asarray(share <= SEEN * lengths)

    def residual_covariance(self, data: NDArray[np.intp]) -> Vector:
        """Columns of the residuals' covariance, shape (m + g, len(data))."""
        u = self.parts.left[:, : self.parts.rank]
        columns = -u @ u[data].T
        columns[data, np.arange(len(data))] += 1.0
        live = self._live.astype(np.float64)
        return np.asarray(columns * live[:, None] * live[data][None, :])
