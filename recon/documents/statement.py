"""The month's statement as plain text: the boundary balance first, then what a person must know."""

from __future__ import annotations

import re
import textwrap
from collections import defaultdict
from typing import TYPE_CHECKING

from recon.documents.find import NO_VALUE, Cells, digits, grouped, shown
from recon.documents.heading import CAUTIONS
from recon.findings import Severity
from recon.flowsheet.network import MASS
from recon.tabulate.columns import TABLE

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from recon.documents.heading import Heading
    from recon.findings import Finding
    from recon.tabulate.cells import Cell

WIDTH = 100
NAMED = 5
"""So many findings of one kind are printed; the rest are counted."""
BALANCE = ("opening", "receipts", "products", "discards", "closing", "unaccounted")
ORDER = {Severity.SERIOUS: 0, Severity.WARNING: 1, Severity.NOTE: 2}


def statement(heading: Heading, cells: Iterable[Cell], findings: Iterable[Finding] = ()) -> str:
    """
    Write the statement.

    Parameters
    ----------
    heading : Heading
    cells : iterable of Cell
        Of one run.
    findings : iterable of Finding

    Returns
    -------
    str
        Plain text, at most 100 columns but for tables that need more.
    """
    found = Cells(cells)
    lines = ["METAL ACCOUNTING STATEMENT", ""]
    lines += [f"{name + ':':17}{value}" for name, value in heading.lines()]
    lines += _balances(found, heading)
    lines += _findings(list(findings))
    lines += _bridge(found, heading)
    lines += _section("Balance by section, as measured [t]")
    lines += _balance_table(found, "section-balance", heading.period)
    lines += _section("Year to date, as measured [t]")
    lines += _balance_table(found, "site-balance", heading.year)
    lines += _recoveries(found, heading)
    lines += _stocks(found, heading)
    lines += _streams(found, heading)
    lines += _section("Cautions")
    for caution in CAUTIONS:
        lines += textwrap.wrap(caution, WIDTH, initial_indent="- ", subsequent_indent="  ")
    lines += ["", *heading.signed] if heading.signed else []
    return "\n".join(line.rstrip() for line in lines) + "\n"


def balance_sentence(cells: Cells, table: str, period: str, row: str) -> str:
    """Say in a sentence what one line of a balance means."""
    unaccounted = cells.at(table, period, row, "unaccounted")
    if unaccounted is None:
        return ""
    name = "Dry mass" if row == MASS else row
    if unaccounted.value is None:
        return f"{name}: unaccounted is {_lower_not(unaccounted.reason)}."
    way = "missing" if unaccounted.value > 0 else "more than accounted for"
    size = grouped(abs(unaccounted.value), digits(unaccounted))
    words = f"{name}: {size} t {way}"
    if unaccounted.u is not None:
        words += f", standard uncertainty {grouped(unaccounted.u, digits(unaccounted))} t"
    z = cells.value(table, period, row, "z")
    lost = cells.at(table, period, row, "loss_not_shown")
    if z is None:
        return words + "; no test: " + _why(cells.at(table, period, row, "z")) + "."
    verdict = (
        "inside what chance explains: carry it, allocate nothing"
        if abs(z) <= 2
        else "beyond what chance explains: investigate before booking anything"
    )
    words += f" (z {z:.1f}), {verdict}"
    if lost is not None and lost.value is not None:
        words += (
            f". A loss smaller than {grouped(lost.value, 1)} t would not surely show this month"
        )
    twelve = cells.value(table, period, row, "loss_not_shown_12")
    if twelve is not None:
        words += f", nor one smaller than {grouped(twelve, 1)} t over twelve such months"
    return words + "."


def _lower_not(reason: str) -> str:
    return reason if reason.startswith("not determined") else f"not determined: {reason}"


def _why(cell: Cell | None) -> str:
    return cell.reason if cell is not None and cell.reason else "no yardstick"


