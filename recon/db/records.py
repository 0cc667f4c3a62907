"""Records in the book: which are new, which changed or vanished, which are in force at a cut."""

from __future__ import annotations

import json
from collections import defaultdict
from collections.abc import Iterable, Iterator, Sequence
from datetime import UTC, date, datetime
from typing import Any

from sqlalchemy import ColumnElement, Connection, Row, and_, exists, select, tuple_

from recon.app.book_types import Chunk, Reread
from recon.audit.canonical import canonical, canonical_lines
from recon.audit.digest import digest_bytes
from recon.db.compare import (
    RECORD_COLUMNS,
    VANISHED,
    SourceChange,
    back_again,
    changed_record,
    content_of,
    extra_text,
    record_lines,
    vanished_record,
)
from recon.db.tables import RECORD
from recon.ingest.rows import Record, RowKind

Version = tuple[str, str, datetime]
"""Kind, natural key and known-at: one revision of one record."""
_BATCH = 800


def sort_out(
    connection: Connection,
    site: str,
    records: Sequence[Record],
    reread: Reread | None,
    said: dict[tuple[str, str], str],
) -> tuple[list[Record], list[SourceChange]]:
    """
    Find which records the book lacks, and what changed since it last looked.

    Parameters
    ----------
    records : sequence of Record
        As pulled.
    reread : Reread or None
        Span in which they are all there is of that kind.
    said : dict
        Last change noticed by kind and natural key.

    Returns
    -------
    new : list of Record
    changes : list of SourceChange
    """
    held = _held(connection, site, records, reread)
    new: dict[Version, Record] = {}
    changes: list[SourceChange] = []
    for record in records:
        version = (record.kind.value, record.natural_key, record.known_at.astimezone(UTC))
        before = new.get(version) or held.get(version)
        if before is None:
            new[version] = record
        elif content_of(before) != content_of(record):
            new[version] = record
            changes.append(changed_record(before, record))
        elif said.get(version[:2]) == VANISHED:
            span = (record.true_from, record.true_to)
            changes.append(back_again(version[0], version[1], span))
    if reread is not None:
        returned = {(r.kind.value, r.natural_key, r.known_at.astimezone(UTC)) for r in records}
        changes += [
            vanished_record(record)
            for version, record in sorted(_latest({**held, **new}).items())
            if version not in returned
            and _inside(record, reread)
            and said.get(version[:2]) != VANISHED
        ]
    return list(new.values()), changes


def chunks_of(records: Iterable[Record]) -> Iterator[tuple[Chunk, list[Record]]]:
    """Put records into chunks by kind and UTC day of ``true_from``; every column as it came."""
    groups: dict[tuple[RowKind, date], list[Record]] = defaultdict(list)
    for record in records:
        groups[record.kind, record.true_from.astimezone(UTC).date()].append(record)
    for (kind, day), group in sorted(groups.items()):
        head = canonical({"columns": list(RECORD_COLUMNS), "day": day, "kind": kind.value})
        content = head + b"\n" + canonical_lines(record_lines(group))
        yield (
            Chunk(
                digest=digest_bytes(content),
                kind=kind,
                subject="",
                day=day,
                rows=len(group),
                content=content,
            ),
            group,
        )


def row_values(record: Record, chunk: str, seen_at: datetime) -> tuple[Any, ...]:
    """Values of a record in the order of the table's columns after the site."""
    return (
        record.kind.value,
        record.document,
        record.subject,
        record.item,
        record.stage,
        record.known_at,
        seen_at,
        record.true_from,
        record.true_to,
        record.value,
        record.unit,
        record.lot,
        extra_text(record),
        chunk,
    )


def from_row(row: Row[Any]) -> Record:
    """Make a record from a row of the table."""
    return Record(
        kind=RowKind(row.kind),
        document=row.document,
        subject=row.subject,
        item=row.item,
        true_from=row.true_from,
        true_to=row.true_to,
        known_at=row.known_at,
        value=row.value,
        unit=row.unit,
        stage=row.stage,
        lot=row.lot,
        extra=tuple((name, value) for name, value in json.loads(row.extra)),
    )


