"""Since when, and how: the onset of a fault, step or drift, and the test at a logged event."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.special import ndtri
from scipy.stats import norm

from recon.suspects.days import Baseline, aligned, pseudo_inverse
from recon.suspects.visibility import Z_POWER

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from recon.suspects.days import DayEvidence, Key

    Vector = NDArray[np.float64]

CREDIBLE = 3.84
"""Fall of the statistic within which an onset is as good as the best one (95 %, chi-square, 1)."""


@dataclass(frozen=True, kw_only=True)
class Onset:
    """
    When a fault began, and how.

    Attributes
    ----------
    day : int
        Most likely first day; ``earliest`` to ``latest`` are as good.
    shape : str
        step, drift, cannot tell.
    size, u : float
        Of the step, or of the drift on the last day [printed unit].
    statistic : float
        Largest likelihood ratio, as a chi-square of one degree at that onset [-].
    """

    day: int
    earliest: int
    latest: int
    shape: str
    size: float
    u: float
    statistic: float


def onset_of(days: Sequence[DayEvidence], baseline: Baseline, key: Key) -> Onset | None:
    """
    Date a suspect's fault by the largest likelihood ratio over all onsets.

    Parameters
    ----------
    days : sequence of DayEvidence
        After the baseline, in time order.
    baseline : Baseline
    key : (kind, name)

    Returns
    -------
    Onset or None
        None where the suspect is not seen on any day.
    """
    if key not in baseline.keys:
        return None
    i = baseline.keys.index(key)
    _, laid = aligned(days, baseline.keys)
    pull = np.array([float(n[i] - m[i] @ baseline.constant) for n, m in laid])
    know = np.array([float(m[i, i]) for _, m in laid])
    if not know.any():
        return None
    step, drift = _ratios(pull, know, np.ones_like), _ratios(pull, know, _ramp)
    best_step, best_drift = int(np.argmax(step)), int(np.argmax(drift))
    gap = float(drift[best_drift] - step[best_step])
    shape = "drift" if gap > CREDIBLE else "step" if gap < -CREDIBLE else "cannot tell"
    ratios, best = (drift, best_drift) if shape == "drift" else (step, best_step)
    good = np.flatnonzero(ratios >= ratios[best] - CREDIBLE)
    form = (_ramp if shape == "drift" else np.ones_like)(pull[best:])
    weight = float(np.sum(form**2 * know[best:]))
    last = float(form[-1])
    return Onset(
        day=days[best].day,
        earliest=days[int(good[0])].day,
        latest=days[int(good[-1])].day,
        shape=shape,
        size=last * float(np.sum(form * pull[best:])) / weight,
        u=last / float(np.sqrt(weight)),
        statistic=float(ratios[best]),
    )


def _ramp(values: Vector) -> Vector:
    return np.arange(1.0, len(values) + 1.0)


def _ratios(pull: Vector, know: Vector, form: object) -> Vector:
    result = np.zeros(len(pull))
    for first in range(len(pull)):
        w = np.asarray(form(pull[first:]))  # type: ignore[operator]
        weight = float(np.sum(w**2 * know[first:]))
        if weight > 0:
            result[first] = float(np.sum(w * pull[first:])) ** 2 / weight
    return result


@dataclass(frozen=True, kw_only=True)
class BeforeAfter:
    """
    What a logged event changed in one instrument.

    Attributes
    ----------
    name : str
    change, u : float or None
        After less before, and its standard uncertainty [printed unit]; None where not seen.
    p_value : float or None
    level : float
        Stated false-alarm rate of this one test [-].
    changed : bool
    days_to_see : int or None
        Days after the event at which a change of ``asked`` would show with power 0.80; None =
        never, given the days before it.
    text : str
        In words.
    """

    name: str
    change: float | None
    u: float | None
    p_value: float | None
    level: float
    changed: bool
    days_to_see: int | None
    text: str


def before_and_after(
    before: Sequence[DayEvidence],
    after: Sequence[DayEvidence],
    key: Key,
    *,
    reference: float,
    unit: str = "",
    level: float = 0.01,
    share: float = 0.02,
) -> BeforeAfter:
    """
    Test one instrument across an event (calibration, range change, shutdown).

    Parameters
    ----------
    before, after : sequence of DayEvidence
        Days on either side, the day of the event left out.
    key : (kind, name)
        The instrument worked on.
    reference : float
        Its usual reading [printed unit].
    unit : str
    level : float
        Rate of false alarms of this test [-].
    share : float
        Change that one would like to see, as a share of the reference [-].

    Notes
    -----
    Everything else is taken to be as before; what is constant on both sides cancels.
    """
    keys, laid = aligned([*before, *after])
    nothing = f"{key[1]}: nothing checks it on both sides of the event"
    if key not in keys or not before or not after:
        return _unseen(key[1], level, nothing)
    i = keys.index(key)
    first, second = laid[: len(before)], laid[len(before) :]
    M0 = np.sum([m for _, m in first], axis=0)
    M1 = np.sum([m for _, m in second], axis=0)
    if M0[i, i] <= 0 or M1[i, i] <= 0:
        return _unseen(key[1], level, nothing)
    constant = pseudo_inverse(M0) @ np.sum([n for n, _ in first], axis=0)
    pull = float(np.sum([n for n, _ in second], axis=0)[i] - M1[i] @ constant)
    know = float(M1[i, i])
    variance = (know + float(M1[i] @ pseudo_inverse(M0) @ M1[i])) / know**2
    change, u = pull / know, float(np.sqrt(variance))
    p_value = float(2 * norm.sf(np.array([abs(change / u)]))[0])
    wanted = share * reference
    days = _days_to_see(wanted, level, know / len(after), float(M0[i, i]))
    changed = p_value < level
    if changed:
        text = f"{key[1]}: reads {change:+.3g} ± {u:.2g} {unit} after the event".rstrip()
    elif days is None:
        text = (
            f"{key[1]}: not yet visible; {share:.0%} would never show with the "
            f"{len(before)} days before the event"
        )
    else:
        text = f"{key[1]}: not yet visible; {share:.0%} would show in {days} days"
    return BeforeAfter(
        name=key[1],
        change=change,
        u=u,
        p_value=p_value,
        level=level,
        changed=changed,
        days_to_see=days,
        text=text,
    )


def _unseen(name: str, level: float, text: str) -> BeforeAfter:
    return BeforeAfter(
        name=name,
        change=None,
        u=None,
        p_value=None,
        level=level,
        changed=False,
        days_to_see=None,
        text=text,
    )


def _days_to_see(wanted: float, level: float, daily: float, before: float) -> int | None:
    """Days after an event at which a change is wanted to show: ``1/before + 1/(n daily)``."""
    needed = (wanted / (float(-ndtri(level / 2)) + Z_POWER)) ** 2 - 1 / before
    return None if needed <= 0 else int(np.ceil(1 / (needed * daily)))
