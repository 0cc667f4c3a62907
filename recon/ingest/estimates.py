"""What stands in for a value not yet known, and how sure that is, from the rule's own record."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import date, timedelta
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from recon.declare.site import EstimateRule

ENOUGH = 5
"""Past revisions needed before their spread is believed."""
ASSUMED = 0.10
"""Relative standard uncertainty of a rule without enough past revisions (planning value)."""


@dataclass(frozen=True, kw_only=True)
class Standin:
    """
    A value by rule.

    Attributes
    ----------
    value, u : float
        In the unit of the known values.
    revisions : int
        Past cases u rests on; 0 where it is assumed.
    """

    value: float
    u: float
    revisions: int


def stand_in(rule: EstimateRule, known: Mapping[date, float], day: date) -> Standin | None:
    """
    Apply an estimate rule.

    Parameters
    ----------
    rule : EstimateRule
    known : mapping
        Known day values; those on and after ``day`` are not looked at for the value.
    day : date

    Returns
    -------
    Standin or None
        None where nothing is known before the day: then there is no number. ``u`` is the root
        mean square of what the rule, applied as many days ahead as here, later proved to be off.

    Examples
    --------
    >>> from recon.declare.site import EstimateRule
    >>> past = {date(2026, 1, i): 27.0 + 0.1 * (-1) ** i for i in range(1, 11)}
    >>> result = stand_in(EstimateRule(rule="last"), past, date(2026, 1, 11))
    >>> round(result.value, 2), round(result.u, 2), result.revisions
    (27.1, 0.2, 9)
    """
    value = _rule(rule, known, day, day)
    if value is None:
        return None
    lag = (day - max(d for d in known if d < day)).days
    off = [
        actual - guess
        for past, actual in known.items()
        if past < day
        and (guess := _rule(rule, known, past, past - timedelta(days=lag - 1))) is not None
    ]
    if len(off) < ENOUGH:
        return Standin(value=value, u=ASSUMED * abs(value), revisions=0)
    return Standin(value=value, u=float(np.sqrt(np.mean(np.square(off)))), revisions=len(off))


def _rule(rule: EstimateRule, known: Mapping[date, float], day: date, before: date) -> float | None:
    """Value the rule gives for a day when only days before ``before`` are known."""
    earlier = sorted(d for d in known if d < before)
    if not earlier:
        return None
    if rule.rule == "last":
        return known[earlier[-1]]
    window = [known[d] for d in earlier if d >= day - timedelta(days=rule.days)]
    return float(np.mean(window)) if window else known[earlier[-1]]
