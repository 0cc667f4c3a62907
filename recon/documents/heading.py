"""What every document of a month says at its head and foot: which month, which run, which state."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date, datetime

CAUTIONS = (
    "A reading that agrees with its neighbours is consistent in a balance. That says nothing about "
    "any protective duty of the instrument, and is no reason to enter an area, open a vessel or "
    "approach a nuclear gauge: that is for licensed people under site permits.",
    "Slag, matte and blister masses here must not be used for ladle-fill or crane-load decisions.",
    "A sulfur balance never replaces a stack monitor: report monitored figures as the permit "
    "requires.",
    "Reconciled figures are estimates. Settled custody figures, contracts, royalty definitions, "
    "local law, permits and licensed practice override them.",
    "Unaccounted metal is carried, not allocated: write-offs need a named approver and a cause.",
)


@dataclass(frozen=True, kw_only=True)
class Heading:
    """
    Head of a document.

    Attributes
    ----------
    site, title : str
        Stable name, and name for people.
    zone : str
        Plant time zone.
    month : date
        First plant day.
    through : date
        Last plant day stated.
    state : str
        draft, reviewed, approved, closed, RESTATED, preview, ...
    run : str
        Number or name of the run.
    revision : int
    data_digest, result_digest : str
        What the run read and what it gave; blank where not known.
    knowledge_cut : datetime
        Nothing known later is in it; also the document's own date, so that it comes out the same
        byte for byte.
    signed : tuple of str
        "prepared by ...", "approved by ..., 2026-02-05": lines for the foot.
    last_data : str
        How far data reach, for example "assays to 14:00, 3 missing".
    """

    site: str
    month: date
    through: date
    knowledge_cut: datetime
    title: str = ""
    zone: str = "UTC"
    state: str = "draft"
    run: str = ""
    revision: int = 0
    data_digest: str = ""
    result_digest: str = ""
    signed: tuple[str, ...] = ()
    last_data: str = ""

    @property
    def period(self) -> str:
        """Name of the month as in cells, ``2026-01``."""
        return self.month.strftime("%Y-%m")

    @property
    def year(self) -> str:
        """Name of the year to date as in cells."""
        return self.month.strftime("%Y")

    def lines(self) -> list[tuple[str, str]]:
        """Give the head as pairs of name and value, none blank."""
        pairs = [
            ("site", self.title or self.site),
            ("month", self.period),
            ("days", f"{self.month.isoformat()} to {self.through.isoformat()}, plant days"),
            ("plant time zone", self.zone),
            ("state", self.state),
            ("run", self.run),
            ("revision", str(self.revision) if self.revision else ""),
            ("known at", self.knowledge_cut.strftime("%Y-%m-%d %H:%M UTC")),
            ("last data", self.last_data),
            ("data digest", self.data_digest),
            ("result digest", self.result_digest),
        ]
        return [(name, value) for name, value in pairs if value]
