"""The plain engine: each local problem stated in cvxpy and solved by Clarabel, named on purpose.

The local problem is already standardised and scaled. The tolerances asked for are beyond what the
solver always reaches; what it then calls *inaccurate* is judged like every answer, by the
acceptance checks. cvxpy is imported when the first problem is solved, never before.
"""

from __future__ import annotations

import warnings
from importlib import import_module
from typing import TYPE_CHECKING, Any

import numpy as np

from recon.errors import ContradictionError, NotAcceptedError
from recon.reconcile.solver import Step
from recon.solve.closed_form import DenseSensitivities
from recon.solve.iterate import iterate

if TYPE_CHECKING:
    from recon.reconcile.linearise import Local
    from recon.reconcile.solver import Solution
    from recon.reconcile.state import State

STILL_PULL = 1e-5
"""Weight that keeps directions nothing sees from drifting, per typical size and pass."""
TOLERANCES = {
    "tol_gap_abs": 1e-13,
    "tol_gap_rel": 1e-13,
    "tol_feas": 1e-13,
    "reduced_tol_gap_abs": 1e-11,
    "reduced_tol_gap_rel": 1e-11,
    "reduced_tol_feas": 1e-11,
}


class Convex:
    """Engine that leaves every local problem to cvxpy."""

    name = "cvxpy with Clarabel"

    def solve(self, state: State) -> Solution:
        """Find the optimum; see ``recon.reconcile.solver.Engine``."""
        return iterate(state, solve_local, engine=self.name)

    def sensitivities(self, local: Local) -> DenseSensitivities:
        """Factorise the problem around a point, inequality bounds left out."""
        return DenseSensitivities.of(local)


def solve_local(local: Local) -> Step:
    """
    Solve one local problem.

    Raises
    ------
    ContradictionError
        The solver found the equalities and bounds infeasible.
    NotAcceptedError
        Any status other than optimal or inaccurate.
    """
    cp = _cvxpy()
    move = cp.Variable(local.data.shape[1])
    misfit = cp.sum_squares(local.data @ move - local.misfit)
    equal: list[Any] = [local.equal @ move == local.gap] if len(local.gap) else []
    bound: list[Any] = [local.bound @ move >= local.room] if len(local.room) else []
    calm = STILL_PULL**2 * cp.sum_squares(move)
    problem = cp.Problem(cp.Minimize(0.5 * (misfit + calm)), equal + bound)
    try:
        with warnings.catch_warnings():
            warnings.filterwarnings("ignore", message="Solution may be inaccurate")
            problem.solve(solver=cp.CLARABEL, **TOLERANCES)
    except cp.SolverError as error:
        raise NotAcceptedError([f"cvxpy with Clarabel: {error}"]) from error
    if problem.status in (cp.INFEASIBLE, cp.INFEASIBLE_INACCURATE):
        raise ContradictionError(_open_rows(local))
    if problem.status not in (cp.OPTIMAL, cp.OPTIMAL_INACCURATE) or move.value is None:
        raise NotAcceptedError([f"cvxpy with Clarabel ended with status {problem.status}."])
    return Step(
        move=np.asarray(move.value),
        equal_force=-np.asarray(equal[0].dual_value) if equal else np.zeros(0),
        bound_force=np.asarray(bound[0].dual_value) if bound else np.zeros(0),
    )


def _cvxpy() -> Any:
    """The library, imported on first use and never before; it has no types."""
    return import_module("cvxpy")


def _open_rows(local: Local) -> list[str]:
    """Name the equalities that stay open when as little as possible is left open."""
    cp = _cvxpy()
    move, left = cp.Variable(local.data.shape[1]), cp.Variable(len(local.gap))
    rows: list[Any] = [local.equal @ move + left == local.gap]
    if len(local.room):
        rows.append(local.bound @ move >= local.room)
    elastic = cp.Problem(cp.Minimize(cp.norm1(left)), rows)
    elastic.solve(solver=cp.CLARABEL)
    if left.value is None:
        return ["the bounds alone contradict one another"]
    size = np.abs(left.value)
    return [
        f"{local.equal_names[i]} (open by {size[i]:.2g} of its size)"
        for i in np.argsort(-size)[:5]
        if size[i] > 1e-7
    ]
