"""What use cases need from the outside, as protocols; ``recon.wiring`` supplies the real parts."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from datetime import date, datetime
from typing import Protocol

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
from recon.findings import Finding
from recon.ingest.rows import Record, RowKind, Series


class Plant(Protocol):
    """The plant's sources, read-only."""

    def readings(self, tags: Sequence[str], since: datetime, until: datetime) -> Iterator[Series]:
        """
        Yield each tag's readings with ``since <= at < until``, and the one in force at ``since``.

        Memory stays bounded: one tag and a limited span are held at a time; a tag may come in
        several pieces, in time order.

        Raises
        ------
        DataError
            The source cannot be read after retries, or a row breaks the column contract.
        """
        ...

    def records(self, kind: RowKind, since: datetime, until: datetime) -> Iterator[Record]:
        """
        Yield records whose span touches ``[since, until)``, every stage, in natural-key order.

        Raises
        ------
        DataError
            As above.
        """
        ...

    def query(self, kind: RowKind) -> str:
        """
        Say what is asked of the source for one kind of row: SQL text, or a sheet and its digest.

        Kept as evidence beside the rows; never holds a password.
        """
        ...

    def noted(self) -> tuple[Finding, ...]:
        """Give what was found in passing since this was last asked: revisions, missing values."""
        ...


class Book(Protocol):
    """
    The accounting database. Append-only but for claims, watermarks, progress and the pointer.

    Every method is one transaction. Times are aware UTC; ``at`` and ``seen_at`` are the caller's
    clock, leases run by the database's.
    """

    def add_site_version(self, version: StoredVersion) -> bool:
        """Keep a version of a site; False where exactly this text is already there."""
        ...

    def site_versions(self, site: str) -> tuple[StoredVersion, ...]:
        """List every version of a site, rising by ``valid_from`` and ``known_at``."""
        ...

    def sites(self) -> tuple[str, ...]:
        """List the sites that have a version, by name."""
        ...

    def keep(self, site: str, pulled: Pulled, *, seen_at: datetime) -> Kept:
        """
        Keep what a source gave before anything is computed from it; keeping twice adds nothing.

        Raises
        ------
        DataError
            A row holds a number that is not finite, or a time without zone; nothing was kept.
        """
        ...

    def chunk(self, site: str, digest: str) -> Chunk:
        """
        Give rows as they came.

        Raises
        ------
        AuditError
            The chunk is missing or is not what its digest says.
        """
        ...

    def source_changes(self, site: str, since: datetime, until: datetime) -> tuple[Finding, ...]:
        """List what changed or vanished at the source, for rows true in ``[since, until)``."""
        ...

    def watermarks(self, site: str) -> dict[str, Watermark]:
        """How far each source has been read, by source."""
        ...

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
        """
        Give everything a month to date is computed from, as known at a cut, from one snapshot.

        Tag days are those with ``first_day <= day <= through``; records those whose span touches
        ``[since, until)``. A row counts from the later of its own known-at and when it was first
        seen. Of each natural key without its stage all stages are given, each in its latest form.
        """
        ...

    def decide(self, site: str, proposal: Proposal) -> str:
        """Keep a decision with an audit entry; give its digest."""
        ...

    def approve(
        self, site: str, decision: str, *, by: str, at: datetime, digest_seen: str, granted: bool
    ) -> None:
        """
        Approve or refuse a decision as a second person who has seen ``digest_seen``.

        Raises
        ------
        ConflictError
            The same person, a digest that is not the decision's, or already answered.
        """
        ...

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
        """
        Take the right to publish; None while somebody else holds it or it has been done.

        None also where a later knowledge cut has been published already.
        """
        ...

    def extend(self, claim: Claim, *, lease_seconds: float) -> Claim:
        """
        Make a lease longer.

        Raises
        ------
        LostClaimError
            Somebody else has it, or it is done.
        """
        ...

    def give_back(self, claim: Claim) -> None:
        """End a lease at once, so that the next may take it; without effect where it is lost."""
        ...

    def published(self, site: str, month: date, through: date, data_digest: str) -> RunHead | None:
        """Give the published run of exactly these inputs, current or not."""
        ...

    def publish(
        self,
        claim: Claim,
        inputs: PeriodInputs,
        result: PeriodResult,
        *,
        at: datetime,
        actor: str,
    ) -> RunHead:
        """
        Write run, rows, pointer and audit entry in one transaction and mark the claim done.

        Where the run of this data digest exists (it was published before), nothing is written but
        the move of the pointer, with its audit entry.

        Raises
        ------
        LostClaimError
            The token is no longer the claim's; nothing was written.
        DataError
            The data digest of ``inputs`` is not the claim's, or a number is not finite.
        """
        ...

    def point(self, claim: Claim, run: int, *, at: datetime, actor: str) -> RunHead:
        """
        Move the pointer to a run that exists and has the claim's data digest; mark done.

        Raises
        ------
        LostClaimError
            As above.
        """
        ...

    def current(self, site: str, month: date, through: date | None = None) -> RunHead | None:
        """Give the run that speaks for a month through a day; without one, its latest day."""
        ...

    def standing(self, site: str) -> tuple[Standing, ...]:
        """List where every pointer stands, by month and day."""
        ...

    def confirm(
        self, standing: Standing, site: str, *, knowledge_cut: datetime, at: datetime
    ) -> None:
        """Note that a current run is still right at a later cut; no move, so no audit entry."""
        ...

    def arrivals(
        self,
        site: str,
        *,
        since: datetime,
        until: datetime,
        after: datetime,
        by: datetime | None = None,
    ) -> tuple[datetime, datetime] | None:
        """
        Give the earliest and latest time at which rows of a span became known after a cut.

        Rows are tag days and records whose span touches ``[since, until)``; known is the later of
        a row's own known-at and when it was first seen, ``by`` the present where that is given.
        None where nothing came.
        """
        ...

    def runs(self, site: str, month: date | None = None) -> tuple[RunHead, ...]:
        """List runs in the order they were published."""
        ...

    def result(self, site: str, run: int) -> PeriodResult:
        """
        Give all rows of a run, sorted by natural key.

        Raises
        ------
        AuditError
            A table of the run is not what its digest says: no number is given.
        """
        ...

    def note_progress(self, site: str, progress: Progress) -> None:
        """Say what long work is doing; replaces what it said before."""
        ...

    def progress(self, site: str) -> tuple[Progress, ...]:
        """List what long work said last, by name of the work."""
        ...

    def record(
        self, site: str, *, at: datetime, actor: str, action: str, subject: str, body: object
    ) -> AuditEntry:
        """Append an entry of its own to the audit chain; ``body`` becomes canonical bytes."""
        ...

    def audit(self, site: str, after: int = 0) -> Iterator[AuditEntry]:
        """Yield the audit chain after an entry, in order."""
        ...
