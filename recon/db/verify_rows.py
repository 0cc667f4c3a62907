"""Checks of stored rows against what the audit chain says of them; one kind of row, one check."""

from __future__ import annotations

import json
from collections.abc import Collection, Iterator
from typing import Any

from sqlalchemy import Connection, Row, select

from recon.audit.canonical import canonical, canonical_lines
from recon.audit.chain import Entry
from recon.audit.digest import digest, digest_bytes
from recon.db import reads, tag_days
from recon.db.chunks import open_chunk, unpacked
from recon.db.compare import record_lines
from recon.db.publish import run_body
from recon.db.records import from_row
from recon.db.rows import RESULT_TABLES
from recon.db.tables import (
    DECISION,
    DECISION_APPROVAL,
    EVIDENCE_CHUNK,
    EVIDENCE_MANIFEST,
    RECORD,
    RUN,
    SITE_VERSION,
    SOURCE_QUERY,
)
from recon.errors import AlteredRecordError


def check_run(connection: Connection, entry: Entry, body: dict[str, Any]) -> None:
    """Compare a run's row with its entry, and every result table with its digest."""
    row = reads.run_row(connection, entry.site, int(body["run"]))
    stored = run_body(reads.head_of(row), json.loads(row.table_digests))
    made = json.loads(canonical(stored))
    for name in sorted({*made, *body}):
        if made.get(name) != body.get(name):
            raise AlteredRecordError(
                f"site {entry.site}, entry {entry.seq}, run {row.run}, {name}",
                str(body.get(name)),
                str(made.get(name)),
            )
    for table in RESULT_TABLES:
        reads.checked_table(connection, row, table.name)


def check_version(connection: Connection, entry: Entry) -> None:
    """Compare a site version's text with the digest its entry names."""
    row = connection.execute(
        select(SITE_VERSION).where(
            SITE_VERSION.c.site == entry.site, SITE_VERSION.c.digest == entry.subject
        )
    ).first()
    what = f"site {entry.site}, entry {entry.seq}, site version {entry.subject[:16]}"
    if row is None:
        raise AlteredRecordError(what, "its text", "no such version")
    said = canonical({"valid_from": row.valid_from})
    same = (row.added_by, row.known_at, said) == (entry.actor, entry.at, entry.body)
    found = digest_bytes(row.content.encode())
    if found != entry.subject or not same:
        raise AlteredRecordError(
            what, f"digest {entry.subject[:16]}", found[:16] if same else "other dates or author"
        )


def check_decision(connection: Connection, entry: Entry, body: dict[str, Any]) -> None:
    """Compare a decision, or the answer to one, with its entry."""
    if entry.action == "decide":
        row = _one(connection, DECISION, entry)
        values = {name: v for name, v in row._mapping.items() if name != "decision"}
        found = digest(values)
    else:
        row = _one(connection, DECISION_APPROVAL, entry)
        granted = entry.action == "approve"
        same = (row.approved_by, row.approved_at, row.digest_seen, row.granted) == (
            entry.actor,
            entry.at,
            body["digest_seen"],
            granted,
        ) and row.made_by == _one(connection, DECISION, entry).made_by
        found = entry.subject if same else "another answer"
    if found != entry.subject:
        raise AlteredRecordError(
            f"site {entry.site}, entry {entry.seq}, {entry.action} {entry.subject[:16]}",
            entry.subject[:16],
            found[:16],
        )


def find_unspoken(
    connection: Connection, site: str, spoken: Collection[tuple[str, str]]
) -> Iterator[str]:
    """Name rows that no entry of the chain speaks of."""
    for row in connection.execute(select(RUN.c.run).where(RUN.c.site == site).order_by(RUN.c.run)):
        if ("publish", f"run {row.run}") not in spoken:
            yield f"site {site}, run {row.run}"
    for table in RESULT_TABLES:
        runs = select(table.c.run).where(table.c.site == site).distinct()
        for number in connection.execute(runs).scalars():
            if ("publish", f"run {number}") not in spoken:
                yield f"site {site}, table {table.name}, run {number}"
    for column, action, what in (
        (SITE_VERSION.c.digest, "add site version", "version"),
        (DECISION.c.decision, "decide", "decision"),
    ):
        asked = select(column).where(column.table.c.site == site)
        for found in connection.execute(asked).scalars():
            if (action, found) not in spoken:
                yield f"site {site}, {what} {found[:16]}"
    answers = select(DECISION_APPROVAL).where(DECISION_APPROVAL.c.site == site)
    for row in connection.execute(answers):
        if ("approve" if row.granted else "refuse", row.decision) not in spoken:
            yield f"site {site}, answer to decision {row.decision[:16]}"


