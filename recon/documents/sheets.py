"""The sheets of the month's workbook: numbers, formulas with cached values, and text as text."""

from __future__ import annotations

from datetime import date
from typing import TYPE_CHECKING, Any

from recon.documents.find import NO_VALUE, Cells, digits, shown
from recon.documents.grid import Grid, has_own_unit
from recon.documents.heading import CAUTIONS
from recon.tabulate.columns import TABLE, TABLES

if TYPE_CHECKING:
    from collections.abc import Sequence

    from recon.documents.formulas import Formulas
    from recon.documents.grid import Places
    from recon.documents.heading import Heading
    from recon.findings import Finding
    from recon.tabulate.cells import Cell


class Writer:
    """
    Writes the sheets of one workbook; keeps its formats.

    Parameters
    ----------
    book : xlsxwriter.Workbook
    heading : Heading
    """

    def __init__(self, book: Any, heading: Heading) -> None:
        self._book, self._heading = book, heading
        self._bold = book.add_format(
            {"bold": True, "text_wrap": True, "valign": "top", "bottom": 1}
        )
        self._wrap = book.add_format({"text_wrap": True, "valign": "top"})
        self._plain = book.add_format({})
        self._day = book.add_format({"num_format": "yyyy-mm-dd"})
        self._missing = book.add_format({"italic": True, "align": "right"})
        self._numbers: dict[tuple[int, bool], Any] = {}

    def read_me(self, cells: Cells) -> None:
        """First sheet: what this is, how it recomputes, cautions."""
        sheet = self._book.add_worksheet("read-me")
        sheet.set_column(0, 0, 22)
        sheet.set_column(1, 1, 110)
        lines = [*self._heading.lines(), ("", "")]
        lines += [
            (
                "how it recomputes",
                "Sheet 'leaves' holds a day's stream, rounded once, half to even. Totals add "
                "leaves; balances add totals; unaccounted = opening + in - out - closing. Numbers "
                "that a formula in this file does not give (uncertainties, fitted figures, the "
                "running sums) are stated as numbers.",
            ),
            (
                "two chains",
                "'As measured' is what is signed. 'Fitted' is what least squares finds most "
                "likely; it closes by construction and is never signed as stock.",
            ),
            ("±", "One standard uncertainty; twice that is about 95 %."),
            ("no value", "The reason stands on sheet 'reasons'; it is never zero or blank."),
            ("signs", "Positive unaccounted: metal is missing."),
            *(("caution", text) for text in CAUTIONS),
            *(("signed", text) for text in self._heading.signed),
        ]
        for row in cells.rows("site-balance", self._heading.period):
            note = cells.text("site-balance", self._heading.period, row, "note")
            if note:
                lines.append((f"note on {row}", note))
        for i, (name, text) in enumerate(lines):
            sheet.write_string(i, 0, name, self._wrap)
            sheet.write_string(i, 1, text, self._wrap)
        self._print(sheet, repeat=False)

    def grid(self, grid: Grid, cells: Cells, formulas: Formulas) -> None:
        """One table, its heads frozen and filtered."""
        sheet = self._book.add_worksheet(grid.sheet)
        self._heads(sheet, grid)
        for i, (period, row) in enumerate(grid.keys, start=1):
            sheet.write_string(i, 0, row)
            if grid.dated:
                sheet.write_datetime(i, 1, date.fromisoformat(period), self._day)
            for column in grid.columns:
                cell = cells.at(grid.table, period, row, column)
                if cell is None:
                    continue
                formula = formulas.of(cell, grid)
                at = grid.place(column)
                self._value(sheet, i, at, cell, formula.text if formula else "")
                if column in grid.with_u and cell.u is not None:
                    sheet.write_number(i, at + 1, cell.u, self._number(digits(cell) + 1, u=True))
            if grid.own_unit:
                found = (cells.at(grid.table, period, row, c) for c in grid.columns)
                units = {c.unit for c in found if c is not None and has_own_unit(c)}
                sheet.write_string(i, grid.width - 1, ", ".join(sorted(units)))
        self._frame(sheet, len(grid.keys), grid.width, grid.heads)

    def year(self, cells: Cells, places: Places) -> None:
        """Year to date = signed earlier months + this month, line by line."""
        year, month = self._heading.year, self._heading.period
        lines = [
            c
            for c in cells.all
            if c.period == year
            and c.table in TABLE
            and c.column not in ("opening", "closing", "change")
            and TABLE[c.table].column(c.column).unit == "t"
            and cells.value(c.table, month, c.row, c.column) is not None
        ]
        sheet = self._book.add_worksheet("year-to-date")
        heads = ("table", "row", "column", "unit", "earlier months", "this month", "year to date")
        self._titles(sheet, heads)
        for i, c in enumerate(lines, start=1):
            for j, text in enumerate((c.table, c.row, c.column, c.unit)):
                sheet.write_string(i, j, text)
            own = cells.value(c.table, month, c.row, c.column) or 0.0
            form = self._number(digits(c))
            address = places.address(c.table, month, c.row, c.column)
            if address:
                self._formula(sheet, i, 5, address, form, own)
            else:
                sheet.write_number(i, 5, own, form)
            if c.value is None:
                self._none(sheet, i, 4)
                self._none(sheet, i, 6)
                continue
            earlier = round(c.value - own, digits(c)) + 0.0
            sheet.write_number(i, 4, earlier, form)
            self._formula(sheet, i, 6, f"E{i + 1}+F{i + 1}", form, c.value)
        self._frame(sheet, len(lines), len(heads), 3)

    def days(self, cells: Cells) -> None:
        """Balances day by day; the line ``month`` adds the days above it."""
        sheet = self._book.add_worksheet("days")
        columns = tuple(
            f"{lead}{name}"
            for lead in ("", "fitted_")
            for name in ("receipts", "products", "discards")
        )
        titles = [TABLE["site-balance"].column(c).title for c in columns]
        self._titles(sheet, ("balance", "day", *titles))
        line = 0
        for table in ("site-balance", "section-balance"):
            days = [p for p in cells.periods(table) if len(p) == len("2026-01-01")]
            for row in cells.rows(table, self._heading.period):
                first = line + 1
                for day in days:
                    line += 1
                    sheet.write_string(line, 0, row)
                    sheet.write_datetime(line, 1, date.fromisoformat(day), self._day)
                    for j, column in enumerate(columns, start=2):
                        cell = cells.at(table, day, row, column)
                        if cell is not None:
                            self._value(sheet, line, j, cell)
                line += 1
                sheet.write_string(line, 0, row)
                sheet.write_string(line, 1, "month")
                for j, column in enumerate(columns, start=2):
                    self._month_line(sheet, cells, table, row, column, line, j, first)
        self._frame(sheet, line, 2 + len(columns), 2)

    def _month_line(
        self,
        sheet: Any,
        cells: Cells,
        table: str,
        row: str,
        column: str,
        line: int,
        at: int,
        first: int,
    ) -> None:
        cell = cells.at(table, self._heading.period, row, column)
        if cell is None:
            return
        letter = chr(65 + at)
        formula = f"SUM({letter}{first + 1}:{letter}{line})"
        self._value(sheet, line, at, cell, formula if cell.value is not None else "")

    def findings(self, findings: Sequence[Finding]) -> None:
        """What checks found, in sentences."""
        sheet = self._book.add_worksheet("findings")
        self._titles(sheet, ("severity", "code", "subject", "day number", "finding"))
        for i, f in enumerate(findings, start=1):
            for j, text in enumerate((str(f.severity), f.code, f.subject)):
                sheet.write_string(i, j, text)
            if f.period is not None:
                sheet.write_number(i, 3, f.period)
            sheet.write_string(i, 4, f.text, self._wrap)
        sheet.set_column(4, 4, 120)
        self._frame(sheet, len(findings), 5, 1, widths=False)

    def changes(self, cells: Cells, before: Cells) -> None:
        """What differs from an earlier revision, in the month and the year to date."""
        sheet = self._book.add_worksheet("changes")
        heads = ("table", "period", "row", "column", "before", "now", "difference")
        self._titles(sheet, heads)
        line = 0
        for new in (*cells.all, *_gone(cells, before)):
            if new.table not in TABLE or len(new.period) > len("2026-01"):
                continue
            place = (new.table, new.period, new.row, new.column)
            old, now = before.at(*place), cells.at(*place)
            if _printed(old) == _printed(now):
                continue
            line += 1
            for j, text in enumerate(place):
                sheet.write_string(line, j, text)
            for j, cell in ((4, old), (5, now)):
                if cell is None:
                    sheet.write_string(line, j, "not there", self._missing)
                else:
                    self._value(sheet, line, j, cell)
            if old and now and old.value is not None and now.value is not None:
                self._formula(
                    sheet,
                    line,
                    6,
                    f"F{line + 1}-E{line + 1}",
                    self._number(digits(new)),
                    now.value - old.value,
                )
        self._frame(sheet, line, len(heads), 4)

    def dictionary(self) -> None:
        """What every column means."""
        sheet = self._book.add_worksheet("columns")
        self._titles(sheet, ("table", "column", "title", "unit", "meaning"))
        line = 0
        for table in TABLES:
            for c in table.columns:
                line += 1
                for j, text in enumerate((table.name, c.name, c.title, c.unit, c.meaning)):
                    sheet.write_string(line, j, text, self._wrap)
        sheet.set_column(1, 2, 24)
        sheet.set_column(4, 4, 100)
        self._frame(sheet, line, 5, 1, widths=False)

    def reasons(self, cells: Cells) -> None:
        """Why a cell of the month or year has no value."""
        sheet = self._book.add_worksheet("reasons")
        self._titles(sheet, ("table", "period", "row", "column", "reason"))
        missing = [
            c
            for c in cells.all
            if c.reason and c.period in (self._heading.period, self._heading.year)
        ]
        for i, c in enumerate(missing, start=1):
            for j, text in enumerate((c.table, c.period, c.row, c.column, c.reason)):
                sheet.write_string(i, j, text)
        sheet.set_column(4, 4, 100)
        self._frame(sheet, len(missing), 5, 1, widths=False)

    def names(self, cells: Cells, places: Places) -> None:
        """Named cells for other workbooks: unaccounted metal of the site, by component."""
        month = self._heading.period
        for row in cells.rows("site-balance", month):
            for column in ("opening", "receipts", "closing", "unaccounted"):
                at = places.address("site-balance", month, row, column)
                if at is not None and row.isalnum():
                    sheet, cell = at.rsplit("!", 1)
                    letters = cell.rstrip("0123456789")
                    self._book.define_name(
                        f"{column}_{row}", f"={sheet}!${letters}${cell.removeprefix(letters)}"
                    )

    def _heads(self, sheet: Any, grid: Grid) -> None:
        row = TABLE[grid.table].row
        titles = [row, "day"] if grid.dated else [row]
        for name in grid.columns:
            column = TABLE[grid.table].column(name)
            stem = column.name.removesuffix("{q}")
            of = f" {name.removeprefix(stem)}" if stem != column.name else ""
            unit = "" if column.unit in ("", "-", "grade") else f" [{column.unit}]"
            if column.unit == "grade":
                unit = " [g/t]" if of.strip() in ("Au", "Ag", "Pt", "Pd") else " [%]"
            titles.append(f"{column.title}{of}{unit}")
            if name in grid.with_u:
                titles.append(f"±{unit}")
        if grid.own_unit:
            titles.append("unit where the head has none")
        self._titles(sheet, titles)

    def _titles(self, sheet: Any, titles: Sequence[str]) -> None:
        for j, title in enumerate(titles):
            sheet.write_string(0, j, title, self._bold)

    def _value(self, sheet: Any, i: int, j: int, cell: Cell, formula: str = "") -> None:
        if cell.text is not None:
            sheet.write_string(i, j, cell.text)
        elif cell.value is None:
            self._none(sheet, i, j)
        elif formula:
            self._formula(sheet, i, j, formula, self._number(digits(cell)), cell.value)
        else:
            sheet.write_number(i, j, cell.value, self._number(digits(cell)))

    @staticmethod
    def _formula(sheet: Any, i: int, j: int, formula: str, form: Any, cached: float) -> None:
        """The only place where a formula is written; its text is never from the data."""
        sheet.write_formula(i, j, f"={formula}", form, cached)

    def _none(self, sheet: Any, i: int, j: int) -> None:
        sheet.write_string(i, j, NO_VALUE, self._missing)

    def _number(self, decimals: int, *, u: bool = False) -> Any:
        key = (decimals, u)
        if key not in self._numbers:
            pattern = "#,##0" + ("." + "0" * decimals if decimals else "")
            self._numbers[key] = self._book.add_format({"num_format": pattern, "italic": u})
        return self._numbers[key]

    def _frame(
        self, sheet: Any, lines: int, width: int, heads: int, *, widths: bool = True
    ) -> None:
        if widths:
            sheet.set_column(0, heads - 1, 24)
            sheet.set_column(heads, max(width - 1, heads), 13)
        sheet.freeze_panes(1, heads)
        sheet.autofilter(0, 0, max(lines, 1), max(width - 1, 0))
        sheet.print_area(0, 0, max(lines, 1), max(width - 1, 0))
        self._print(sheet, repeat=True)

    def _print(self, sheet: Any, *, repeat: bool) -> None:
        sheet.set_landscape()
        sheet.set_paper(9)
        sheet.fit_to_pages(1, 0)
        if repeat:
            sheet.repeat_rows(0)
        h = self._heading
        foot = f"{h.site[:60]} {h.period} {h.state} run {h.run} {h.result_digest[:16]}".replace(
            "&", "&&"
        )
        sheet.set_footer(f"&L{foot}&RPage &P of &N")


def _gone(cells: Cells, before: Cells) -> list[Cell]:
    """Cells of the earlier revision that are no longer there."""
    return [c for c in before.all if cells.at(c.table, c.period, c.row, c.column) is None]


def _printed(cell: Cell | None) -> tuple[str, str, str] | None:
    return None if cell is None else (shown(cell), shown(cell, u=True), cell.basis)