def _balances(cells: Cells, heading: Heading) -> list[str]:
    lines = _section(f"Site balance {heading.period}, as measured [t]")
    lines += _balance_table(cells, "site-balance", heading.period)
    lines.append("")
    for row in cells.rows("site-balance", heading.period):
        sentence = balance_sentence(cells, "site-balance", heading.period, row)
        lines += textwrap.wrap(sentence, WIDTH, subsequent_indent="  ")
        note = cells.text("site-balance", heading.period, row, "note")
        lines += (
            textwrap.wrap(note, WIDTH, initial_indent="  ", subsequent_indent="  ") if note else []
        )
    lines += _running(cells, heading)
    lines += _provisional(cells, heading)
    return lines


def _running(cells: Cells, heading: Heading) -> list[str]:
    table, period = "site-balance", heading.period
    rows = [
        row
        for row in cells.rows(table, period)
        if (cells.value(table, period, row, "running_months") or 0) > 1
        or cells.value(table, period, row, "span_months")
    ]
    lines = []
    for row in rows:
        run = cells.at(table, period, row, "running_unaccounted")
        months = cells.value(table, period, row, "running_months") or 0
        if run is not None and run.value is not None and run.u is not None:
            lines.append(
                f"{row}, sum over {months:.0f} months: {grouped(run.value, 3)} t, standard "
                f"uncertainty {grouped(run.u, 3)} t."
            )
        span = cells.at(table, period, row, "span_unaccounted")
        if span is not None and span.value is not None:
            count = cells.value(table, period, row, "span_months") or 0
            lines.append(
                f"{row}, since stocks were last all surveyed ({count:.0f} months): "
                f"{grouped(span.value, 3)} t unaccounted, standard uncertainty "
                f"{grouped(span.u or 0.0, 3)} t."
            )
    return lines


def _provisional(cells: Cells, heading: Heading) -> list[str]:
    shares = [
        f"{row} {share:.1f} %"
        for row in cells.rows("site-balance", heading.period)
        if (share := cells.value("site-balance", heading.period, row, "provisional_share"))
    ]
    return (
        [f"Provisional or estimated, share of in and out: {', '.join(shares)}."] if shares else []
    )


def _balance_table(cells: Cells, table: str, period: str) -> list[str]:
    rows = cells.rows(table, period)
    if not rows:
        return ["nothing is stated"]
    heads = [TABLE[table].column(name).title for name in BALANCE]
    lines = [["", *heads, "±", "z"]]
    for row in rows:
        numbers = [shown(cells.at(table, period, row, name)) for name in BALANCE]
        unaccounted = cells.at(table, period, row, "unaccounted")
        z = cells.at(table, period, row, "z")
        lines.append(
            [
                row.replace(MASS, "dry mass"),
                *numbers,
                shown(unaccounted, u=True),
                "" if z is None or z.value is None else shown(z),
            ]
        )
    return table_of(lines)


def _findings(findings: Sequence[Finding]) -> list[str]:
    lines = _section("Findings")
    if not findings:
        return [*lines, "none"]
    by_code: dict[str, list[Finding]] = defaultdict(list)
    for finding in sorted(findings, key=lambda f: ORDER[f.severity]):
        by_code[finding.code].append(finding)
    for code, found in by_code.items():
        for finding in found[:NAMED]:
            lines += textwrap.wrap(
                f"{finding.severity}: {finding.text}",
                WIDTH,
                initial_indent="- ",
                subsequent_indent="  ",
            )
        if len(found) > NAMED:
            lines.append(f"  and {len(found) - NAMED} more of this kind ({code}).")
    return lines


def _bridge(cells: Cells, heading: Heading) -> list[str]:
    table, period = "unaccounted-bridge", heading.period
    site = set(cells.rows("site-balance", period))
    rows = [row for row in cells.rows(table, period) if bridge_of(row) in site]
    moved = {bridge_of(row) for row in rows if cells.at(table, period, row, "effect")}
    if not moved:
        return []
    lines = [["", "effect", "unaccounted", "step"]]
    lines += [
        [
            bridge_of(row),
            shown(cells.at(table, period, row, "effect")),
            shown(cells.at(table, period, row, "unaccounted")),
            cells.text(table, period, row, "step"),
        ]
        for row in rows
        if bridge_of(row) in moved
    ]
    title = "Unaccounted: as read, corrections, stated [t]"
    return [*_section(title), *table_of(lines, words_last=True)]


