"""The direct engine for large problems: sparse factors of each local problem's optimality system.

Meant for a joint month or a large network, where dense factors would take minutes. Its figures
agree with the closed form's; what it cannot settle it leaves to the next engine.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
from scipy import sparse

from recon.errors import ContradictionError, NotAcceptedError
from recon.reconcile.solver import Step
from recon.solve.bounds import settle_bounds
from recon.solve.interior import interior
from recon.solve.iterate import iterate
from recon.solve.kkt import Kkt, Symbolic

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from recon.reconcile.linearise import Local
    from recon.reconcile.solver import Solution
    from recon.reconcile.state import State

    Vector = NDArray[np.float64]
    Gradients = Vector | sparse.csr_array

OPEN = 1e-8
"""An equality open by more than this, per typical flow, cannot be met."""
SEEN = 1e-6
"""A figure whose gradient has a larger share than this in the null space is not determined."""
DIRECTIONS, ROUNDS, SEED = 8, 8, 20_261_201
WHOLE = 0.01
"""Degrees of freedom farther than this from a whole number are not believed."""
MOST_SETS = 20
"""Sets of active bounds tried before the search goes inside the bounds."""
FITTED = "fitted"
"""Where a set of sensitivities keeps the variances of fitted values."""
BLOCK = 256
"""Columns solved for at once."""


class SparseDirect:
    """Engine that solves each local problem by sparse factorisation."""

    name = "sparse direct"

    def solve(self, state: State) -> Solution:
        """Find the optimum; see ``recon.reconcile.solver.Engine``."""
        return iterate(state, LocalSolver(), engine=self.name)

    def sensitivities(self, local: Local) -> SparseSensitivities:
        """Factorise the problem around a point, inequality bounds left out."""
        return SparseSensitivities(local=local, kkt=Kkt.of(local.data, local.equal))


class LocalSolver:
    """Solves one local problem after the other, each from the active bounds of the last."""

    def __init__(self) -> None:
        self._symbolic = Symbolic()
        self._active: NDArray[np.bool_] | None = None

    def __call__(self, local: Local) -> Step:
        """
        Solve one local problem.

        Raises
        ------
        ContradictionError
            The equalities alone cannot be met.
        NotAcceptedError
            No set of active bounds settles.
        """
        start = self._active
        if start is None or len(start) != len(local.room):
            start = np.zeros(len(local.room), dtype=np.bool_)
        try:
            return self._settled(local, start)
        except NotAcceptedError:
            step, active = interior(local)
        try:
            return self._settled(local, active)
        except NotAcceptedError:
            return step

    def _settled(self, local: Local, start: NDArray[np.bool_]) -> Step:
        step, self._active = settle_bounds(
            local,
            lambda active: self._with_active(local, active),
            start=start,
            engine="sparse direct",
            most=MOST_SETS,
        )
        return step

    def _with_active(self, local: Local, active: NDArray[np.bool_]) -> Step:
        equal, gap = local.equal, local.gap
        if active.any():
            equal = sparse.csr_array(sparse.vstack([equal, local.bound[active]]))
            gap = np.concatenate([gap, local.room[active]])
        kkt = Kkt.of(local.data, equal, self._symbolic)
        move, force = kkt.step(local.misfit, gap)
        left = np.abs(gap - equal @ move)
        if float(np.max(left, initial=0.0)) > OPEN * (1.0 + float(np.abs(move).max())):
            _refuse(local, active, left)
        bound_force = np.zeros(len(local.room))
        bound_force[active] = force[len(local.gap) :]
        return Step(move=move, equal_force=force[: len(local.gap)], bound_force=bound_force)


def _refuse(local: Local, active: NDArray[np.bool_], left: Vector) -> None:
    """Name what stays open; only equalities that no bound disturbs prove a contradiction."""
    names = [*local.equal_names, *(n for n, a in zip(local.bound_names, active, strict=True) if a)]
    worst = [
        f"{names[i]} (open by {left[i]:.2g} of its size)"
        for i in np.argsort(-left)[:5]
        if left[i] > OPEN
    ]
    if active.any():
        raise NotAcceptedError([f"sparse direct: with its bounds, {worst[0]} stays open."])
    raise ContradictionError(worst)


@dataclass(frozen=True, kw_only=True)
class SparseSensitivities:
    """Sensitivities by sparse factors; see ``recon.reconcile.solver.Sensitivities``."""

    local: Local
    kkt: Kkt

    @cached_property
    def _live(self) -> NDArray[np.bool_]:
        live = np.ones(self.local.data.shape[0], dtype=np.bool_)
        live[: len(self.local.standing)] = ~self.local.standing
        return live

    @cached_property
    def degrees_of_freedom(self) -> int:
        """
        Trace of what projects data onto residuals, a whole number.

        Raises
        ------
        NotAcceptedError
            It is not near a whole number, so the factors are not to be trusted.
        """
        trace = float(self.leverage.sum())
        if abs(trace - round(trace)) > WHOLE:
            raise NotAcceptedError(
                [f"sparse direct: degrees of freedom come to {trace:.4f}, not a whole number."]
            )
        return round(trace)

    @cached_property
    def leverage(self) -> Vector:
        """Share of each datum's variance left in its residual, shape (m + g,)."""
        if FITTED not in self.__dict__:
            self.variances(sparse.csr_array((0, self.kkt.wide)))
        fitted = self.__dict__[FITTED]
        return np.where(self._live, np.clip(1.0 - fitted, 0.0, 1.0), 0.0)

    @cached_property
    def residuals(self) -> Vector:
        """Standardised residuals at the minimum without inequality bounds, shape (m + g,)."""
        move, _ = self.kkt.step(self.local.misfit, self.local.gap)
        return np.asarray(self.local.misfit - self.local.data @ move)

    def rows(self, gradients: Gradients) -> Vector:
        """Sensitivities of k quantities, shape (k, m + g + h)."""
        wide = self.kkt.wide
        answer = self.kkt.columns(_dense(gradients).T, loose=~self.determined(gradients))
        to_data = self.local.data @ answer[:wide]
        to_held = answer[wide + self.local.held_rows] * self.local.held_pull[:, None]
        return np.asarray(np.vstack([to_data, to_held]).T)

    def variances(self, gradients: Gradients) -> Vector:
        """
        Variances of k quantities from all data, held values taken as exact, shape (k,).

        The first call solves for nearly every column of the covariance and keeps the fitted values'
        variances, so that leverages cost nothing more.
        """
        wide = self.kkt.wide
        asks = sparse.csr_array(gradients)
        first_call = FITTED not in self.__dict__
        forms = sparse.csc_array(sparse.vstack([self.local.data, asks]) if first_call else asks)
        used = np.flatnonzero(np.diff(forms.indptr))
        total = np.zeros(forms.shape[0])
        loose = ~self.determined(sparse.csr_array(sparse.eye_array(wide)))
        for first in range(0, len(used), BLOCK):
            asked = used[first : first + BLOCK]
            unit = np.zeros((wide, len(asked)))
            unit[asked, np.arange(len(asked))] = 1.0
            columns = self.kkt.columns(unit, loose=loose[asked])[:wide]
            total += (forms[:, asked].tocoo().multiply(forms @ columns)).sum(axis=1)
        total = np.maximum(total, 0.0)
        if first_call:
            self.__dict__[FITTED] = total[: self.local.data.shape[0]]
            return total[self.local.data.shape[0] :]
        return total

    def shared_rows(self, gradients: Gradients) -> Vector:
        """Sensitivities to draws' priors and held values only, shape (k, g + h)."""
        wide, held = self.kkt.wide, self.local.held_rows
        m, g = len(self.local.standing), len(self._live) - len(self.local.standing)
        top = np.zeros((wide, g + len(held)))
        top[:, :g] = self.local.data[m:].toarray().T
        gap = np.zeros((self.local.equal.shape[0], g + len(held)))
        gap[held, g + np.arange(len(held))] = self.local.held_pull
        return np.asarray(gradients @ self.kkt.columns(top, gap)[:wide])

    @cached_property
    def _unseen(self) -> Vector:
        return self.kkt.unseen(DIRECTIONS, ROUNDS, SEED)

    def determined(self, gradients: Gradients) -> NDArray[np.bool_]:
        """Which quantities have no share in the unseen directions, shape (k,)."""
        forms = sparse.csr_array(gradients)
        met = np.sqrt(np.mean(np.asarray(forms @ self._unseen) ** 2, axis=1))
        length = np.sqrt(np.asarray(forms.multiply(forms).sum(axis=1)).ravel())
        return np.asarray(met <= SEEN * length)

    def residual_covariance(self, data: NDArray[np.intp]) -> Vector:
        """Columns of the residuals' covariance, shape (m + g, len(data))."""
        wide = self.kkt.wide
        moved = self.kkt.columns(self.local.data[data].toarray().T)[:wide]
        columns = -np.asarray(self.local.data @ moved)
        columns[data, np.arange(len(data))] += 1.0
        live = self._live.astype(np.float64)
        return np.asarray(columns * live[:, None] * live[data][None, :])


def _dense(gradients: Gradients) -> Vector:
    return gradients if isinstance(gradients, np.ndarray) else gradients.toarray()
