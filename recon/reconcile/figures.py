"""Values of ratios and sums of unknowns, their uncertainties, and what those rest on."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from recon.reconcile.answer import FigureValue, Share
from recon.reconcile.linearise import STANDING

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray
    from scipy import sparse

    from recon.flowsheet.balances import Linear
    from recon.reconcile.problem import Figure
    from recon.reconcile.solver import Sensitivities, Solution
    from recon.reconcile.state import State

    Vector = NDArray[np.float64]
    Gradients = Vector | sparse.csr_array

REDUNDANT = 1e-6
"""A datum whose residual keeps no more than this share of its variance checks nothing."""
NEGLIGIBLE = 1e-15
"""Shares of a variance below this are rounding and are not listed."""


@dataclass(frozen=True, kw_only=True)
class Quantity:
    """A ratio of two linear forms, or one form, at a point: value and scaled gradient (N,)."""

    value: float | None
    gradient: Vector


def quantity(state: State, solution: Solution, of: Linear, over: Linear | None) -> Quantity:
    """
    Evaluate a sum or ratio at a solution.

    Returns
    -------
    Quantity
        Value None where the denominator stands at zero.
    """
    x, scale = solution.point.x, solution.local.scale
    n = len(x)
    gradient = np.zeros(len(scale))
    top = state.vector(of)
    if over is None:
        gradient[:n] = top * scale[:n]
        return Quantity(value=float(top @ x), gradient=gradient)
    bottom = state.vector(over)
    below = float(bottom @ x)
    if below <= STANDING * float(np.abs(bottom) @ scale[:n]):
        return Quantity(value=None, gradient=gradient)
    value = float(top @ x) / below
    gradient[:n] = (top - value * bottom) / below * scale[:n]
    return Quantity(value=value, gradient=gradient)


@dataclass(frozen=True, kw_only=True)
class Weights:
    """
    What the uncertainty of k quantities rests on.

    Attributes
    ----------
    readings : ndarray
        Contribution of the independent part of each fit, then held, reading in the quantity's
        unit, shape (k, m + h).
    draws : ndarray
        Contribution of each draw, shape (k, g).
    slope : ndarray
        Sensitivity to each fit, then held, reading [unit of quantity per unit of reading].
    """

    readings: Vector
    draws: Vector
    slope: Vector

    @property
    def u(self) -> Vector:
        """Standard uncertainties, shape (k,)."""
        return np.asarray(np.sqrt(np.sum(self.readings**2, axis=1) + np.sum(self.draws**2, axis=1)))


def weights(
    state: State, solution: Solution, sensitivities: Sensitivities, gradients: Vector
) -> Weights:
    """
    Split the uncertainty of k quantities over readings and draws.

    The draws' part is ``sum_i w_i D_ig`` over all readings, held ones included: an offset moves
    the fit through every reading it enters.
    """
    rows = sensitivities.rows(gradients)
    m, g = len(state.fit.value), state.draws
    to_fit, to_prior, to_held = rows[:, :m], rows[:, m : m + g], rows[:, m + g :]
    held_u = np.nan_to_num(state.held.u)
    offsets = state.held.offsets(solution.point.x) if len(held_u) else None
    draws = -to_prior + (to_held @ offsets.toarray() if offsets is not None else 0.0)
    return Weights(
        readings=np.hstack([to_fit, to_held * held_u]),
        draws=draws,
        slope=np.hstack([to_fit / state.fit.u, to_held]),
    )


def uncertainties(
    state: State, solution: Solution, sensitivities: Sensitivities, gradients: Gradients
) -> Vector:
    """
    Give the standard uncertainties of k quantities, without what they rest on.

    Where figures are held, a draw moves a quantity through its prior and through the held figures
    that it enters, and a held figure's own error counts: ``W V W'`` of the whole estimator.

    Returns
    -------
    ndarray
        Shape (k,).
    """
    variance = sensitivities.variances(gradients)
    if len(state.held.value):
        g = state.draws
        shared = sensitivities.shared_rows(gradients)
        to_prior, to_held = shared[:, :g], shared[:, g:]
        offsets = state.held.offsets(solution.point.x)
        variance = variance - np.sum(to_prior**2, axis=1)
        variance += np.sum((np.asarray(to_held @ offsets) - to_prior) ** 2, axis=1)
        variance += np.sum((to_held * np.nan_to_num(state.held.u)) ** 2, axis=1)
    return np.asarray(np.sqrt(np.maximum(variance, 0.0)))


def figure_values(
    state: State,
    solution: Solution,
    sensitivities: Sensitivities,
    figures: Sequence[Figure],
) -> list[FigureValue]:
    """Give each figure its value, uncertainty and budget, or the reason it has none."""
    found = [quantity(state, solution, f.of, f.over) for f in figures]
    if not found:
        return []
    gradients = np.array([q.gradient for q in found])
    known = sensitivities.determined(gradients)
    parts = weights(state, solution, sensitivities, gradients)
    return [
        _figure_value(state, figure, q, bool(known[i]), parts, i)
        for i, (figure, q) in enumerate(zip(figures, found, strict=True))
    ]


def _figure_value(
    state: State, figure: Figure, found: Quantity, known: bool, parts: Weights, i: int
) -> FigureValue:
    if found.value is None or not known:
        reason = "its denominator stands at zero" if found.value is None else "cannot be found"
        return FigureValue(
            name=figure.name,
            period=figure.period,
            value=None,
            u=None,
            determined=False,
            budget=(),
            reason=reason,
        )
    u = float(parts.u[i])
    return FigureValue(
        name=figure.name,
        period=figure.period,
        value=found.value,
        u=u,
        determined=True,
        budget=_budget(state, parts.readings[i], parts.draws[i], u),
    )


def _budget(state: State, readings: Vector, draws: Vector, u: float) -> tuple[Share, ...]:
    if u == 0.0:
        return ()
    measured = (*state.fit.measurements, *state.held.measurements)
    shares = [
        Share(name=m.name, period=m.period, source=False, share=float((w / u) ** 2))
        for m, w in zip(measured, readings, strict=True)
    ] + [
        Share(name=d.source, period=d.first, source=True, share=float((w / u) ** 2))
        for d, w in zip(state.problem.draws, draws, strict=True)
    ]
    return tuple(sorted((s for s in shares if s.share > NEGLIGIBLE), key=lambda s: -s.share))