def bridge_of(row: str) -> str:
    """
    Give the balance that a line of the bridge belongs to.

    Examples
    --------
    >>> bridge_of("smelter Cu 001 0af3"), bridge_of("Cu 000 as read")
    ('smelter Cu', 'Cu')
    """
    return re.split(r" \d{3} ", row, maxsplit=1)[0]


def _recoveries(cells: Cells, heading: Heading) -> list[str]:
    table, period = "recoveries", heading.period
    rows = cells.rows(table, period)
    if not rows:
        return []
    names = ("measured", "built_up", "two_product", "fitted")
    lines = [["", *(f"{TABLE[table].column(n).title} ±" for n in names), "unit"]]
    for row in rows:
        found = [cells.at(table, period, row, name) for name in names]
        printed = []
        for cell in found:
            value = shown(cell)
            u = shown(cell, u=True)
            printed.append(f"{value} ± {u}" if u else value)
        unit = next((c.unit for c in found if c is not None and c.unit), "")
        lines.append([row, *printed, unit])
    return [*_section(f"Recoveries {period}"), *table_of(lines)]


def _stocks(cells: Cells, heading: Heading) -> list[str]:
    table, period = "stocks", heading.period
    names = ("opening", "closing", "change", "fitted_closing", "fitted_difference")
    lines = [["", *(TABLE[table].column(n).title for n in names), "Method", "Time"]]
    for row in cells.rows(table, period):
        lines.append(
            [
                row.replace(f" {MASS}", " dry"),
                *(shown(cells.at(table, period, row, n)) for n in names),
                cells.text(table, period, row, "method"),
                cells.text(table, period, row, "time"),
            ]
        )
    if len(lines) == 1:
        return []
    return [*_section(f"Stocks {period} [t]"), *table_of(lines, words_last=True)]


def _streams(cells: Cells, heading: Heading) -> list[str]:
    table, period = "streams", heading.period
    metals = [
        name.removeprefix("measured_contained_")
        for name in cells.columns(table)
        if name.startswith("measured_contained_")
    ]
    if not metals:
        return []
    metal = metals[0]
    names = (
        "measured_wet",
        "measured_moisture",
        "measured_dry",
        f"measured_grade_{metal}",
        f"measured_contained_{metal}",
        "fitted_dry",
        f"fitted_grade_{metal}",
        f"fitted_contained_{metal}",
    )
    unit = "%"
    heads = ("wet t", "moist %", "dry t", f"{metal} {unit}", f"{metal} t")
    lines = [["", *(f"read {h}" for h in heads), *(f"fitted {h}" for h in heads[2:])]]
    for row in cells.rows(table, period):
        numbers = [shown(cells.at(table, period, row, n)) for n in names]
        if any(numbers):
            lines.append([row, *numbers])
    title = f"Streams {period}: as measured, and fitted ({metal}; all components in the workbook)"
    return [*_section(title), *table_of(lines)]


def _section(title: str) -> list[str]:
    return ["", title, "-" * len(title)]


def table_of(rows: Sequence[Sequence[str]], *, words_last: bool = False) -> list[str]:
    """Align columns: the first to the left, numbers to the right, trailing words to the left."""
    texts = {
        i
        for i in range(1, len(rows[0]))
        if words_last
        and any(
            row[i] and row[i] != NO_VALUE and not set(row[i]) <= set("-0123456789. ±%")
            for row in rows[1:]
        )
    }
    widths = [max(len(row[i]) for row in rows) for i in range(len(rows[0]))]
    lines = []
    for row in rows:
        cells = [
            text.ljust(w) if i == 0 or i in texts else text.rjust(w)
            for i, (text, w) in enumerate(zip(row, widths, strict=True))
        ]
        lines.append("  ".join(cells).rstrip())
    return lines
