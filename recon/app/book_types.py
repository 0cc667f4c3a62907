"""What goes into the book and comes out of it, beside the period's own types."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date, datetime
from typing import Literal

from recon.audit.chain import Entry as AuditEntry
from recon.findings import Finding
from recon.ingest.given import Decision, OpeningStock
from recon.ingest.rows import Record, RowKind, TagDay
from recon.tabulate.leaves import YearLeaf

__all__ = [
    "AuditEntry",
    "Chunk",
    "Claim",
    "Kept",
    "Material",
    "Progress",
    "Proposal",
    "Pulled",
    "Reread",
    "RunHead",
    "RunKind",
    "Standing",
    "StoredVersion",
    "Watermark",
]

RunKind = Literal["published", "preview", "as-known-at", "window", "prior-period"]


@dataclass(frozen=True, kw_only=True)
class StoredVersion:
    """
    A site version as the book keeps it: the text of the file, never its parsed form.

    Attributes
    ----------
    site : str
    digest : str
        SHA-256 of ``content`` as UTF-8.
    valid_from : date
        First plant day it holds for.
    known_at : datetime
        When the book came to know it, aware UTC.
    added_by : str
    content : str
        The TOML as written.
    """

    site: str
    digest: str
    valid_from: date
    known_at: datetime
    added_by: str
    content: str


@dataclass(frozen=True, kw_only=True)
class Chunk:
    """
    Rows exactly as a source returned them.

    Attributes
    ----------
    digest : str
        SHA-256 of the uncompressed ``content``; its address.
    kind : RowKind
    subject : str
        Tag for readings; empty for records.
    day : date
        Plant day of readings; UTC day of ``true_from`` for records.
    rows : int
    content : bytes
        Uncompressed; compressing is the book's business.
    """

    digest: str
    kind: RowKind
    subject: str
    day: date
    rows: int
    content: bytes


@dataclass(frozen=True, kw_only=True)
class Reread:
    """
    A span in which a source was read whole.

    Whatever the book holds of that kind whose span touches ``[since, until)`` and was not
    returned has vanished at the source. Readings need none: a chunk is a whole tag's day.
    """

    kind: RowKind
    since: datetime
    until: datetime


@dataclass(frozen=True, kw_only=True)
class Watermark:
    """How far a source has been read, by the time its rows became known."""

    source: str
    known_through: datetime
    fingerprint: str
    read_at: datetime


@dataclass(frozen=True, kw_only=True)
class Pulled:
    """
    One small transaction's worth of what a source gave.

    Attributes
    ----------
    query : str
        Text that was asked (SQL, or name and digest of a sheet); kept with its digest.
    chunks : tuple of Chunk
        Readings, a whole tag's day each, an empty one where the source has nothing any more.
    tag_days : tuple of TagDay
        Made from chunks of this pull, or of an earlier one after a new site version.
    records : tuple of Record
        The book makes their chunks itself.
    reread : Reread or None
        States that ``records`` is all there is of that kind in that span.
    watermark : Watermark or None
        Moves in the same transaction.
    """

    query: str
    chunks: tuple[Chunk, ...] = ()
    tag_days: tuple[TagDay, ...] = ()
    records: tuple[Record, ...] = ()
    reread: Reread | None = None
    watermark: Watermark | None = None


@dataclass(frozen=True, kw_only=True)
class Kept:
    """
    What a pull added; nothing is added twice.

    Attributes
    ----------
    chunks, tag_days, records : int
        New ones.
    findings : tuple of Finding
        ``changed-at-source``, ``vanished-at-source`` and ``back-at-source``; kept in the book as
        well. A document that vanished stays in force until a person sets it aside; a day of
        readings is replaced by what the source now gives, unless that is nothing.
    """

    chunks: int
    tag_days: int
    records: int
    findings: tuple[Finding, ...]


@dataclass(frozen=True, kw_only=True)
class Material:
    """
    What was in force for a month to date at a knowledge cut, from one snapshot.

    Attributes
    ----------
    versions : tuple of StoredVersion
        Rising by ``valid_from``; the first is in force on the month's first day.
    tag_days : tuple of TagDay
        Sorted by tag and day.
    records : tuple of Record
        Sorted by kind and natural key.
    decisions : tuple of Decision
        In force at the cut and touching the span, sorted by digest.
    opening : tuple of OpeningStock
        Closing stocks of the month before, from its current run through its last day; empty where
        there is no such run.
    opening_run : int or None
        That run.
    opening_signed : bool
        The month before is closed; True in the first month.
    first_month : bool
        No earlier month of this site has a published run: stocks are taken on.
    year : tuple of YearLeaf
        Leaves of the twelve months before, from their current whole-month runs.
    """

    versions: tuple[StoredVersion, ...]
    tag_days: tuple[TagDay, ...]
    records: tuple[Record, ...]
    decisions: tuple[Decision, ...]
    opening: tuple[OpeningStock, ...]
    opening_run: int | None
    opening_signed: bool
    first_month: bool
    year: tuple[YearLeaf, ...]


@dataclass(frozen=True, kw_only=True)
class Proposal:
    """
    A decision as a person makes it.

    Attributes
    ----------
    kind : str
        As in ``Decision``, or ``withdraw`` with the digest of a decision as ``tag``.
    evidence : str
        Document, file digest or word of what it rests on.
    previews : int
        Alternatives viewed before deciding.
    needs_approval : bool
        True: without force until a different person has approved it.
    """

    kind: str
    tag: str
    first: date
    last: date
    value: float | None
    reason: str
    evidence: str
    by: str
    made_at: datetime
    previews: int = 0
    needs_approval: bool = False


@dataclass(frozen=True, kw_only=True)
class Claim:
    """
    The right to publish one month to date, for a while; ``token`` fences off every earlier owner.

    ``lease_until`` is by the clock of the database.
    """

    site: str
    month: date
    through: date
    data_digest: str
    knowledge_cut: datetime
    owner: str
    token: int
    lease_until: datetime


@dataclass(frozen=True, kw_only=True)
class RunHead:
    """
    A run without its rows.

    Attributes
    ----------
    run : int
        Number within the site, rising without gap.
    revision : int
        Counts the published runs of this month and day from 1.
    site_versions : tuple of str
        Digests.
    manifest : str
        Digest of the list of evidence it rests on.
    method, summary : tuple of (str, str)
        As in ``PeriodResult``.
    result_digest : str
        Over the digests of all its tables.
    """

    site: str
    run: int
    month: date
    through: date
    kind: RunKind
    revision: int
    data_digest: str
    knowledge_cut: datetime
    manifest: str
    site_versions: tuple[str, ...]
    method: tuple[tuple[str, str], ...]
    summary: tuple[tuple[str, str], ...]
    result_digest: str
    published_at: datetime


@dataclass(frozen=True, kw_only=True)
class Standing:
    """
    Where the pointer of a month through a day stands.

    Attributes
    ----------
    knowledge_cut : datetime
        What was known by then is in the run, whether it was computed then or found still right.
    moved_at : datetime
        When the pointer moved or was confirmed.
    """

    month: date
    through: date
    run: int
    data_digest: str
    knowledge_cut: datetime
    moved_at: datetime


@dataclass(frozen=True, kw_only=True)
class Progress:
    """What long work is doing: ``done`` of ``total`` steps, in words."""

    work: str
    done: int
    total: int
    message: str
    at: datetime
