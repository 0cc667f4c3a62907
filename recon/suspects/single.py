"""The single most likely fault: the readings and sources that would explain the most alone."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from recon.reconcile.figures import REDUNDANT
from recon.suspects.alarm import standardised

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from recon.reconcile.answer import Answer
    from recon.suspects.alarm import Alarm

    Vector = NDArray[np.float64]

ALIKE = 1e-7
"""Two signatures whose cosine misses one by less than this cannot be told apart."""


@dataclass(frozen=True, kw_only=True)
class Suspect:
    """
    A group of explanations that cannot be told apart.

    Attributes
    ----------
    kind : str
        meter, assay, sampler, stock, source, leak, unexplained.
    names : tuple of str
        The group, most likely first.
    size, u : float or None
        Size of the fault and its standard uncertainty, for the first name, in ``unit``.
    unit : str
    probability : float or None
        Of the group among all single explanations.
    """

    kind: str
    names: tuple[str, ...]
    size: float | None
    u: float | None
    unit: str
    probability: float | None


def most_likely(answer: Answer, alarm: Alarm) -> tuple[Suspect, ...]:
    """
    Name the group that alone explains the most, or say that nothing does.

    Parameters
    ----------
    answer : Answer
    alarm : Alarm

    Returns
    -------
    tuple of Suspect
        Empty where no alarm is raised.
    """
    if not alarm.raised:
        return ()
    tests = answer.tests
    t = standardised(tests)
    checked = np.flatnonzero(tests.leverage > REDUNDANT)
    if alarm.largest is None or alarm.limit is None or alarm.largest <= alarm.limit:
        return (
            Suspect(kind="unexplained", names=(), size=None, u=None, unit="", probability=None),
        )
    best = int(checked[np.argmax(np.abs(t[checked]))])
    shared = tests.residual_covariance(np.array([best]))[checked, 0]
    cosine = np.abs(shared) / np.sqrt(tests.leverage[checked] * tests.leverage[best])
    group = [best, *(int(i) for i in checked[cosine >= 1 - ALIKE] if i != best)]
    half = 0.5 * t[checked] ** 2
    weight = np.exp(half - half.max())
    probability = float(weight[cosine >= 1 - ALIKE].sum() / weight.sum())
    return (_suspect(answer, group, float(t[best]), probability),)


def _suspect(answer: Answer, group: list[int], t: float, probability: float) -> Suspect:
    measured = answer.test_state.fit.measurements
    draws = answer.test_state.problem.draws
    m = len(measured)
    best = group[0]
    spread = float(answer.tests.leverage[best]) ** 0.5
    names = tuple(measured[i].name if i < m else draws[i - m].source for i in group)
    if best < m:
        reading = measured[best]
        unit_u = (reading.u or 0.0) / reading.unit_factor
        return Suspect(
            kind=reading.kind.value,
            names=names,
            size=t * unit_u / spread,
            u=unit_u / spread,
            unit=reading.unit,
            probability=probability,
        )
    u = draws[best - m].u
    return Suspect(
        kind="source",
        names=names,
        size=-t * u / spread,
        u=u / spread,
        unit="",
        probability=probability,
    )
