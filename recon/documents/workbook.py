"""The month's workbook: live formulas from leaves to totals, the same names and order every month.

Every figure is a real number or a formula with its cached value; all text is written as text, so
nothing from the data is ever run. With a fixed date the file is the same byte for byte.
"""

from __future__ import annotations

import io
from typing import TYPE_CHECKING

import xlsxwriter

from recon.documents.find import Cells
from recon.documents.formulas import Formulas
from recon.documents.grid import Places, grid_of
from recon.documents.sheets import Writer

if TYPE_CHECKING:
    from collections.abc import Iterable

    from recon.declare.site import Site
    from recon.documents.heading import Heading
    from recon.findings import Finding
    from recon.tabulate.cells import Cell

MONTHLY = (
    "site-balance",
    "section-balance",
    "unaccounted-bridge",
    "streams",
    "stocks",
    "recoveries",
    "node-closure",
    "measured-reconciled",
    "tests",
)
LEAVES = "leaves"
SAFE = {
    "in_memory": True,
    "strings_to_formulas": False,
    "strings_to_urls": False,
    "strings_to_numbers": False,
    "nan_inf_to_errors": False,
}


def workbook(
    heading: Heading,
    site: Site,
    cells: Iterable[Cell],
    findings: Iterable[Finding] = (),
    before: Iterable[Cell] = (),
) -> bytes:
    """
    Write the workbook of a month.

    Parameters
    ----------
    heading : Heading
        Its knowledge cut dates the file.
    site : Site
        In force at the month's end; says which streams a balance adds.
    cells : iterable of Cell
        Of one run.
    findings : iterable of Finding
    before : iterable of Cell
        Of an earlier revision: what differs stands on the sheet ``changes``.

    Returns
    -------
    bytes
    """
    found = Cells(cells)
    out = io.BytesIO()
    book = xlsxwriter.Workbook(out, SAFE)
    created = heading.knowledge_cut.replace(tzinfo=None)
    book.set_properties({"title": f"{heading.site} {heading.period}", "created": created})
    writer = Writer(book, heading)
    places = _layout(found, heading)
    formulas = Formulas(site, found, places, heading.period)
    writer.read_me(found)
    for grid in places.grids:
        writer.grid(grid, found, formulas)
    writer.year(found, places)
    writer.days(found)
    writer.findings(list(findings))
    earlier = Cells(before)
    if earlier.all:
        writer.changes(found, earlier)
    writer.dictionary()
    writer.reasons(found)
    writer.names(found, places)
    book.close()
    return out.getvalue()


def _layout(cells: Cells, heading: Heading) -> Places:
    places = Places()
    for table in MONTHLY:
        if cells.rows(table, heading.period):
            places.add(grid_of(cells, sheet=table, table=table, periods=[heading.period]))
    days = [p for p in cells.periods("streams") if len(p) == len("2026-01-01")]
    if days:
        ratios = [
            c for c in cells.columns("streams") if "grade" in c or "moisture" in c or "share" in c
        ]
        places.add(
            grid_of(
                cells, sheet=LEAVES, table="streams", periods=days, leave_out=ratios, by_row=True
            )
        )
    return places
