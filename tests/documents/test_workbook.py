"""The workbook recomputes, comes out the same, and runs nothing that stands in the data."""

from __future__ import annotations

import io
import zipfile
from dataclasses import replace
from datetime import date

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from openpyxl import load_workbook

from recon.documents.workbook import workbook
from recon.findings import Finding
from recon.tabulate.cells import Cell
from recon.tabulate.columns import TABLES
from recon.tabulate.tables import Tables
from tests.documents.evaluate import Recalculated
from tests.documents.months import HEADING
from tests.tabulate.cells import value
from tests.tabulate.paper import mill_site, shed_site, simple_month
from tests.tabulate.test_tables import mill_month


@pytest.fixture(scope="module")
def tables() -> Tables:
    return mill_month().tables()


@pytest.fixture(scope="module")
def content(tables: Tables) -> bytes:
    return workbook(HEADING, mill_site(), tables.cells, tables.findings)


def test_every_formula_recalculates_to_the_figure_stated(content: bytes) -> None:
    book = Recalculated(content)
    formulas = book.formulas()
    assert len(formulas) > 150
    for sheet, address, text in formulas:
        cached = book.cached[sheet][address].value
        assert book.value(sheet, address) == pytest.approx(cached, rel=1e-9, abs=1e-9), (
            f"{sheet} {address} {text}"
        )


def test_totals_balances_and_recoveries_are_live_from_the_leaves(
    content: bytes, tables: Tables
) -> None:
    """A tonne of copper more in one leaf goes through total, balance and recovery."""
    book = Recalculated(content)
    leaves = book.book["leaves"]
    heads = [cell.value for cell in leaves[1]]
    at = heads.index("Contained, measured Cu [t]") + 1
    line = next(i for i in range(2, leaves.max_row + 1) if leaves.cell(i, 1).value == "CONC")
    leaves.cell(line, at).value += 1.0

    def recalculated(sheet: str, row: str, head: str) -> float:
        page = book.book[sheet]
        column = next(c for c in page[1] if c.value == head).column_letter
        place = next(r[0].row for r in page.iter_rows(min_row=2) if r[0].value == row)
        return book.value(sheet, f"{column}{place}")

    before = value(tables, "site-balance", "Cu", "unaccounted")
    assert recalculated("streams", "CONC", "Contained, measured Cu [t]") == pytest.approx(21.25)
    assert recalculated("site-balance", "Cu", "Unaccounted [t]") == pytest.approx(before - 1)
    recovery = recalculated("recoveries", "Cu recovery", "Measured head")
    assert recovery == pytest.approx(100 * 21.25 / 22.02)


def test_what_must_be_live_is_a_formula(content: bytes) -> None:
    book = Recalculated(content)
    live = {(sheet, address) for sheet, address, _ in book.formulas()}
    for sheet, heads in {
        "site-balance": (
            "In [t]",
            "Opening stock [t]",
            "Closing stock [t]",
            "Unaccounted [t]",
            "z",
        ),
        "section-balance": ("In [t]", "Unaccounted [t]"),
        "streams": ("Dry, measured [t]", "Grade, measured Cu [%]", "Contained, fitted Cu [t]"),
        "recoveries": ("Measured head", "Fitted"),
        "node-closure": ("Raw imbalance [t]",),
        "stocks": ("Change [t]",),
    }.items():
        page = book.book[sheet]
        for head in heads:
            column = next(c for c in page[1] if c.value == head).column_letter
            rows = [r[0].row for r in page.iter_rows(min_row=2)]
            numbers = [
                row
                for row in rows
                if isinstance(book.cached[sheet][f"{column}{row}"].value, float | int)
            ]
            assert numbers, (sheet, head)
            assert all((sheet, f"{column}{row}") in live for row in numbers), (sheet, head)


def test_the_same_month_is_the_same_file_byte_for_byte(content: bytes, tables: Tables) -> None:
    assert workbook(HEADING, mill_site(), tables.cells, tables.findings) == content


def test_sheets_and_heads_keep_their_names_and_order(content: bytes) -> None:
    names = load_workbook(io.BytesIO(content)).sheetnames
    assert names == [
        "read-me",
        "site-balance",
        "section-balance",
        "unaccounted-bridge",
        "streams",
        "stocks",
        "recoveries",
        "node-closure",
        "measured-reconciled",
        "leaves",
        "year-to-date",
        "days",
        "findings",
        "columns",
        "reasons",
    ]
    other = simple_month().tables()
    again = load_workbook(io.BytesIO(workbook(HEADING, shed_site(), other.cells))).sheetnames
    assert [n for n in names if n in again] == again


def test_heads_are_frozen_filtered_and_repeated_and_days_are_dates(content: bytes) -> None:
    book = load_workbook(io.BytesIO(content))
    leaves = book["leaves"]
    assert leaves.freeze_panes == "C2"
    assert leaves.auto_filter.ref
    assert leaves.print_title_rows == "$1:$1"
    assert leaves["B2"].value.date() == date(2026, 1, 1)
    assert not leaves.merged_cells.ranges