def check_evidence(connection: Connection, site: str, manifests: Collection[str]) -> int:
    """
    Check chunks against their digests, records against chunks, and manifests against both.

    Returns
    -------
    int
        How many chunks were read.
    """
    queries = set()
    for row in connection.execute(select(SOURCE_QUERY).where(SOURCE_QUERY.c.site == site)):
        if digest_bytes(row.content.encode()) != row.digest:
            raise AlteredRecordError(
                f"site {site}, query {row.digest[:16]}", "its text", "another text"
            )
        queries.add(row.digest)
    lines: dict[str, set[bytes]] = {}
    count = 0
    asked = select(EVIDENCE_CHUNK).where(EVIDENCE_CHUNK.c.site == site)
    with connection.execute(asked.execution_options(yield_per=200)) as found:
        for row in found:
            content = _described(row, queries)
            count += 1
            lines[row.digest] = (
                set() if row.kind == "reading" else set(content.splitlines(keepends=True)[1:])
            )
    known = _checked_records(connection, site, lines)
    known |= tag_days.manifest_lines(connection, site)
    for name in sorted(set(manifests)):
        _check_manifest(connection, site, name, known, lines)
    return count


def _described(row: Row[Any], queries: Collection[str]) -> bytes:
    """Open a chunk; what its row says of it must be what it says of itself."""
    chunk = open_chunk(row)
    head, *rest = chunk.content.decode().removesuffix("\n").split("\n")
    if row.kind == "reading":
        says = (head, len(rest) - 1)
        stored = (f"{row.subject},{row.day.isoformat()}", row.row_count)
    else:
        described = json.loads(head)
        says = (f"{described['kind']} {described['day']}", len(rest))
        stored = (f"{row.kind} {row.subject}{row.day.isoformat()}", row.row_count)
    if says != stored:
        raise AlteredRecordError(
            f"evidence chunk {row.digest[:16]}", "{} with {} rows".format(*says), f"{stored}"
        )
    if row.query not in queries:
        raise AlteredRecordError(
            f"evidence chunk {row.digest[:16]}", f"query {row.query[:16]}", "no such query"
        )
    return chunk.content


def _checked_records(connection: Connection, site: str, lines: dict[str, set[bytes]]) -> set[str]:
    """Hold every record against the rows as they came; give their lines of manifests."""
    known: set[str] = set()
    asked = select(RECORD).where(RECORD.c.site == site)
    with connection.execute(asked.execution_options(yield_per=1000)) as found:
        for row in found:
            record = from_row(row)
            if canonical_lines(record_lines([record])) not in lines.get(row.chunk, ()):
                raise AlteredRecordError(
                    f"site {site}, {row.kind} {record.natural_key}",
                    f"a row of chunk {row.chunk[:16]}",
                    "values that are not in it",
                )
            known.add(
                canonical([row.kind, record.natural_key, record.known_at, row.chunk]).decode()
            )
    return known


def _check_manifest(
    connection: Connection,
    site: str,
    name: str,
    known: Collection[str],
    chunks: Collection[str],
) -> None:
    row = connection.execute(
        select(EVIDENCE_MANIFEST).where(
            EVIDENCE_MANIFEST.c.site == site, EVIDENCE_MANIFEST.c.digest == name
        )
    ).first()
    what = f"site {site}, manifest {name[:16]}"
    if row is None:
        raise AlteredRecordError(what, "its lines", "no such manifest")
    content = unpacked(row.content)
    if digest_bytes(content) != name:
        raise AlteredRecordError(what, name[:16], digest_bytes(content)[:16])
    for line in filter(None, content.decode().split("\n")):
        if line not in known:
            raise AlteredRecordError(what, f"the row {line}", "no such row")
        values = json.loads(line)
        chunk = values[3] if len(values) == 4 else values[2]
        if chunk not in chunks:
            raise AlteredRecordError(what, f"chunk {chunk[:16]}", "no such chunk")


def _one(connection: Connection, table: Any, entry: Entry) -> Row[Any]:
    row = connection.execute(
        select(table).where(table.c.site == entry.site, table.c.decision == entry.subject)
    ).first()
    if row is None:
        raise AlteredRecordError(
            f"site {entry.site}, entry {entry.seq}, {entry.action} {entry.subject[:16]}",
            "its row",
            "no such row",
        )
    return row
