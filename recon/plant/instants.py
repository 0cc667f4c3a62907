"""Which instant a source means: aware times, text with an offset, or integer microseconds.

A time without a zone is not guessed. Only a sheet, which cannot hold a zone, may say by its
column's name that it speaks plant time.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from datetime import UTC, date, datetime, timedelta
from typing import cast
from zoneinfo import ZoneInfo

import numpy as np
from numpy.typing import NDArray

from recon.errors import NoInstantError

EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
MICROSECOND = timedelta(microseconds=1)
EARLIEST = datetime(1970, 1, 1, tzinfo=UTC)
LATEST = datetime(2200, 1, 1, tzinfo=UTC)


def instant_of(found: object) -> datetime:
    """
    Give the UTC instant of a value.

    Parameters
    ----------
    found : object
        An aware datetime, ISO 8601 text with an offset or ``Z``, or integer microseconds since
        1970 UTC.

    Raises
    ------
    NoInstantError
        Anything else, a time without zone above all.

    Examples
    --------
    >>> instant_of("2026-01-31T06:00:00-03:00").isoformat()
    '2026-01-31T09:00:00+00:00'
    """
    if isinstance(found, datetime):
        when = found
    elif isinstance(found, str):
        try:
            when = datetime.fromisoformat(found.strip())
        except ValueError:
            raise NoInstantError("text that is not ISO 8601", found) from None
    elif isinstance(found, int) and not isinstance(found, bool):
        try:
            when = EPOCH + timedelta(microseconds=found)
        except OverflowError:
            raise NoInstantError("no number of microseconds since 1970", found) from None
    elif found is None:
        raise NoInstantError("a time is missing", found)
    elif isinstance(found, date):
        raise NoInstantError("a day without time of day and zone", found)
    else:
        raise NoInstantError("not a time", found)
    if when.tzinfo is None:
        raise NoInstantError("a time without zone or offset", found)
    when = when.astimezone(UTC)
    if not EARLIEST <= when < LATEST:
        raise NoInstantError("a time not between 1970 and 2200", found)
    return when


def local_instant_of(found: object, zone: str) -> datetime:
    """
    Give the UTC instant of a plant time without a zone.

    Raises
    ------
    NoInstantError
        It is no time, or the clock skips or repeats it that day.
    """
    if isinstance(found, str):
        try:
            found = datetime.fromisoformat(found.strip())
        except ValueError:
            raise NoInstantError("text that is no time such as 2026-01-31 06:00", found) from None
    if not isinstance(found, datetime):
        raise NoInstantError("not a date with a time of day", found)
    if found.tzinfo is not None:
        raise NoInstantError("a time with an offset, where plant time has none", found)
    place = ZoneInfo(zone)
    first = found.replace(tzinfo=place, fold=0)
    if first.utcoffset() != found.replace(tzinfo=place, fold=1).utcoffset():
        back = first.astimezone(UTC).astimezone(place).replace(tzinfo=None)
        word = "repeats" if back == found else "skips"
        raise NoInstantError(
            f"a time that the clock of {zone} {word}; write it with its offset in true_from, "
            "true_to or known_at",
            found,
        )
    return instant_of(first)


def microseconds(when: datetime) -> int:
    """Give integer microseconds since 1970 UTC of an aware instant."""
    return (when - EPOCH) // MICROSECOND


def text_of(when: datetime) -> str:
    """Give an instant as ISO 8601 text in UTC, always with microseconds, so that text sorts."""
    return when.astimezone(UTC).strftime("%Y-%m-%dT%H:%M:%S.%fZ")


def instants_of(
    column: Sequence[object], refuse: Callable[[int, NoInstantError], None]
) -> NDArray[np.int64]:
    """
    Turn a column of instants into UTC microseconds.

    Parameters
    ----------
    column : sequence
        Values as a source gives them.
    refuse : callable
        Told the place in the column and the fault; the value given back there is 0.

    Returns
    -------
    ndarray
        Shape (n,), int64.
    """
    numbers = _at_once(column)
    if numbers is not None:
        low, high = microseconds(EARLIEST), microseconds(LATEST)
        if ((numbers >= low) & (numbers < high)).all():
            return numbers
    result = np.zeros(len(column), dtype=np.int64)
    for place, value in enumerate(column):
        try:
            result[place] = microseconds(instant_of(value))
        except NoInstantError as error:
            refuse(place, error)
    return result


def _at_once(column: Sequence[object]) -> NDArray[np.int64] | None:
    """Turn a column of one plain type without a loop a row; None where it is not one."""
    kinds = set(map(type, column))
    if kinds == {int}:
        try:
            return np.array(column, dtype=np.int64)
        except OverflowError:
            return None
    if kinds != {datetime}:
        return None
    times = cast("Sequence[datetime]", column)
    if None in {when.tzinfo for when in times}:
        return None
    # Seconds as doubles resolve 0.24 us until 2106, so rounding finds the microsecond.
    seconds = np.array([when.timestamp() for when in times])
    return np.rint(seconds * 1e6).astype(np.int64)
