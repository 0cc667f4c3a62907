"""Are the stated uncertainties right: overall and by instrument, from fault-free days."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.stats import chi2

from recon.findings import NotApplicable
from recon.suspects.signatures import WEAK

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from recon.reconcile.answer import Answer

    Vector = NDArray[np.float64]

CONFIDENCE = 0.95


@dataclass(frozen=True, kw_only=True)
class Ratio:
    """
    A variance found, by the variance stated, with confidence limits [-].

    Attributes
    ----------
    name : str
        Instrument, or "overall".
    days : int
    value, low, high : float
        Ratio of variances; 1 where the stated uncertainty is right.
    proposal : float or None
        Factor by which to change the stated standard uncertainty; None where 1 lies within the
        limits, or where the ratio would be negative.
    text : str
    """

    name: str
    days: int
    value: float
    low: float
    high: float
    proposal: float | None
    text: str


def overall(objectives: Sequence[float], freedoms: Sequence[int]) -> Ratio | NotApplicable:
    """
    Compare all residuals with their stated size.

    Parameters
    ----------
    objectives : sequence of float
        ``z'z`` of each fault-free day [-].
    freedoms : sequence of int
        Degrees of freedom of each [-].

    Notes
    -----
    ``sum z'z / sum m`` times the degrees of freedom is chi-square where days are independent. A
    source drawn once for the span makes days alike and the limits too narrow.
    """
    freedom = int(sum(freedoms))
    if freedom <= 0:
        return NotApplicable(
            reason="no balance is redundant on any day, so nothing can be compared"
        )
    return _ratio("overall", len(objectives), float(sum(objectives)), freedom, share=1.0)


def by_instrument(days: Sequence[Answer]) -> tuple[Ratio, ...]:
    """
    Compare each instrument's residuals with their stated size.

    Parameters
    ----------
    days : sequence of Answer
        Fits of fault-free single days.

    Notes
    -----
    The variance of a standardised residual is ``r k + 1 - r``, k the ratio for the reading itself
    and r its share, if all others' uncertainties are right: change one at a time, largest
    departure first, and look again. Readings with r below 0.1 are left out. The mean is taken
    out, since a constant bias is no matter of the random part; it costs a degree of freedom.
    """
    series: dict[str, list[tuple[float, float]]] = {}
    for answer in days:
        leverage, residuals = answer.tests.leverage, answer.tests.residuals
        for row, m in enumerate(answer.test_state.fit.measurements):
            share = float(leverage[row])
            if share >= WEAK:
                own = float(residuals[row]) / float(np.sqrt(share))
                series.setdefault(m.name, []).append((own, share))
    result = []
    for name, found in series.items():
        if len(found) < 3:
            continue
        t = np.array([v for v, _ in found])
        share = float(np.mean([s for _, s in found]))
        squares = float(np.sum((t - t.mean()) ** 2))
        result.append(_ratio(name, len(found), squares, len(found) - 1, share=share))
    return tuple(sorted(result, key=lambda r: -abs(np.log(max(r.value, 1e-3)))))


def _ratio(name: str, days: int, squares: float, freedom: int, *, share: float) -> Ratio:
    """Turn a sum of squares into a ratio for the reading itself, with limits."""
    tail = (1 - CONFIDENCE) / 2
    value, low, high = (
        1 + (squares / by - 1) / share
        for by in (freedom, float(chi2.isf(tail, freedom)), float(chi2.isf(1 - tail, freedom)))
    )
    right = low <= 1.0 <= high
    proposal = None if right or value <= 0 else float(np.sqrt(value))
    if right:
        text = f"{name}: the stated uncertainty agrees with {days} days"
    elif proposal is None:
        text = f"{name}: residuals are smaller than the others' uncertainties allow; review those"
    else:
        text = (
            f"{name}: the spread over {days} days is {proposal:.2f} times the stated uncertainty "
            f"({max(low, 0.0) ** 0.5:.2f} to {high**0.5:.2f}); multiply it by {proposal:.2f}, "
            "as a recorded decision"
        )
    return Ratio(
        name=name, days=days, value=value, low=low, high=high, proposal=proposal, text=text
    )
