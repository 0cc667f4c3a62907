"""What one computation is given and what it gives back: plain values, picklable, no database.

``recon.app.compute_period`` is the one pure function between the two; the scheduled run, previews,
re-runs and verification all use it, and only its callers claim, read and publish.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date, datetime

from recon.findings import Finding
from recon.ingest.given import Decision, OpeningStock, SiteVersion
from recon.ingest.rows import Record, TagDay
from recon.tabulate.cells import Cell
from recon.tabulate.leaves import YearLeaf


@dataclass(frozen=True, kw_only=True)
class PeriodInputs:
    """
    Everything a month to date is computed from.

    Attributes
    ----------
    site : str
    month : date
        First plant day of the month.
    through : date
        Last plant day computed.
    versions : tuple of SiteVersion
        Rising by ``valid_from``; the first is in force on the month's first day.
    tag_days : tuple of TagDay
        The month's, and up to 30 days before it for reference values.
    records : tuple of Record
        In force at the knowledge cut, the same span, highest known of each natural key.
    decisions : tuple of Decision
    opening : tuple of OpeningStock
        Last month's closing as printed; empty in the first month (take-on).
    opening_signed : bool
        False while the month before is a draft.
    year : tuple of YearLeaf
    knowledge_cut : datetime
        Recorded, not part of the data digest.
    """

    site: str
    month: date
    through: date
    versions: tuple[SiteVersion, ...]
    tag_days: tuple[TagDay, ...]
    records: tuple[Record, ...]
    decisions: tuple[Decision, ...] = ()
    opening: tuple[OpeningStock, ...] = ()
    opening_signed: bool = True
    year: tuple[YearLeaf, ...] = ()
    knowledge_cut: datetime


@dataclass(frozen=True, kw_only=True)
class MeasurementRow:
    """A row of the book's ``measurement`` table; canonical units."""

    day: date
    name: str
    kind: str
    stream: str | None
    node: str | None
    boundary: str | None
    quantity: str
    basis: str
    unit: str
    value: float
    u_random: float | None
    u: float | None
    held: bool
    estimated: bool
    reconciled: float | None
    adjustment: float | None
    standardised: float | None
    redundant: bool
    sources: str


@dataclass(frozen=True, kw_only=True)
class EstimateRow:
    """A row of the book's ``estimate`` table."""

    day: date
    place: str
    boundary: str
    quantity: str
    basis: str
    value: float | None
    u: float | None
    determined: bool
    at_bound: bool
    reason: str


@dataclass(frozen=True, kw_only=True)
class OffsetRow:
    """A row of the book's ``source_offset`` table."""

    source: str
    draw_from: date
    value: float
    u: float
    standardised: float | None


@dataclass(frozen=True, kw_only=True)
class FigureRow:
    """A row of the book's ``figure`` table; ``budget`` is canonical JSON, largest share first."""

    name: str
    period: str
    value: float | None
    u: float | None
    basis: str
    budget: str
    reason: str


@dataclass(frozen=True, kw_only=True)
class PeriodResult:
    """
    Everything a run publishes.

    Attributes
    ----------
    summary : tuple of (str, str)
        Headline sentences by name, for the log and the first page.
    method : tuple of (str, str)
        Versions, solver, residuals, kernel, threads; recorded, never part of an identity.
    closing : tuple of OpeningStock
        The month's closing stocks as stated by the measured chain: next month's opening.
    leaves : tuple of YearLeaf
        This month's leaves for the year to date of later months.
    """

    measurements: tuple[MeasurementRow, ...]
    estimates: tuple[EstimateRow, ...]
    offsets: tuple[OffsetRow, ...]
    findings: tuple[Finding, ...]
    figures: tuple[FigureRow, ...]
    cells: tuple[Cell, ...]
    closing: tuple[OpeningStock, ...]
    leaves: tuple[YearLeaf, ...]
    summary: tuple[tuple[str, str], ...]
    method: tuple[tuple[str, str], ...]


__all__ = [
    "Decision",
    "EstimateRow",
    "FigureRow",
    "MeasurementRow",
    "OffsetRow",
    "OpeningStock",
    "PeriodInputs",
    "PeriodResult",
    "SiteVersion",
    "YearLeaf",
]
