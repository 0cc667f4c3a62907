"""Our own checks of an answer, whatever the engine said of it.

A solver's "optimal" is not believed: on badly scaled problems it has been given for answers tens of
standard uncertainties away from the optimum.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from recon.reconcile.solver import Solution

BALANCE = 1e-9
"""Largest open balance, as a share of the typical flow through it."""
OPTIMUM = 1e-6
"""Largest slope left at the optimum, in standard uncertainties."""
BOUND = 1e-8
"""Largest breach of a bound, as a share of typical size."""


@dataclass(frozen=True, kw_only=True)
class Acceptance:
    """
    How well an answer meets the conditions of an optimum.

    Attributes
    ----------
    balance_residual : float
        Largest open equality per typical flow [-].
    optimality_residual : float
        Largest slope left, in standard uncertainties [-].
    reasons : tuple of str
        What failed, in words; empty where the answer is accepted.
    """

    balance_residual: float
    optimality_residual: float
    reasons: tuple[str, ...]


def check(solution: Solution) -> Acceptance:
    """
    Check balances, bounds, slope and the sign and place of the bounds' forces.

    Parameters
    ----------
    solution : Solution

    Returns
    -------
    Acceptance
    """
    local = solution.local
    reasons: list[str] = []
    values = (solution.point.x, solution.point.beta, solution.equal_force, solution.bound_force)
    if not all(np.isfinite(v).all() for v in values):
        return Acceptance(
            balance_residual=float("inf"),
            optimality_residual=float("inf"),
            reasons=(f"{solution.engine}: the answer holds values that are not finite.",),
        )
    open_rows = np.abs(local.gap)
    balance = float(np.max(open_rows, initial=0.0))
    if balance > BALANCE:
        worst = local.equal_names[int(np.argmax(open_rows))]
        reasons.append(
            f"{solution.engine}: {worst} stays open by {balance:.1e} of its typical flow "
            f"(limit {BALANCE:g})."
        )
    slope = (
        local.data.T @ local.misfit
        + local.equal.T @ solution.equal_force
        + local.bound.T @ solution.bound_force
    )
    steep = 1.0 + np.sqrt(np.asarray(local.data.multiply(local.data).sum(axis=0)).ravel())
    optimality = float(np.max(np.abs(slope) / steep, initial=0.0))
    if optimality > OPTIMUM:
        reasons.append(
            f"{solution.engine}: the optimum is missed by about {optimality:.1e} standard "
            f"uncertainties (limit {OPTIMUM:g})."
        )
    breach = np.maximum(local.room, 0.0)
    if float(np.max(breach, initial=0.0)) > BOUND:
        worst = local.bound_names[int(np.argmax(breach))]
        reasons.append(f"{solution.engine}: the bound {worst} is broken by {breach.max():.1e}.")
    force = solution.bound_force
    loose = (force < -OPTIMUM) | ((force > OPTIMUM) & (local.room < -BOUND))
    if loose.any():
        worst = local.bound_names[int(np.argmax(np.where(loose, np.abs(force), 0.0)))]
        reasons.append(f"{solution.engine}: the bound {worst} holds the answer without need.")
    return Acceptance(
        balance_residual=balance,
        optimality_residual=optimality,
        reasons=tuple(reasons),
    )
