"""Keeps what the sources gave, before anything is computed from it, and compares with before.

Chunks are addressed by the digest of what they hold and compressed; the same rows are never kept
twice. Everything of one pull is one small transaction, the watermark included.
"""

from __future__ import annotations

import json
from collections.abc import Sequence
from datetime import datetime
from functools import partial
from typing import Any

from sqlalchemy import Connection, Row, select

from recon.app.book_types import Kept, Pulled, Watermark
from recon.audit.canonical import canonical
from recon.audit.digest import digest_bytes
from recon.db import records as kept_records
from recon.db import tag_days as kept_days
from recon.db.bulk import insert
from recon.db.chunks import keep_chunks
from recon.db.compare import (
    Change,
    SourceChange,
    as_finding,
)
from recon.db.engines import Database, cut
from recon.db.rows import clean_values
from recon.db.tables import (
    RECORD,
    SOURCE_CHANGE,
    SOURCE_QUERY,
    TAG_DAY,
    WATERMARK,
)
from recon.db.upsert import upsert
from recon.errors import DataError
from recon.failpoints import reach
from recon.findings import Finding


def keep(database: Database, site: str, pulled: Pulled, *, seen_at: datetime) -> Kept:
    """Keep one pull in one transaction; see the port."""
    for chunk in pulled.chunks:
        if digest_bytes(chunk.content) != chunk.digest:
            raise DataError(
                f"chunk {chunk.subject} {chunk.day}: its content has another digest than it "
                "says. Nothing was kept."
            )
    for record in pulled.records:
        clean_values(RECORD, kept_records.row_values(record, "", seen_at))
    with database.writing() as connection:
        database.lock(connection, f"evidence of {site}")
        said = _said(connection, site)
        query = _keep_query(connection, site, pulled.query, seen_at)
        chunks = keep_chunks(connection, site, pulled.chunks, query, seen_at)
        reach("mid_keep", cut=partial(cut, connection))
        tag_days, changes = kept_days.sort_out(connection, site, pulled, said, seen_at)
        insert(connection, TAG_DAY, tag_days, site)
        new, record_changes = kept_records.sort_out(
            connection, site, pulled.records, pulled.reread, said
        )
        chunks += _keep_records(connection, site, new, query, seen_at)
        changes += record_changes
        insert(connection, SOURCE_CHANGE, (_change_row(c, seen_at) for c in changes), site)
        if pulled.watermark is not None:
            upsert(connection, WATERMARK, {"site": site, **pulled.watermark.__dict__})
        reach("before_commit", cut=partial(cut, connection))
    return Kept(
        chunks=chunks,
        tag_days=len(tag_days),
        records=len(new),
        findings=tuple(as_finding(change) for change in changes),
    )


def source_changes(
    connection: Connection, site: str, since: datetime, until: datetime
) -> tuple[Finding, ...]:
    """List what changed or vanished at the source, for rows true in a span."""
    asked = (
        select(SOURCE_CHANGE)
        .where(
            SOURCE_CHANGE.c.site == site,
            SOURCE_CHANGE.c.true_from < until,
            SOURCE_CHANGE.c.true_to >= since,
        )
        .order_by(SOURCE_CHANGE.c.noticed_at, SOURCE_CHANGE.c.kind, SOURCE_CHANGE.c.subject)
    )
    return tuple(as_finding(_change(row)) for row in connection.execute(asked))


def watermarks(connection: Connection, site: str) -> dict[str, Watermark]:
    """How far each source has been read, by source."""
    columns = [c for c in WATERMARK.columns if c.name != "site"]
    asked = select(*columns).where(WATERMARK.c.site == site).order_by(WATERMARK.c.source)
    return {row.source: Watermark(**row._mapping) for row in connection.execute(asked)}


def _keep_query(connection: Connection, site: str, text: str, seen_at: datetime) -> str:
    made = digest_bytes(text.encode())
    there = select(SOURCE_QUERY.c.digest).where(
        SOURCE_QUERY.c.site == site, SOURCE_QUERY.c.digest == made
    )
    if connection.execute(there).first() is None:
        connection.execute(
            SOURCE_QUERY.insert().values(site=site, digest=made, content=text, first_seen=seen_at)
        )
    return made


def _keep_records(
    connection: Connection, site: str, new: Sequence[Any], query: str, seen_at: datetime
) -> int:
    count = 0
    for chunk, group in kept_records.chunks_of(new):
        count += keep_chunks(connection, site, (chunk,), query, seen_at)
        rows = (kept_records.row_values(record, chunk.digest, seen_at) for record in group)
        insert(connection, RECORD, (clean_values(RECORD, row) for row in rows), site)
    return count


def _said(connection: Connection, site: str) -> dict[tuple[str, str], str]:
    """The last change noticed of each row, by kind and subject."""
    asked = (
        select(SOURCE_CHANGE.c.kind, SOURCE_CHANGE.c.subject, SOURCE_CHANGE.c.change)
        .where(SOURCE_CHANGE.c.site == site)
        .order_by(SOURCE_CHANGE.c.noticed_at)
    )
    return {(row.kind, row.subject): row.change for row in connection.execute(asked)}


def _change_row(change: SourceChange, at: datetime) -> tuple[Any, ...]:
    return (
        change.kind,
        change.subject,
        at,
        change.change,
        change.true_from,
        change.true_to,
        change.text,
        canonical([list(pair) for pair in change.evidence]).decode(),
    )


def _change(row: Row[Any]) -> SourceChange:
    found: Change = row.change
    return SourceChange(
        kind=row.kind,
        subject=row.subject,
        change=found,
        true_from=row.true_from,
        true_to=row.true_to,
        text=row.content,
        evidence=tuple((name, value) for name, value in json.loads(row.evidence)),
    )
