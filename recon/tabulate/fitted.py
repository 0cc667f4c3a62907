"""What the fit makes of amounts, stocks and their sums, each with its joint uncertainty."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from recon.flowsheet.balances import Amount, Linear, Stock
from recon.flowsheet.network import MASS
from recon.reconcile.figures import quantity, weights

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from recon.flowsheet.balances import Unknown
    from recon.reconcile.answer import Answer, Estimate
    from recon.reconcile.problem import Measurement

    Vector = NDArray[np.float64]

BLOCK = 256
"""Rows of sensitivities held in memory at once."""
NOT_IN_FIT = "not part of the fit"


@dataclass(frozen=True, kw_only=True)
class Fit:
    """
    One fitted number.

    Attributes
    ----------
    value, u : float or None
        None where nothing determines it.
    reason : str
        Why not; empty where there is a number.
    """

    value: float | None
    u: float | None
    reason: str = ""


Ratio = tuple[Linear, Linear | None]
"""Numerator and, for a ratio, denominator."""


class Fitted:
    """
    Reads a month's answer.

    Parameters
    ----------
    answer : Answer

    Notes
    -----
    The day's figures are slices of the joint fit, so amounts of days add up to the month exactly;
    their uncertainties do not, and come from the month's covariance.
    """

    def __init__(self, answer: Answer) -> None:
        self._answer = answer
        self._estimates: dict[tuple[Unknown, bool], Estimate] = {
            (e.unknown, e.fraction): e for e in answer.estimates
        }
        self.reconciled = {
            (r.measurement.name, r.measurement.period): r for r in answer.measurements
        }

    def amount(self, period: int, stream: str, q: str) -> Fit:
        """Give a stream's amount of a day [t]."""
        return self._estimate(Amount(period, stream, q), fraction=False)

    def grade(self, period: int, stream: str, q: str) -> Fit:
        """Give a stream's mass fraction of a day [1]."""
        return self._estimate(Amount(period, stream, q), fraction=True)

    def stock(self, boundary: int, node: str, q: str) -> Fit:
        """Give a stock at a boundary [t]."""
        return self._estimate(Stock(boundary, node, q), fraction=False)

    def has(self, unknown: Unknown) -> bool:
        """Whether the fit knows an unknown at all."""
        return unknown in self._answer.state.index

    def plain(self, form: Linear) -> float | None:
        """Evaluate a sum at the solution, determined or not; None where the fit lacks a term."""
        index, x = self._answer.state.index, self._answer.solution.point.x
        if not all(self.has(u) for u, _ in form):
            return None
        return float(sum(c * x[index[u]] for u, c in form))

    def ratios(self, asked: Sequence[Ratio]) -> list[Fit]:
        """Evaluate sums, or ratios of sums, with their joint uncertainty."""
        result: list[Fit] = []
        for first in range(0, len(asked), BLOCK):
            result += self._block(asked[first : first + BLOCK])
        return result

    def means(self, groups: Sequence[Sequence[tuple[float, Measurement]]]) -> list[Fit]:
        """
        Evaluate weighted sums of what the fit makes of measured functions.

        Parameters
        ----------
        groups : sequence of sequence of (float, Measurement)
            Weights and measurements; those only compared may be among them.
        """
        result: list[Fit] = []
        for first in range(0, len(groups), BLOCK):
            block = groups[first : first + BLOCK]
            found = [self._measured_sum(group) for group in block]
            result += self._uncertain(found)
        return result

    def of_one(self, group: Sequence[tuple[float, Measurement]]) -> Fit | None:
        """Give the estimate that one measurement is of, where it is of a single one."""
        if len(group) != 1 or len(group[0][1].parts) != 1:
            return None
        part = group[0][1].parts[0]
        if len(part.of) != 1 or part.share * part.of[0][1] * group[0][0] != 1.0:
            return None
        unknown = part.of[0][0]
        if part.over is None:
            found = self._estimates.get((unknown, False))
        elif part.over == ((unknown._replace(quantity=MASS), 1.0),):
            found = self._estimates.get((unknown, True))
        else:
            return None
        return None if found is None else Fit(value=found.value, u=found.u, reason=found.reason)

    def _estimate(self, unknown: Unknown, *, fraction: bool) -> Fit:
        found = self._estimates.get((unknown, fraction))
        if found is None:
            return Fit(value=None, u=None, reason=NOT_IN_FIT)
        return Fit(value=found.value, u=found.u, reason=found.reason)

    def _block(self, asked: Sequence[Ratio]) -> list[Fit]:
        state, solution = self._answer.state, self._answer.solution
        found: list[tuple[float | None, Vector] | None] = []
        for of, over in asked:
            if not all(self.has(u) for u, _ in (*of, *(over or ()))):
                found.append(None)
                continue
            q = quantity(state, solution, of, over)
            found.append((q.value, q.gradient))
        return self._uncertain(found)

    def _measured_sum(
        self, group: Sequence[tuple[float, Measurement]]
    ) -> tuple[float | None, Vector] | None:
        state, solution = self._answer.state, self._answer.solution
        total, gradient = 0.0, np.zeros(len(solution.local.scale))
        for weight, m in group:
            for part in m.parts:
                if not all(self.has(u) for u, _ in (*part.of, *(part.over or ()))):
                    return None
                q = quantity(state, solution, part.of, part.over)
                if q.value is None:
                    return None, gradient
                total += weight * part.share * q.value
                gradient = gradient + weight * part.share * q.gradient
        return total, gradient

    def _uncertain(self, found: Sequence[tuple[float | None, Vector] | None]) -> list[Fit]:
        if not found:
            return []
        answer = self._answer
        wide = len(answer.solution.local.scale)
        gradients = np.array([np.zeros(wide) if f is None else f[1] for f in found])
        known = answer.sensitivities.determined(gradients)
        u = weights(answer.state, answer.solution, answer.sensitivities, gradients).u
        return [self._fit(f, bool(known[i]), float(u[i])) for i, f in enumerate(found)]

    @staticmethod
    def _fit(found: tuple[float | None, Vector] | None, known: bool, u: float) -> Fit:
        if found is None:
            return Fit(value=None, u=None, reason=NOT_IN_FIT)
        if found[0] is None:
            return Fit(value=None, u=None, reason="stream stands")
        if not known:
            return Fit(value=None, u=None, reason="cannot be found")
        return Fit(value=found[0], u=u)
