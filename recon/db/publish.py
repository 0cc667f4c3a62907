"""Publishes a run: record, rows, pointer and audit entries in one transaction, or nothing.

What can be prepared is prepared before. Inside, the claim is read again for update: whoever lost it
writes nothing. A run whose data digest exists is not written again; the pointer moves to it.
"""

from __future__ import annotations

import zlib
from dataclasses import dataclass
from datetime import UTC, datetime
from functools import partial

from sqlalchemy import Connection, func, select, update

from recon.app.book_types import Claim, RunHead, Standing
from recon.app.identity import data_digest
from recon.app.period import PeriodInputs, PeriodResult
from recon.audit.canonical import canonical
from recon.audit.digest import digest_bytes, result_digest
from recon.db import claims, reads, records, tag_days, trail
from recon.db.bulk import insert
from recon.db.engines import Database, cut
from recon.db.rows import RESULT_TABLES, Row, result_rows, table_digests
from recon.db.tables import CURRENT_RUN, EVIDENCE_MANIFEST, RUN
from recon.db.upsert import upsert
from recon.errors import DataError, LostClaimError
from recon.failpoints import reach


@dataclass(frozen=True, kw_only=True)
class _Prepared:
    """Everything of a run that does not depend on what others publish meanwhile."""

    rows: dict[str, list[Row]]
    digests: dict[str, str]
    manifest: bytes
    versions: tuple[str, ...]
    method: tuple[tuple[str, str], ...]
    summary: tuple[tuple[str, str], ...]


def publish(
    database: Database,
    claim: Claim,
    inputs: PeriodInputs,
    result: PeriodResult,
    *,
    at: datetime,
    actor: str,
) -> RunHead:
    """Publish a run in one transaction; see the port."""
    try:
        found = data_digest(inputs)
    except ValueError as error:
        raise DataError(f"site {claim.site}, through {claim.through}: {error}.") from error
    if found != claim.data_digest:
        raise DataError(
            f"site {claim.site}, through {claim.through}: the claim is for data "
            f"{claim.data_digest[:16]}, these are {found[:16]}. Nothing was published."
        )
    prepared = _prepare(database, claim, inputs, result)
    with database.writing() as connection:
        database.lock(connection, f"chain of {claim.site}")
        claims.hold(connection, claim)
        head = reads.published(
            connection, claim.site, claim.month, claim.through, claim.data_digest
        )
        if head is None:
            head = _write(database, connection, claim, prepared, at, actor)
        _move(database, connection, claim, head, at, actor)
        reach("before_commit", cut=partial(cut, connection))
    reach("after_commit")
    return head


def point(database: Database, claim: Claim, run: int, *, at: datetime, actor: str) -> RunHead:
    """Move the pointer to a run that exists; see the port."""
    with database.writing() as connection:
        database.lock(connection, f"chain of {claim.site}")
        claims.hold(connection, claim)
        head = reads.published(
            connection, claim.site, claim.month, claim.through, claim.data_digest
        )
        if head is None or head.run != run:
            raise DataError(
                f"site {claim.site}, through {claim.through}: run {run} is not the published run "
                f"of data {claim.data_digest[:16]}. The pointer stays."
            )
        _move(database, connection, claim, head, at, actor)
        reach("before_commit", cut=partial(cut, connection))
    return head


def confirm(
    database: Database, site: str, standing: Standing, *, knowledge_cut: datetime, at: datetime
) -> None:
    """Note that a current run is still right at a later cut; no move, so no audit entry."""
    with database.writing() as connection:
        connection.execute(
            update(CURRENT_RUN)
            .where(
                CURRENT_RUN.c.site == site,
                CURRENT_RUN.c.month == standing.month,
                CURRENT_RUN.c.through_day == standing.through,
                CURRENT_RUN.c.run == standing.run,
                CURRENT_RUN.c.knowledge_cut <= knowledge_cut,
            )
            .values(knowledge_cut=knowledge_cut, moved_at=at)
        )


def _prepare(
    database: Database, claim: Claim, inputs: PeriodInputs, result: PeriodResult
) -> _Prepared:
    rows = result_rows(result, claim.month)
    with database.reading() as connection:
        lines = _evidence(connection, inputs)
    return _Prepared(
        rows=rows,
        digests=table_digests(rows),
        manifest="".join(f"{line}\n" for line in lines).encode(),
        versions=tuple(version.digest for version in inputs.versions),
        method=result.method,
        summary=result.summary,
    )


def _evidence(connection: Connection, inputs: PeriodInputs) -> list[str]:
    """
    Lines of a manifest: every row in force with its chunk, tag days with their numbers, sorted.

    Every row must have been kept as evidence before it is used.
    """
    behind = records.chunks_behind(
        connection, inputs.site, inputs.records, inputs.knowledge_cut.astimezone(UTC)
    )
    lines = [tag_days.manifest_line(row) for row in inputs.tag_days]
    for record in inputs.records:
        version = (record.kind.value, record.natural_key, record.known_at.astimezone(UTC))
        if version not in behind:
            raise DataError(
                f"{record.kind.value} {record.natural_key} was never kept as evidence. Keep what "
                "the sources give before computing from it; nothing was published."
            )
        lines.append(canonical([*version, behind[version]]).decode())
    return sorted(lines)


