"""Which bounds will hold, found from inside them: a primal-dual interior point method.

Used where changing the set of active bounds goes wrong, for example because bounds taken up
together contradict the equalities. Its end is a first guess of the set, and where bounds are
degenerate the answer itself; the acceptance checks judge it as they judge any other.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from scipy import sparse

from recon.errors import NotAcceptedError
from recon.reconcile.solver import Step
from recon.solve.kkt import HEAVY, Kkt, Symbolic

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from recon.reconcile.linearise import Local

    Vector = NDArray[np.float64]

MOST_PASSES = 80
SMALL = 1e-10
"""The search ends when open equalities and bounds, slope, and forces times slacks are below it."""
PATIENCE, ENOUGH = 4, 1e-6
"""It also ends after so many passes without gain, where its best is below this."""
BACK = 0.995
"""Share of the way to the nearest bound that one pass may go."""


def interior(local: Local) -> tuple[Step, NDArray[np.bool_]]:
    """
    Solve one local problem from inside its bounds.

    Returns
    -------
    step : Step
    active : ndarray
        Bounds whose force exceeds their slack, shape (q,).

    Raises
    ------
    NotAcceptedError
        The search did not end; the bounds may contradict the equalities.
    """
    view = _View.of(_lifted(local))
    now = view.start()
    symbolic = Symbolic()
    best, reached, stalled = now, np.inf, 0
    for _ in range(MOST_PASSES):
        left = view.left(now)
        stalled += 1
        if left.worst < reached:
            best, reached, stalled = now, left.worst, 0
        if reached < SMALL or (stalled > PATIENCE and reached < ENOUGH):
            step = Step(
                move=best.d[: local.data.shape[1]],
                equal_force=best.force[: len(local.gap)],
                bound_force=best.push,
            )
            return step, np.asarray(best.push > best.slack)
        now = view.advance(now, left, symbolic)
    raise NotAcceptedError(["sparse direct: the bounds and the equalities do not come together."])


def _lifted(local: Local) -> Local:
    """
    Give the misfits of very steep data rows unknowns of their own.

    Each such row, scaled to length one, becomes an equality between the old unknowns and its own
    misfit: slopes are then never differences of products that dwarf them.
    """
    steep = np.sqrt(np.asarray(local.data.multiply(local.data).sum(axis=1)).ravel())
    heavy = steep > HEAVY
    if not heavy.any():
        return local
    more = int(heavy.sum())
    tau = sparse.diags_array(1 / steep[heavy])
    rows, wide = local.equal.shape
    return replace(
        local,
        data=sparse.csr_array(sparse.block_diag([local.data[~heavy], sparse.eye_array(more)])),
        misfit=np.concatenate([local.misfit[~heavy], np.zeros(more)]),
        equal=sparse.csr_array(
            sparse.block_array([[local.equal, None], [tau @ local.data[heavy], tau]])
            if rows
            else sparse.hstack([tau @ local.data[heavy], tau])
        ),
        gap=np.concatenate([local.gap, tau @ local.misfit[heavy]]),
        bound=sparse.csr_array(
            sparse.hstack([local.bound, sparse.csr_array((local.bound.shape[0], more))])
        ),
        scale=np.concatenate([local.scale, np.ones(wide + more - len(local.scale))]),
    )


@dataclass(frozen=True, kw_only=True)
class _Place:
    """Step, forces of equalities, slacks and forces of bounds."""

    d: Vector
    force: Vector
    slack: Vector
    push: Vector

    def along(self, move: _Place, length: float) -> _Place:
        return _Place(
            d=self.d + length * move.d,
            force=self.force + length * move.force,
            slack=self.slack + length * move.slack,
            push=self.push + length * move.push,
        )


@dataclass(frozen=True, kw_only=True)
class _Left:
    """What is still open at a place: slope, equalities, bounds, and mean force times slack."""

    top: Vector
    low: Vector
    breach: Vector
    middle: float
    worst: float


@dataclass(frozen=True, kw_only=True)
class _View:
    """One local problem with its matrices turned over once."""

    local: Local
    data_t: sparse.csr_array
    bound_t: sparse.csr_array
    equal_t: sparse.csr_array

    @classmethod
    def of(cls, local: Local) -> _View:
        turned = (sparse.csr_array(a.T) for a in (local.data, local.bound, local.equal))
        data_t, bound_t, equal_t = turned
        return cls(local=local, data_t=data_t, bound_t=bound_t, equal_t=equal_t)

    def start(self) -> _Place:
        """Begin without a step, well away from every bound."""
        room = self.local.room
        push = 1.0 + float(np.abs(self.local.misfit).max(initial=0.0))
        return _Place(
            d=np.zeros(self.local.data.shape[1]),
            force=np.zeros(len(self.local.gap)),
            slack=np.maximum(-room, 0.1),
            push=np.full(len(room), push),
        )

    def left(self, now: _Place) -> _Left:
        local = self.local
        top = (
            self.data_t @ (local.misfit - local.data @ now.d)
            + self.equal_t @ now.force
            + self.bound_t @ now.push
        )
        low = local.gap - local.equal @ now.d
        breach = local.room + now.slack - local.bound @ now.d
        middle = float(now.slack @ now.push) / max(len(now.slack), 1)
        worst = max(
            float(np.abs(low).max(initial=0.0)),
            float(np.abs(breach).max(initial=0.0)),
            float(np.abs(top).max(initial=0.0)) / (1.0 + float(now.push.max(initial=0.0))),
            middle,
        )
        return _Left(top=top, low=low, breach=breach, middle=middle, worst=worst)

    def advance(self, now: _Place, left: _Left, symbolic: Symbolic) -> _Place:
        """Predict, then correct towards the middle of the way, with one factorisation."""
        ratio = now.push / now.slack
        kkt = Kkt.of(
            self.local.data,
            self.local.equal,
            symbolic,
            penalty=sparse.diags_array(np.sqrt(ratio)) @ self.local.bound,
        )
        straight = self._move(now, left, kkt, -now.slack * now.push)
        there = now.along(straight, min(_reach(now, straight), 1.0))
        after = float(there.slack @ there.push) / max(len(now.slack), 1)
        centre = (after / left.middle) ** 3 * left.middle
        target = centre - now.slack * now.push - straight.slack * straight.push
        move = self._move(now, left, kkt, target)
        return now.along(move, min(BACK * _reach(now, move), 1.0))

    def _move(self, now: _Place, left: _Left, kkt: Kkt, target: Vector) -> _Place:
        """Solve for the change that makes forces times slacks change by ``target``."""
        ratio = now.push / now.slack
        slope = left.top + self.bound_t @ (target / now.slack + ratio * left.breach)
        answer = kkt.columns(slope[:, None], left.low[:, None])[:, 0]
        d, rows = answer[: kkt.wide], len(left.low)
        slack = self.local.bound @ d - left.breach
        return _Place(
            d=d,
            force=-answer[kkt.wide : kkt.wide + rows],
            slack=slack,
            push=(target - now.push * slack) / now.slack,
        )


def _reach(now: _Place, move: _Place) -> float:
    """How far slacks and forces stay positive, at most 1 / BACK."""
    value = np.concatenate([now.slack, now.push])
    change = np.concatenate([move.slack, move.push])
    falling = change < 0
    return float(np.min(-value[falling] / change[falling], initial=1.0 / BACK))
