"""Which months to date are to be computed now: a pure rule, the clock is an argument.

A run is always the month to date. It is due first when its last day has ended and settled, and
again when new data of the open month have come in. Periods are computed from the plant's calendar,
never scheduled, so an outage loses nothing.
"""

from __future__ import annotations

from collections.abc import Collection, Iterator, Mapping, Sequence
from dataclasses import dataclass
from datetime import date, datetime, timedelta
from typing import Literal

from recon.plant_time import Calendar, month_days

QUIET = timedelta(hours=1)
"""New data are taken in once nothing more has come for so long."""
SPACING = timedelta(hours=6)
"""The same period is stated again at most so often; data that never rest wait no longer."""


@dataclass(frozen=True, kw_only=True)
class LastRun:
    """
    The run that speaks for a month through a day.

    Attributes
    ----------
    month, through : date
        First plant day of the month, last plant day computed.
    knowledge_cut : datetime
        What was known by then is in it, aware UTC.
    published_at : datetime
        When it was published or last confirmed as still right, aware UTC.
    """

    month: date
    through: date
    knowledge_cut: datetime
    published_at: datetime


@dataclass(frozen=True, kw_only=True)
class Arrivals:
    """
    What became known of a month after its latest run was cut.

    Attributes
    ----------
    first, last : datetime
        Earliest and latest known-at of it, aware UTC; a month before that was stated anew counts
        with the time of that.
    """

    first: datetime
    last: datetime


@dataclass(frozen=True, kw_only=True)
class Due:
    """A month to date that is to be computed, and why."""

    month: date
    through: date
    since: datetime
    reason: Literal["settled", "new data", "asked"]


def due_runs(
    *,
    calendar: Calendar,
    settling: timedelta,
    now: datetime,
    first_day: date,
    last_runs: Sequence[LastRun],
    arrivals: Mapping[date, Arrivals],
    closed: Collection[date] = (),
    cap: int = 10,
) -> tuple[Due, ...]:
    """
    Find what is due, oldest month and day first.

    Parameters
    ----------
    calendar : Calendar
    settling : timedelta
        From a day's end to its first computation.
    now : datetime
        Aware.
    first_day : date
        First plant day the site accounts for.
    last_runs : sequence of LastRun
        At most one for a month and day.
    arrivals : mapping of date to Arrivals
        By month, compared with its latest day's run; a month without news is left out.
    closed : collection of date
        First days of months that nobody may state anew.
    cap : int
        At most so many, so that an outage is caught up step by step.

    Returns
    -------
    tuple of Due

    Notes
    -----
    New data make the latest day of their month due, because that run states every day of the
    month anew. A day that never was computed is due as *settled* even when later days were.

    Examples
    --------
    >>> from datetime import UTC, time
    >>> due_runs(
    ...     calendar=Calendar(zone="UTC", day_cut=time(6)),
    ...     settling=timedelta(hours=30),
    ...     now=datetime(2026, 3, 3, 12, tzinfo=UTC),
    ...     first_day=date(2026, 3, 1),
    ...     last_runs=(),
    ...     arrivals={},
    ... )[0].through
    datetime.date(2026, 3, 1)
    """
    done = {(run.month, run.through): run for run in last_runs}
    shut = frozenset(closed)
    found: list[Due] = []
    for month in _months(first_day, calendar.day_of(now)):
        if len(found) >= cap:
            break
        if month in shut:
            continue
        settled = [
            (day, calendar.end(day) + settling)
            for day in month_days(month)
            if day >= first_day and calendar.end(day) + settling <= now
        ]
        found += [
            Due(month=month, through=day, since=since, reason="settled")
            for day, since in settled
            if (month, day) not in done
        ]
        again = _again(settled[-1][0], done, month, arrivals, now) if settled else None
        if again is not None:
            found.append(again)
    return tuple(found[:cap])


def _again(
    latest: date,
    done: Mapping[tuple[date, date], LastRun],
    month: date,
    arrivals: Mapping[date, Arrivals],
    now: datetime,
) -> Due | None:
    """The month's latest day once more, where its new data have come to rest."""
    run, news = done.get((month, latest)), arrivals.get(month)
    if run is None or news is None:
        return None
    rested = now - news.last >= QUIET or now - news.first >= SPACING
    if not rested or now - run.published_at < SPACING:
        return None
    since = max(min(news.last + QUIET, news.first + SPACING), run.published_at + SPACING)
    return Due(month=month, through=latest, since=since, reason="new data")


def _months(first: date, last: date) -> Iterator[date]:
    month = first.replace(day=1)
    while month <= last:
        yield month
        month = (month + timedelta(days=32)).replace(day=1)