def _write(
    database: Database,
    connection: Connection,
    claim: Claim,
    prepared: _Prepared,
    at: datetime,
    actor: str,
) -> RunHead:
    """Insert manifest, run, rows and the audit entry of a run."""
    manifest = digest_bytes(prepared.manifest)
    _keep_manifest(connection, claim, manifest, prepared.manifest)
    same = (
        RUN.c.month == claim.month,
        RUN.c.through_day == claim.through,
        RUN.c.kind == "published",
    )
    head = RunHead(
        site=claim.site,
        run=_count(connection, func.coalesce(func.max(RUN.c.run), 0), claim.site) + 1,
        month=claim.month,
        through=claim.through,
        kind="published",
        revision=_count(connection, func.count(), claim.site, *same) + 1,
        data_digest=claim.data_digest,
        knowledge_cut=claim.knowledge_cut,
        manifest=manifest,
        site_versions=prepared.versions,
        method=prepared.method,
        summary=prepared.summary,
        result_digest=result_digest(prepared.digests),
        published_at=at,
    )
    connection.execute(RUN.insert().values(**run_values(head, prepared.digests)))
    for table in RESULT_TABLES:
        insert(connection, table, prepared.rows[table.name], head.site, head.run)
        reach("mid_publish", cut=partial(cut, connection))
    trail.append(
        database,
        connection,
        claim.site,
        at=at,
        actor=actor,
        action="publish",
        subject=f"run {head.run}",
        body=run_body(head, prepared.digests),
    )
    return head


def run_values(head: RunHead, digests: dict[str, str]) -> dict[str, object]:
    """Values of a run's row."""
    return {
        "site": head.site,
        "run": head.run,
        "month": head.month,
        "through_day": head.through,
        "kind": head.kind,
        "revision": head.revision,
        "data_digest": head.data_digest,
        "knowledge_cut": head.knowledge_cut,
        "manifest": head.manifest,
        "site_versions": canonical(list(head.site_versions)).decode(),
        "method": canonical([list(pair) for pair in head.method]).decode(),
        "summary": canonical([list(pair) for pair in head.summary]).decode(),
        "table_digests": canonical(digests).decode(),
        "result_digest": head.result_digest,
        "published_at": head.published_at,
    }


def run_body(head: RunHead, digests: dict[str, str]) -> dict[str, object]:
    """What the audit entry of a run says: every value of its row, with its tables' digests."""
    return {**run_values(head, digests), "table_digests": digests}


def _keep_manifest(connection: Connection, claim: Claim, digest: str, content: bytes) -> None:
    there = select(EVIDENCE_MANIFEST.c.digest).where(
        EVIDENCE_MANIFEST.c.site == claim.site, EVIDENCE_MANIFEST.c.digest == digest
    )
    if connection.execute(there).first() is None:
        connection.execute(
            EVIDENCE_MANIFEST.insert().values(
                site=claim.site,
                digest=digest,
                knowledge_cut=claim.knowledge_cut,
                content=zlib.compress(content),
            )
        )


def _count(connection: Connection, what: object, site: str, *where: object) -> int:
    asked = select(what).select_from(RUN).where(RUN.c.site == site, *where)  # type: ignore[call-overload]
    return int(connection.execute(asked).scalar_one())


def _move(
    database: Database,
    connection: Connection,
    claim: Claim,
    head: RunHead,
    at: datetime,
    actor: str,
) -> None:
    """Let a run speak for its month and day, log the move, and mark the claim done."""
    before = connection.execute(
        select(CURRENT_RUN.c.run, CURRENT_RUN.c.knowledge_cut).where(
            CURRENT_RUN.c.site == claim.site,
            CURRENT_RUN.c.month == claim.month,
            CURRENT_RUN.c.through_day == claim.through,
        )
    ).first()
    if before is not None and before.knowledge_cut > claim.knowledge_cut:
        raise LostClaimError(
            claim.site,
            claim.through.isoformat(),
            claim.token,
            f"run {before.run} knows more, up to {before.knowledge_cut.isoformat()}",
        )
    upsert(
        connection,
        CURRENT_RUN,
        {
            "site": claim.site,
            "month": claim.month,
            "through_day": claim.through,
            "run": head.run,
            "knowledge_cut": claim.knowledge_cut,
            "moved_at": at,
        },
    )
    claims.mark_done(connection, claim)
    if before is not None and before.run == head.run:
        return
    trail.append(
        database,
        connection,
        claim.site,
        at=at,
        actor=actor,
        action="move pointer",
        subject=f"month {claim.month:%Y-%m} through {claim.through.isoformat()}",
        body={
            "month": claim.month,
            "through_day": claim.through,
            "from_run": None if before is None else before.run,
            "to_run": head.run,
            "data_digest": head.data_digest,
            "knowledge_cut": claim.knowledge_cut,
        },
    )
