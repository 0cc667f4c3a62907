"""When the invented plant runs: its steps, its plant days, and generators of chance by name."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from datetime import UTC, date, datetime, timedelta
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from recon.declare.site import Site
from recon.plant_time import Calendar, month_days

EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
Floats = NDArray[np.float64]
Steps = NDArray[np.int64]


@dataclass(frozen=True, kw_only=True)
class Grid:
    """
    The steps of a simulation.

    Attributes
    ----------
    calendar : Calendar
    days : tuple of date
        Plant days, D of them.
    edges : ndarray
        UTC microseconds at which steps begin and the last ends, shape (T + 1,).
    first : ndarray
        Index of the first step of each day, and T, shape (D + 1,).
    """

    calendar: Calendar
    days: tuple[date, ...]
    edges: Steps
    first: Steps

    @property
    def steps(self) -> int:
        """Number of steps T."""
        return len(self.edges) - 1

    @cached_property
    def hours(self) -> float:
        """Length of a step [h]."""
        return float(self.edges[1] - self.edges[0]) / 3.6e9

    @cached_property
    def day_hours(self) -> Floats:
        """Length of each day [h], shape (D,)."""
        return np.diff(self.first) * self.hours

    def per_step(self, tonnes_a_day: float) -> float:
        """Turn t/d into t a step."""
        return tonnes_a_day * self.hours / 24.0

    def lag(self, hours: float) -> int:
        """Turn a time [h] into whole steps, at least one."""
        return max(1, round(hours / self.hours))

    def step_of(self, instant: datetime) -> int:
        """Give the step in which an instant lies, within the simulation."""
        found = int(np.searchsorted(self.edges, micros(instant), side="right")) - 1
        return min(max(found, 0), self.steps - 1)

    def span(self, first: int, last: int) -> tuple[int, int]:
        """Give the steps [from, to) of the days with indices first to last, both included."""
        return int(self.first[first]), int(self.first[last + 1])


def make_grid(site: Site, *, months: int, interval: int) -> Grid:
    """
    Lay out the steps of whole plant months from the site's first day.

    Parameters
    ----------
    site : Site
    months : int
        Whole months, 1 or more.
    interval : int
        Length of a step [min]; divides an hour.

    Raises
    ------
    ValueError
        Of a number of months or minutes that cannot be.
    """
    if months < 1:
        raise ValueError(f"months: 1 or more is expected, found {months}.")
    if interval < 1 or 60 % interval:
        raise ValueError(
            f"interval: minutes that divide an hour are expected (1 to 60), found {interval}."
        )
    calendar = Calendar(zone=site.zone, day_cut=site.day_cut)
    days: list[date] = []
    month = site.valid_from.replace(day=1)
    for _ in range(months):
        days.extend(month_days(month))
        month = (month + timedelta(days=32)).replace(day=1)
    days = [day for day in days if day >= site.valid_from]
    cuts = np.array([micros(calendar.start(d)) for d in (*days, days[-1] + timedelta(days=1))])
    step = interval * 60_000_000
    edges = np.arange(cuts[0], cuts[-1] + 1, step, dtype=np.int64)
    return Grid(
        calendar=calendar,
        days=tuple(days),
        edges=edges,
        first=((cuts - cuts[0]) // step).astype(np.int64),
    )


def micros(instant: datetime) -> int:
    """Give an aware instant as whole UTC microseconds since 1970."""
    return (instant - EPOCH) // timedelta(microseconds=1)


def instant(at: int) -> datetime:
    """Give whole UTC microseconds since 1970 as an aware instant."""
    return EPOCH + timedelta(microseconds=int(at))


def chance(seed: int, *names: str) -> np.random.Generator:
    """
    Give a generator of its own to each name, so that no draw depends on another's.

    Switching a fault on or adding an instrument leaves every other draw as it was.
    """
    digest = hashlib.sha256("|".join((str(seed), *names)).encode()).digest()
    return np.random.Generator(np.random.PCG64(int.from_bytes(digest[:16], "big")))