def test_named_cells_point_at_the_site_balance(content: bytes, tables: Tables) -> None:
    book = load_workbook(io.BytesIO(content), data_only=True)
    sheet, address = book.defined_names["unaccounted_Cu"].attr_text.rsplit("!", 1)
    found = book[sheet.strip("'")][address.replace("$", "")].value
    assert found == value(tables, "site-balance", "Cu", "unaccounted")


def test_a_missing_figure_says_no_value_and_its_reason_stands_on_a_sheet() -> None:
    paper = simple_month()
    paper.measured = [m for m in paper.measured if m.tag != "OUT Cu"]
    tables = paper.tables()
    book = load_workbook(io.BytesIO(workbook(HEADING, shed_site(), tables.cells)))
    page = book["site-balance"]
    column = next(c for c in page[1] if c.value == "Unaccounted [t]").column_letter
    row = next(r[0].row for r in page.iter_rows(min_row=2) if r[0].value == "Cu")
    assert page[f"{column}{row}"].value == "no value"
    reasons = [[c.value for c in r] for r in book["reasons"].iter_rows(min_row=2)]
    assert any(r[:4] == ["site-balance", "2026-01", "Cu", "unaccounted"] for r in reasons)


def test_a_stream_that_changed_its_ends_is_stated_as_a_number_and_not_as_a_wrong_formula(
    tables: Tables,
) -> None:
    site = mill_site()
    changed = replace(
        site,
        streams=tuple(replace(s, target=None) if s.name == "FEED" else s for s in site.streams),
    )
    book = Recalculated(workbook(HEADING, changed, tables.cells))
    for sheet, address, _ in book.formulas():
        cached = book.cached[sheet][address].value
        assert book.value(sheet, address) == pytest.approx(cached, rel=1e-9, abs=1e-9)


HOSTILE = st.one_of(
    st.sampled_from(
        ["=1+1", "+1", "-1", "@SUM(A1)", "=cmd|' /c calc'!A0", "http://x.invalid", "\t=1"]
    ),
    st.text(st.characters(exclude_categories=["Cs", "Cc"]), min_size=1, max_size=30),
)


@settings(max_examples=20, deadline=None)
@given(HOSTILE, HOSTILE)
def test_no_text_from_the_data_becomes_a_formula_or_a_link(name: str, words: str) -> None:
    cells = [
        Cell(table="streams", period="2026-01", row=name, column="from", text=words),
        Cell(table="streams", period="2026-01", row=name, column="measured_dry", reason=words),
        Cell(table="streams", period="2026-01-01", row=name, column="measured_dry", value=1.0),
    ]
    findings = [Finding(code="x", subject=name, text=words)]
    content = workbook(replace(HEADING, site=name, title=words), mill_site(), cells, findings)
    for sheet in load_workbook(io.BytesIO(content)).worksheets:
        for row in sheet.iter_rows():
            for cell in row:
                assert cell.hyperlink is None
                assert cell.data_type != "f" or not str(cell.value).startswith(("=cmd", f"={name}"))
                if cell.data_type == "f":
                    assert sheet.title in ("streams", "days", "year-to-date")
    with zipfile.ZipFile(io.BytesIO(content)) as packed:
        assert not any("externalLink" in n or "vba" in n for n in packed.namelist())


def test_the_dictionary_of_columns_is_in_the_file(content: bytes) -> None:
    book = load_workbook(io.BytesIO(content))
    listed = {(r[0].value, r[1].value) for r in book["columns"].iter_rows(min_row=2)}
    assert listed == {(t.name, c.name) for t in TABLES for c in t.columns}


def test_what_changed_since_an_earlier_revision_stands_on_a_sheet(tables: Tables) -> None:
    paper = mill_month()
    last = paper.measured[-1]
    paper.measured[-1] = replace(last, measurement=replace(last.measurement, value=0.0010))
    now = paper.tables()
    content = workbook(HEADING, mill_site(), now.cells, before=tables.cells)
    book = Recalculated(content)
    rows = [[c.value for c in r] for r in book.cached["changes"].iter_rows(min_row=2)]
    (line,) = [r for r in rows if r[:4] == ["streams", "2026-01", "TAIL", "measured_contained_Cu"]]
    assert line[4:6] == [1.694, 2.118]
    assert line[6] == pytest.approx(0.424)
    assert not [r for r in rows if r[2] == "ORE" and r[3].startswith("measured")]
    for sheet, address, _ in book.formulas():
        cached = book.cached[sheet][address].value
        assert book.value(sheet, address) == pytest.approx(cached, rel=1e-9, abs=1e-9)


def test_figures_without_a_unit_in_their_head_have_it_in_their_line(content: bytes) -> None:
    page = load_workbook(io.BytesIO(content))["measured-reconciled"]
    unit = page[1][-1].column_letter
    by_row = {r[0].value: page[f"{unit}{r[0].row}"].value for r in page.iter_rows(min_row=2)}
    assert (by_row["CONC mass"], by_row["CONC Cu"]) == ("t", "%")
