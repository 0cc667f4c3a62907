"""Which UTC interval a plant day is: 23, 24 or 25 hours, without gap or overlap.

A wall time that does not exist (clocks put forward) moves to the first instant after the gap; a
repeated one takes its first occurrence. Inside, everything is UTC; plant time is for the edge.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import UTC, date, datetime, time, timedelta
from functools import lru_cache
from zoneinfo import ZoneInfo


@dataclass(frozen=True, kw_only=True)
class Calendar:
    """
    A plant's days.

    Parameters
    ----------
    zone : str
        IANA zone name.
    day_cut : time
        Wall time at which a plant day begins.

    Examples
    --------
    >>> calendar = Calendar(zone="Europe/Berlin", day_cut=time(0, 0))
    >>> calendar.hours(date(2026, 3, 29)), calendar.hours(date(2026, 10, 25))
    (23.0, 25.0)
    """

    zone: str
    day_cut: time

    def start(self, day: date) -> datetime:
        """Give the UTC instant at which a plant day begins."""
        return _instant(self.zone, day, self.day_cut)

    def end(self, day: date) -> datetime:
        """Give the UTC instant at which a plant day ends, the start of the next."""
        return self.start(day + timedelta(days=1))

    def hours(self, day: date) -> float:
        """Length of a plant day [h]."""
        return (self.end(day) - self.start(day)).total_seconds() / 3600

    def day_of(self, instant: datetime) -> date:
        """Give the plant day an aware instant lies in."""
        day = instant.astimezone(ZoneInfo(self.zone)).date()
        if instant < self.start(day):
            return day - timedelta(days=1)
        if instant >= self.end(day):
            return day + timedelta(days=1)
        return day

    def local(self, instant: datetime) -> datetime:
        """Give an aware instant in plant time, for screens and files."""
        return instant.astimezone(ZoneInfo(self.zone))


def month_days(month: date) -> tuple[date, ...]:
    """List the plant days of the month that begins with the plant day ``month``."""
    first = month.replace(day=1)
    after = (first + timedelta(days=32)).replace(day=1)
    return tuple(first + timedelta(days=i) for i in range((after - first).days))


@lru_cache(maxsize=20_000)
def _instant(zone: str, day: date, wall: time) -> datetime:
    place = ZoneInfo(zone)
    local = datetime.combine(day, wall, tzinfo=place)
    instant = local.astimezone(UTC)
    if instant.astimezone(place).replace(tzinfo=None) == local.replace(tzinfo=None):
        return instant
    return _end_of_gap(place, local, instant)


def _end_of_gap(place: ZoneInfo, local: datetime, instant: datetime) -> datetime:
    """Find the first instant after the gap that swallowed a wall time, to the second."""
    low, high = instant - timedelta(days=1), instant + timedelta(days=1)
    before = low.astimezone(place).replace(tzinfo=None)
    wanted = local.replace(tzinfo=None)
    assert before < wanted
    while high - low > timedelta(seconds=1):
        middle = low + (high - low) / 2
        middle = middle.replace(microsecond=0)
        if middle <= low:
            break
        if middle.astimezone(place).replace(tzinfo=None) < wanted:
            low = middle
        else:
            high = middle
    return high.replace(microsecond=0)
