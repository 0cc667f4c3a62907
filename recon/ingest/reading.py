"""One value with where it comes from and which errors it shares, before it is a measurement.

An *error* is one unknown number with a standard uncertainty: a draw of a declared source, or the
own error of a sample or gauge that several values were computed with. A *pull* says how an error
enters a value: relative (value x factor x error) or absolute (factor x error), signed.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable
from dataclasses import dataclass
from datetime import date
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from recon.ingest.measured import Correction


@dataclass(frozen=True, kw_only=True, order=True)
class Error:
    """
    One unknown error.

    Attributes
    ----------
    name : str
        Declared source, or the tag and document (or day) of the value that brings it.
    first : date
        First plant day of the draw.
    u : float
        Standard uncertainty [the source's unit; canonical unit for an own error].
    own : bool
        Own error of one input; folded into the reading where nothing else uses it.
    """

    name: str
    first: date
    u: float
    own: bool = False


@dataclass(frozen=True, kw_only=True)
class Pull:
    """How one error enters one value: ``factor`` per unit of the error."""

    error: Error
    factor: float
    relative: bool


@dataclass(frozen=True, kw_only=True)
class Reading:
    """
    A value of an instrument, in canonical units.

    Attributes
    ----------
    tag : str
    day : date
        Plant day; the last one for a sample over several.
    document : str
        Sample or survey number; "" for a day of a meter.
    raw : float
        Before the chain, after decisions [instrument's unit; x h for a rate].
    value : float
        After the chain [t or 1].
    pulls : tuple of Pull
        Shared errors.
    days : dict
        Running hours of the value in each plant day it covers [h].
    coverage : float
        Covered share of running time [-].
    gap : float
        Standard uncertainty of what was filled in for uncovered time [t].
    moisture : float or None
        Of the chain [1].
    estimated : bool
        It, or an input of its chain, stands in by a rule.
    estimate_u : float
        Standard uncertainty of a value that stands in [canonical]; replaces the instrument's.
    stage : str
    shares : tuple of float
        Declared shares of the days, where the sampler's increments are known.
    evidence : tuple of str
    corrections : tuple of Correction
    set_aside, held : bool
        By decision.
    rolled_hours, roll_u : float
        Of a survey: roll to the cut [h], and its standard uncertainty [t].
    """

    tag: str
    day: date
    raw: float
    value: float
    days: tuple[tuple[date, float], ...]
    document: str = ""
    pulls: tuple[Pull, ...] = ()
    coverage: float = 1.0
    gap: float = 0.0
    moisture: float | None = None
    estimated: bool = False
    estimate_u: float = 0.0
    stage: str = ""
    shares: tuple[float, ...] = ()
    evidence: tuple[str, ...] = ()
    corrections: tuple[Correction, ...] = ()
    set_aside: bool = False
    held: bool = False
    rolled_hours: float = 0.0
    roll_u: float = 0.0

    @property
    def hours(self) -> float:
        """Running time the value speaks of [h]."""
        return sum(h for _, h in self.days)


def together(pulls: Iterable[Pull]) -> tuple[Pull, ...]:
    """Add pulls of one error: an oven that enters twice enters once, with the sum of its signs."""
    sums: dict[tuple[Error, bool], float] = defaultdict(float)
    for pull in pulls:
        sums[pull.error, pull.relative] += pull.factor
    return tuple(
        Pull(error=error, factor=factor, relative=relative)
        for (error, relative), factor in sums.items()
        if factor != 0.0
    )
