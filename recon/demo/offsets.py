"""What each shared error truly is: a draw a day, a draw a calibration, or one throughout."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from recon.declare.site import ErrorSource, Instrument, Site
from recon.demo.clock import Floats, Grid, chance

EVERY_DAYS = 28
"""Days between logged calibrations of one instrument."""
ON_DAY = {"WT-210": 18}
"""First calibration of instruments whose day a fault's story needs; others by their name."""


@dataclass(frozen=True, kw_only=True)
class Draw:
    """One draw of a shared error, in force from the day with index ``first`` [its unit]."""

    source: str
    first: int
    value: float


@dataclass(frozen=True, kw_only=True)
class Offsets:
    """
    All shared errors of a simulation.

    Attributes
    ----------
    site : Site
    draws : tuple of Draw
    by_day : dict
        Offset of each source on each day, shape (D,).
    """

    site: Site
    draws: tuple[Draw, ...]
    by_day: dict[str, Floats]

    def relative(self, instrument: Instrument) -> Floats:
        """Sum of the relative offsets in an instrument, shape (D,) [-]."""
        return self._sum(instrument, relative=True)

    def absolute(self, instrument: Instrument) -> Floats:
        """Sum of the absolute offsets in an instrument, shape (D,) [its unit]."""
        return self._sum(instrument, relative=False)

    @cached_property
    def _relative(self) -> dict[str, bool]:
        return {s.name: s.relative for s in self.site.sources}

    def _sum(self, instrument: Instrument, *, relative: bool) -> Floats:
        total = np.zeros(len(next(iter(self.by_day.values()))))
        for shared in instrument.shared:
            if self._relative[shared.source] is relative:
                total = total + shared.factor * self.by_day[shared.source]
        return total


def calibration_days(tag: str, grid: Grid) -> tuple[int, ...]:
    """List the indices of days on whose morning an instrument is calibrated."""
    first = ON_DAY.get(tag, 4 + sum(tag.encode()) % 22)
    return tuple(range(first, len(grid.days), EVERY_DAYS))


def calibrated_tags(site: Site) -> tuple[str, ...]:
    """List the tags whose logged calibrations end a draw."""
    tags = {s.calibrated_by for s in site.sources if s.lasts == "calibration"}
    return tuple(sorted(t for t in tags if t is not None))


def draw_offsets(site: Site, *, grid: Grid, seed: int) -> Offsets:
    """
    Draw every shared error as the site file declares it.

    Parameters
    ----------
    site : Site
    grid : Grid
    seed : int
    """
    draws: list[Draw] = []
    by_day: dict[str, Floats] = {}
    for source in site.sources:
        first = _starts(source, grid)
        values = source.u * chance(seed, "offset", source.name).standard_normal(len(first))
        draws += [
            Draw(source=source.name, first=f, value=float(v))
            for f, v in zip(first, values, strict=True)
        ]
        length = np.diff([*first, len(grid.days)])
        by_day[source.name] = np.repeat(values, length)
    return Offsets(site=site, draws=tuple(draws), by_day=by_day)


def _starts(source: ErrorSource, grid: Grid) -> Sequence[int]:
    if source.lasts == "day":
        return range(len(grid.days))
    if source.lasts == "calibration" and source.calibrated_by is not None:
        return (0, *calibration_days(source.calibrated_by, grid))
    return (0,)