def in_force(
    connection: Connection, site: str, *, since: datetime, until: datetime, cut: datetime
) -> tuple[Record, ...]:
    """List records of a span as known at a cut, each natural key in its latest form, sorted."""
    newer = RECORD.alias("newer")
    superseded = exists().where(
        *(newer.c[name] == RECORD.c[name] for name in _KEY),
        newer.c.known_at <= cut,
        newer.c.first_seen <= cut,
        tuple_(newer.c.known_at, newer.c.first_seen)
        > tuple_(RECORD.c.known_at, RECORD.c.first_seen),
    )
    asked = select(RECORD).where(
        RECORD.c.site == site,
        RECORD.c.kind.in_([kind.value for kind in RowKind]),
        RECORD.c.true_from < until,
        RECORD.c.true_to >= since,
        RECORD.c.known_at <= cut,
        RECORD.c.first_seen <= cut,
        ~superseded,
    )
    found = [from_row(row) for row in connection.execute(asked)]
    return tuple(sorted(found, key=lambda r: (r.kind.value, r.natural_key)))


def chunks_behind(
    connection: Connection, site: str, records: Sequence[Record], cut: datetime
) -> dict[Version, str]:
    """Give the chunk that holds each record as seen last at a cut, by version."""
    found: dict[Version, tuple[datetime, str]] = {}
    for row in _by_document(connection, site, records):
        version = _version(row)
        if row.first_seen <= cut and (version not in found or found[version][0] < row.first_seen):
            found[version] = (row.first_seen, row.chunk)
    return {version: chunk for version, (_, chunk) in found.items()}


_KEY = ("site", "kind", "document", "subject", "item", "stage")


def _held(
    connection: Connection, site: str, records: Sequence[Record], reread: Reread | None
) -> dict[Version, Record]:
    """What the book has of the documents pulled and of the span read again, as seen last."""
    rows = list(_by_document(connection, site, records))
    if reread is not None:
        rows += _select(
            connection,
            and_(
                RECORD.c.site == site,
                RECORD.c.kind == reread.kind.value,
                RECORD.c.true_from < reread.until,
                RECORD.c.true_to >= reread.since,
            ),
        )
    latest: dict[Version, tuple[datetime, Record]] = {}
    for row in rows:
        version = _version(row)
        if version not in latest or latest[version][0] < row.first_seen:
            latest[version] = (row.first_seen, from_row(row))
    return {version: record for version, (_, record) in latest.items()}


def _latest(held: dict[Version, Record]) -> dict[Version, Record]:
    """Of every natural key the version known last."""
    last: dict[tuple[str, str], datetime] = {}
    for kind, key, known in held:
        last[kind, key] = max(last.get((kind, key), known), known)
    return {version: r for version, r in held.items() if last[version[:2]] == version[2]}


def _inside(record: Record, reread: Reread) -> bool:
    """Whether a record surely belongs to a span; one that only ends at its start may not."""
    return (
        record.kind == reread.kind
        and record.true_from < reread.until
        and (record.true_from >= reread.since or record.true_to > reread.since)
    )


def _by_document(
    connection: Connection, site: str, records: Sequence[Record]
) -> Iterator[Row[Any]]:
    documents: dict[str, set[str]] = defaultdict(set)
    for record in records:
        documents[record.kind.value].add(record.document)
    for kind, names in documents.items():
        ordered = sorted(names)
        for start in range(0, len(ordered), _BATCH):
            piece = ordered[start : start + _BATCH]
            yield from _select(
                connection,
                and_(RECORD.c.site == site, RECORD.c.kind == kind, RECORD.c.document.in_(piece)),
            )


def _select(connection: Connection, where: ColumnElement[bool]) -> list[Row[Any]]:
    return list(connection.execute(select(RECORD).where(where)))


def _version(row: Row[Any]) -> Version:
    return (row.kind, "|".join((row.document, row.subject, row.item, row.stage)), row.known_at)
