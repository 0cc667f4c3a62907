"""Tag days in the book: which are new, what changed in their readings, which are in force."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import UTC, date, datetime, time, timedelta
from typing import Any

from sqlalchemy import Connection, Row, select

from recon.app.book_types import Pulled
from recon.audit.canonical import canonical
from recon.db.chunks import read_chunk
from recon.db.compare import (
    VANISHED,
    SourceChange,
    back_again,
    changed_readings,
    compare_readings,
)
from recon.db.rows import clean_values
from recon.db.tables import TAG_DAY
from recon.ingest.rows import TagDay


def sort_out(
    connection: Connection,
    site: str,
    pulled: Pulled,
    said: dict[tuple[str, str], str],
    seen_at: datetime,
) -> tuple[list[tuple[Any, ...]], list[SourceChange]]:
    """
    Find which tag days differ from those in force, and what changed in their readings.

    Parameters
    ----------
    said : dict
        Last change noticed by kind and subject.

    Returns
    -------
    new : list of tuples
        Values of new rows in the order of the table's columns after the site.
    changes : list of SourceChange
    """
    held = _held(connection, site, pulled.tag_days)
    given = {chunk.digest: chunk for chunk in pulled.chunks}
    new: list[tuple[Any, ...]] = []
    changes: list[SourceChange] = []
    for row in pulled.tag_days:
        before = held.get((row.tag, row.day))
        subject = f"{row.tag} {row.day.isoformat()}"
        missing = said.get(("reading", subject)) == VANISHED
        if before is not None and before.chunk != row.chunk:
            old = read_chunk(connection, site, before.chunk)
            now = given.get(row.chunk) or read_chunk(connection, site, row.chunk)
            change = changed_readings(
                row.tag, row.day.isoformat(), compare_readings(old, now), old, now, _span(row)
            )
            gone = change is not None and change.change == VANISHED
            if change is not None and not (gone and missing):
                changes.append(change)
            if gone:
                continue
        elif before is not None and missing:
            changes.append(back_again("reading", subject, _span(row)))
        if before is None or _values(before, seen_at)[3:] != _values(row, seen_at)[3:]:
            new.append(_values(row, seen_at))
    return new, changes


def in_force(
    connection: Connection, site: str, *, first: date, last: date, cut: datetime
) -> tuple[TagDay, ...]:
    """List tag days of a span as known at a cut, the one seen last of each, by tag and day."""
    asked = (
        select(TAG_DAY)
        .where(
            TAG_DAY.c.site == site,
            TAG_DAY.c.day.between(first, last),
            TAG_DAY.c.first_seen <= cut,
            TAG_DAY.c.last_known <= cut,
        )
        .order_by(TAG_DAY.c.first_seen)
    )
    found = {(row.tag, row.day): row for row in connection.execute(asked)}
    return tuple(_tag_day(found[key]) for key in sorted(found))


def manifest_line(row: TagDay) -> str:
    """Write a tag day with its chunk as a line of a manifest; when it was seen is left out."""
    return canonical([getattr(row, name) for name in _NAMES]).decode()


def manifest_lines(connection: Connection, site: str) -> frozenset[str]:
    """Write every tag day the book holds as lines of manifests."""
    asked = select(TAG_DAY).where(TAG_DAY.c.site == site)
    return frozenset(manifest_line(_tag_day(row)) for row in connection.execute(asked))


_NAMES = tuple(c.name for c in TAG_DAY.columns if c.name not in ("site", "first_seen"))


def _held(
    connection: Connection, site: str, rows: Sequence[TagDay]
) -> dict[tuple[str, Any], TagDay]:
    """Tag days in force now, by tag and day."""
    if not rows:
        return {}
    days = [row.day for row in rows]
    tags = sorted({row.tag for row in rows})
    asked = select(TAG_DAY).where(
        TAG_DAY.c.site == site, TAG_DAY.c.day.between(min(days), max(days))
    )
    if len(tags) <= 800:
        asked = asked.where(TAG_DAY.c.tag.in_(tags))
    found = connection.execute(asked.order_by(TAG_DAY.c.first_seen))
    return {(row.tag, row.day): _tag_day(row) for row in found}


def _tag_day(row: Row[Any]) -> TagDay:
    """Make a tag day from a row of the table."""
    values = dict(row._mapping)
    del values["site"], values["first_seen"]
    return TagDay(**values)


def _values(row: TagDay, seen_at: datetime) -> tuple[Any, ...]:
    tag, day, *rest = (getattr(row, name) for name in _NAMES)
    return clean_values(TAG_DAY, (tag, day, seen_at, *rest))


def _span(row: TagDay) -> tuple[datetime, datetime]:
    """A day's readings as a span in UTC, wide enough for any plant's zone."""
    start = datetime.combine(row.day, time(), tzinfo=UTC)
    return start, start + timedelta(days=1)
