"""Everything the tables of one month to date are made from, and the sheet their cells go on."""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import date
from decimal import Decimal
from functools import cached_property
from typing import TYPE_CHECKING

from recon.flowsheet.network import MASS
from recon.tabulate.as_measured import AsMeasured
from recon.tabulate.cells import BasisOf, Cell
from recon.tabulate.columns import TABLE
from recon.tabulate.fitted import Fitted
from recon.tabulate.leaves import NOT_DETERMINED, Booked, Year, YearLeaf
from recon.tabulate.rounding import residue

if TYPE_CHECKING:
    from recon.declare.site import Site, SiteStream
    from recon.findings import Finding
    from recon.ingest.given import OpeningStock
    from recon.ingest.measured import IngestedMonth


@dataclass(frozen=True, kw_only=True)
class Span:
    """Some days in a row: name of the period, first and last day (1-based)."""

    name: str
    first: int
    last: int
    day: bool


@dataclass(frozen=True, kw_only=True)
class Month:
    """
    A month to date, measured and fitted.

    Attributes
    ----------
    days : tuple of date
    sites : tuple of Site
        One a day.
    ingested, measured, fitted, opening, year, booked
    opening_signed : bool
        False while last month is a draft.
    """

    days: tuple[date, ...]
    sites: tuple[Site, ...]
    ingested: IngestedMonth
    measured: AsMeasured
    fitted: Fitted
    opening: tuple[OpeningStock, ...]
    opening_signed: bool
    year: Year
    booked: tuple[Booked, ...]

    @property
    def name(self) -> str:
        """Name of the month, ``2026-01``."""
        return self.days[0].strftime("%Y-%m")

    @property
    def whole(self) -> Span:
        """The month to date."""
        return Span(name=self.name, first=1, last=len(self.days), day=False)

    @cached_property
    def spans(self) -> tuple[Span, ...]:
        """Every day, then the month."""
        days = (
            Span(name=day.isoformat(), first=p, last=p, day=True)
            for p, day in enumerate(self.days, start=1)
        )
        return (*days, self.whole)

    @cached_property
    def quantities(self) -> tuple[str, ...]:
        """Dry mass first, then components as the site lists them."""
        named = dict.fromkeys(q for site in self.sites for q in site.quantities)
        return (*(q for q in named if q == MASS), *(q for q in named if q != MASS))

    @property
    def components(self) -> tuple[str, ...]:
        """Quantities other than dry mass."""
        return tuple(q for q in self.quantities if q != MASS)

    @cached_property
    def streams(self) -> tuple[SiteStream, ...]:
        """Every stream of the month, as last declared, in the order declared."""
        return tuple({s.name: s for site in self.sites for s in site.streams}.values())

    def carried(self, stream: str, quantity: str, span: Span) -> list[int]:
        """Days of a span on which a stream exists and carries a quantity."""
        return [
            p
            for p in range(span.first, span.last + 1)
            if any(s.name == stream and quantity in s.carries for s in self.sites[p - 1].streams)
        ]


@dataclass
class Sheet:
    """Collects cells, leaves of the month and findings while tables are written."""

    month: Month
    cells: list[Cell] = field(default_factory=list)
    leaves: list[YearLeaf] = field(default_factory=list)
    findings: list[Finding] = field(default_factory=list)

    def number(
        self,
        table: str,
        period: str,
        row: str,
        column: str,
        value: Decimal | float | None,
        *,
        u: float | None = None,
        unit: str | None = None,
        basis: BasisOf = "",
        reason: str = "",
    ) -> None:
        """Write a number, or ``reason`` where there is none."""
        unit = TABLE[table].column(column).unit if unit is None else unit
        if value is None:
            self.cells.append(
                Cell(
                    table=table,
                    period=period,
                    row=row,
                    column=column,
                    unit=unit,
                    basis="",
                    reason=reason or "no figure",
                )
            )
            return
        self.cells.append(
            Cell(
                table=table,
                period=period,
                row=row,
                column=column,
                value=float(value) + 0.0,
                u=u,
                unit=unit,
                basis=basis,
            )
        )

    def words(self, table: str, period: str, row: str, column: str, text: str) -> None:
        """Write a cell of words; nothing where there are none."""
        if text:
            TABLE[table].column(column)
            self.cells.append(Cell(table=table, period=period, row=row, column=column, text=text))

    def total(
        self,
        table: str,
        row: str,
        column: str,
        value: Decimal | None,
        *,
        exact: float | None = None,
        u: float | None = None,
        basis: BasisOf = "",
        reason: str = "",
    ) -> None:
        """Write a month's total of leaves, its residue, its leaf, and the year to date."""
        month = self.month.name
        self.number(table, month, row, column, value, u=u, basis=basis, reason=reason)
        if value is None:
            self.leaf(NOT_DETERMINED, f"{table} {row}", column, Decimal(0))
            year: Decimal | str = reason or "this month states no figure"
        else:
            self.leaf(table, row, column, value)
            year = self.month.year.total(table, row, column, value)
            if exact is not None:
                self.number(
                    "residues", month, f"{table} {row}", f"residue_{column}", residue(value, exact)
                )
        alone = not self.month.year.this_year
        self.number(
            table,
            month[:4],
            row,
            column,
            None if isinstance(year, str) else year,
            u=u if alone else None,
            basis=basis,
            reason=year if isinstance(year, str) else "",
        )

    def leaf(self, table: str, row: str, column: str, value: Decimal | float) -> None:
        """Keep a number for the year to date and the running sum."""
        self.leaves.append(
            YearLeaf(
                month=self.month.name, table=table, row=row, column=column, value=float(value) + 0.0
            )
        )
