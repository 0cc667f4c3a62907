"""The book as the use cases know it: one database behind the port, a subject a file behind this."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import date, datetime

from recon.app.book_types import (
    AuditEntry,
    Chunk,
    Claim,
    Kept,
    Material,
    Progress,
    Proposal,
    Pulled,
    RunHead,
    Standing,
    StoredVersion,
    Watermark,
)
from recon.app.period import PeriodInputs, PeriodResult
from recon.db import (
    claims,
    decisions,
    evidence,
    material,
    publish,
    reads,
    trail,
    versions,
)
from recon.db import progress as notes
from recon.db.chunks import read_chunk
from recon.db.engines import Database
from recon.db.migrate import check_schema
from recon.findings import Finding


class SqlBook:
    """
    A book in SQLite or PostgreSQL; every method is described at ``recon.app.ports.Book``.

    Parameters
    ----------
    url : str
        SQLAlchemy URL.

    Raises
    ------
    BookUnavailableError
        The database cannot be reached.
    OldBookError
        It has another schema; see ``recon database upgrade``.
    AlteredRecordError
        A protecting trigger is missing or reads differently.
    """

    def __init__(self, url: str) -> None:
        self.database = Database(url)
        check_schema(self.database)

    def close(self) -> None:
        """Close the connections."""
        self.database.close()

    def add_site_version(self, version: StoredVersion) -> bool:
        """Keep a version of a site."""
        return versions.add(self.database, version)

    def site_versions(self, site: str) -> tuple[StoredVersion, ...]:
        """List every version of a site."""
        with self.database.reading() as connection:
            return versions.every(connection, site)

    def sites(self) -> tuple[str, ...]:
        """List the sites that have a version."""
        with self.database.reading() as connection:
            return versions.sites(connection)

    def keep(self, site: str, pulled: Pulled, *, seen_at: datetime) -> Kept:
        """Keep what a source gave."""
        return evidence.keep(self.database, site, pulled, seen_at=seen_at)

    def chunk(self, site: str, digest: str) -> Chunk:
        """Give rows as they came."""
        with self.database.reading() as connection:
            return read_chunk(connection, site, digest)

    def source_changes(self, site: str, since: datetime, until: datetime) -> tuple[Finding, ...]:
        """List what changed or vanished at the source."""
        with self.database.reading() as connection:
            return evidence.source_changes(connection, site, since, until)

    def watermarks(self, site: str) -> dict[str, Watermark]:
        """How far each source has been read."""
        with self.database.reading() as connection:
            return evidence.watermarks(connection, site)

    def material(
        self,
        site: str,
        *,
        month: date,
        through: date,
        first_day: date,
        since: datetime,
        until: datetime,
        knowledge_cut: datetime,
    ) -> Material:
        """Give everything a month to date is computed from."""
        with self.database.reading() as connection:
            return material.material(
                connection,
                site,
                month=month,
                through=through,
                first_day=first_day,
                since=since,
                until=until,
                knowledge_cut=knowledge_cut,
            )

    def decide(self, site: str, proposal: Proposal) -> str:
        """Keep a decision."""
        return decisions.decide(self.database, site, proposal)

    def approve(
        self, site: str, decision: str, *, by: str, at: datetime, digest_seen: str, granted: bool
    ) -> None:
        """Answer a decision as a second person."""
        decisions.approve(
            self.database,
            site,
            decision,
            by=by,
            at=at,
            digest_seen=digest_seen,
            granted=granted,
        )

    def claim(
        self,
        site: str,
        *,
        month: date,
        through: date,
        data_digest: str,
        knowledge_cut: datetime,
        owner: str,
        lease_seconds: float,
    ) -> Claim | None:
        """Take the right to publish."""
        return claims.claim(
            self.database,
            site,
            month=month,
            through=through,
            data_digest=data_digest,
            knowledge_cut=knowledge_cut,
            owner=owner,
            lease_seconds=lease_seconds,
        )

    def extend(self, claim: Claim, *, lease_seconds: float) -> Claim:
        """Make a lease longer."""
        return claims.extend(self.database, claim, lease_seconds=lease_seconds)

    def give_back(self, claim: Claim) -> None:
        """End a lease at once."""
        claims.give_back(self.database, claim)

    def published(self, site: str, month: date, through: date, data_digest: str) -> RunHead | None:
        """Give the published run of exactly these inputs."""
        with self.database.reading() as connection:
            return reads.published(connection, site, month, through, data_digest)

    def publish(
        self,
        claim: Claim,
        inputs: PeriodInputs,
        result: PeriodResult,
        *,
        at: datetime,
        actor: str,
    ) -> RunHead:
        """Write a run in one transaction."""
        return publish.publish(self.database, claim, inputs, result, at=at, actor=actor)

    def point(self, claim: Claim, run: int, *, at: datetime, actor: str) -> RunHead:
        """Move the pointer to a run that exists."""
        return publish.point(self.database, claim, run, at=at, actor=actor)

    def current(self, site: str, month: date, through: date | None = None) -> RunHead | None:
        """Give the run that speaks for a month through a day."""
        with self.database.reading() as connection:
            return reads.current(connection, site, month, through)

    def standing(self, site: str) -> tuple[Standing, ...]:
        """List where every pointer stands."""
        with self.database.reading() as connection:
            return reads.standing(connection, site)

    def confirm(
        self, standing: Standing, site: str, *, knowledge_cut: datetime, at: datetime
    ) -> None:
        """Note that a current run is still right at a later cut."""
        publish.confirm(self.database, site, standing, knowledge_cut=knowledge_cut, at=at)

    def arrivals(
        self,
        site: str,
        *,
        since: datetime,
        until: datetime,
        after: datetime,
        by: datetime | None = None,
    ) -> tuple[datetime, datetime] | None:
        """Give the earliest and latest time at which rows of a span became known after a cut."""
        with self.database.reading() as connection:
            return material.arrivals(connection, site, since=since, until=until, after=after, by=by)

    def runs(self, site: str, month: date | None = None) -> tuple[RunHead, ...]:
        """List runs in the order they were published."""
        with self.database.reading() as connection:
            return reads.runs(connection, site, month)

    def result(self, site: str, run: int) -> PeriodResult:
        """Give all rows of a run, checked."""
        with self.database.reading() as connection:
            return reads.result(connection, site, run)

    def note_progress(self, site: str, progress: Progress) -> None:
        """Say what long work is doing."""
        with self.database.writing() as connection:
            notes.note(connection, site, progress)

    def progress(self, site: str) -> tuple[Progress, ...]:
        """List what long work said last."""
        with self.database.reading() as connection:
            return notes.every(connection, site)

    def record(
        self, site: str, *, at: datetime, actor: str, action: str, subject: str, body: object
    ) -> AuditEntry:
        """Append an entry of its own to the audit chain."""
        return trail.record(
            self.database, site, at=at, actor=actor, action=action, subject=subject, body=body
        )

    def audit(self, site: str, after: int = 0) -> Iterator[AuditEntry]:
        """Yield the audit chain after an entry."""
        with self.database.reading() as connection:
            yield from trail.entries(connection, site, after)
