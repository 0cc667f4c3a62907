"""From a start to the optimum: local problems one after the other, each step checked."""

from __future__ import annotations

import time
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
from scipy import sparse

from recon.errors import NotAcceptedError, SolveError
from recon.reconcile.linearise import Point, local, standing_parts
from recon.reconcile.solver import Solution
from recon.reconcile.start import convex_start

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from recon.reconcile.linearise import Local
    from recon.reconcile.solver import Step
    from recon.reconcile.state import State

    Vector = NDArray[np.float64]

MOST_PASSES = 80
STILL = 1e-10
"""The search ends when no reading's fitted value moves by more than this many of its u."""
CLOSED = 5e-10
"""At rest no equality is open by more of its size; acceptance allows twice that."""
FIRST_DAMPING, LEAST_DAMPING = 1.0, 1e-12
"""Weight of the pull to where the search is, per typical size, at first and at last."""
SETTLING = 1e-3
"""Once readings move by less than this many of their u the pull only fades, and sizes are of where
the search is."""
SETTLED = 1e-3
"""Steps that move no reading by more of its u are taken whole: rounding in the misfit would hide
what they gain."""
PARTS = (1.0, 0.3, 0.05)
"""Parts of what is open that a pass tries to close."""
KEEP = 0.05
"""One step may take a denominator down to this share of itself, so no ratio is lost at once."""


def iterate(state: State, solve: Callable[[Local], Step], *, engine: str) -> Solution:
    """
    Solve a problem by Gauss-Newton steps with a line search.

    Parameters
    ----------
    state : State
    solve : callable
        Solves one local problem.
    engine : str
        Name recorded with the answer.

    Raises
    ------
    NotAcceptedError
        The search did not come to rest, or no step lowers the misfit.
    ContradictionError
        Passed on from ``solve``.
    """
    began = time.perf_counter()
    point, size = convex_start(state, solve)
    damping = FIRST_DAMPING
    for passes in range(1, MOST_PASSES + 1):
        around = local(state, point, size)
        step = _step(around, damping, solve)
        whole = _longest(state, point.x, size, size * step.move[: len(point.x)]) == 1.0
        if whole and damping <= LEAST_DAMPING and _at_rest(around, step):
            point = _moved(point, size, step)
            around = local(state, point, size)
            return Solution(
                point=point,
                local=around,
                equal_force=step.equal_force,
                bound_force=step.bound_force,
                objective=float(around.misfit @ around.misfit),
                engine=engine,
                iterations=passes,
                seconds=time.perf_counter() - began,
            )
        moved = float(np.max(np.abs(around.data @ step.move), initial=0.0))
        point, length = _advance(state, point, size, around, step, engine)
        if moved < SETTLING:
            size = np.maximum(size, np.abs(point.x))
        if length > 0.5 or moved < SETTLING:
            damping = max(min(0.1 * damping, moved**2), LEAST_DAMPING)
        elif length < 0.2:
            damping = min(10.0 * damping, FIRST_DAMPING)
    raise NotAcceptedError([f"{engine} did not come to rest in {MOST_PASSES} passes."])


def _step(around: Local, damping: float, solve: Callable[[Local], Step]) -> Step:
    """
    Solve a local problem with a pull to where it is, which fades as the search settles.

    Directions that the data hardly see would otherwise take steps of many times their size. Where
    the linearised equalities and the bounds cannot be met at once, only part of what is open is
    closed in one pass.
    """
    wide = around.data.shape[1]
    pulled = replace(
        around,
        data=sparse.csr_array(
            sparse.vstack([around.data, np.sqrt(damping) * sparse.eye_array(wide)])
        ),
        misfit=np.concatenate([around.misfit, np.zeros(wide)]),
    )
    failed: SolveError | None = None
    for part in PARTS:
        try:
            return solve(replace(pulled, gap=part * around.gap))
        except SolveError as error:
            failed = failed or error
    assert failed is not None
    raise failed


def _at_rest(around: Local, step: Step) -> bool:
    moved = float(np.max(np.abs(around.data @ step.move), initial=0.0))
    open_rows = float(np.max(np.abs(around.gap), initial=0.0))
    scale = 1.0 + float(np.max(np.abs(around.misfit), initial=0.0))
    return moved <= STILL * scale and open_rows <= CLOSED


def _advance(
    state: State, point: Point, size: Vector, around: Local, step: Step, engine: str
) -> tuple[Point, float]:
    """Take the largest of the halved steps that lowers misfit and open equalities together."""
    n = len(point.x)
    move_x = size * step.move[:n]
    price = 1.0 + 2.0 * float(np.max(np.abs(step.equal_force), initial=0.0))
    before = _merit(around, price)
    promised = _promised(around, step, price)
    length = _longest(state, point.x, size, move_x)
    moved = float(np.max(np.abs(around.data @ step.move), initial=0.0))
    settled = max(moved, float(np.max(np.abs(around.gap), initial=0.0))) < SETTLED
    for _ in range(40):
        trial = Point(x=point.x + length * move_x, beta=point.beta + length * step.move[n:])
        after = _merit(local(state, trial, size), price)
        if settled or after <= before - 1e-4 * length * promised + 1e-13 * abs(before):
            return trial, length
        length *= 0.5
    raise NotAcceptedError([f"{engine} found no step that lowers the misfit."])


def _moved(point: Point, size: Vector, step: Step) -> Point:
    n = len(point.x)
    return Point(x=point.x + size * step.move[:n], beta=point.beta + step.move[n:])


def _merit(around: Local, price: float) -> float:
    return 0.5 * float(around.misfit @ around.misfit) + price * float(np.sum(np.abs(around.gap)))


def _promised(around: Local, step: Step, price: float) -> float:
    """How far the linearised problem expects a whole step to lower the merit."""
    left = around.misfit - around.data @ step.move
    gain = 0.5 * float(around.misfit @ around.misfit - left @ left)
    return max(gain + price * float(np.sum(np.abs(around.gap))), 0.0)


def _longest(state: State, x: Vector, size: Vector, move: Vector) -> float:
    """The largest step, at most 1, that keeps every running denominator positive."""
    running = state.fit.ratio & ~standing_parts(state.fit, x, size)
    now = state.fit.over @ x
    change = state.fit.over @ move
    falling = running & (change < -(1 - KEEP) * now)
    if not falling.any():
        return 1.0
    return float(np.min((1 - KEEP) * now[falling] / -change[falling]))
