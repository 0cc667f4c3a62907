"""CSV: what is written reads back, and no text is a formula."""

from __future__ import annotations

import csv
import io

from hypothesis import given, settings
from hypothesis import strategies as st

from recon.documents.csv_file import DANGEROUS, HEADER, cells_csv, safe_text
from recon.tabulate.cells import Cell
from tests.tabulate.test_tables import mill_month


def read(content: bytes) -> list[list[str]]:
    return list(csv.reader(io.StringIO(content.decode(), newline="")))


def test_every_cell_reads_back_with_its_number_in_full() -> None:
    cells = mill_month().tables().cells
    rows = read(cells_csv(cells))
    assert tuple(rows[0]) == HEADER
    assert len(rows) == len(cells) + 1
    for row, cell in zip(rows[1:], cells, strict=True):
        assert row[:4] == [cell.table, cell.period, cell.row, cell.column]
        assert (float(row[4]) if row[4] else None) == cell.value
        assert (float(row[6]) if row[6] else None) == cell.u


@settings(max_examples=60, deadline=None)
@given(st.text(max_size=40), st.floats(allow_nan=False, allow_infinity=False))
def test_text_is_never_a_formula_and_numbers_are_never_touched(text: str, number: float) -> None:
    cell = Cell(table="streams", period="2026-01", row=text, column="from", value=number, text=text)
    row = read(cells_csv([cell]))[1]
    for field in (row[2], row[5]):
        assert not field.startswith(DANGEROUS)
        assert field.lstrip("'") == text.replace("\x00", "").lstrip("'")
    assert float(row[4]) == number


def test_a_negative_number_stays_a_number_and_a_negative_word_does_not() -> None:
    cell = Cell(table="streams", period="2026-01", row="-2", column="from", value=-2.0)
    assert read(cells_csv([cell]))[1][2:5] == ["'-2", "from", "-2.0"]


def test_lines_end_as_the_standard_says() -> None:
    """RFC 4180, 2.1: records are delimited by CRLF."""
    content = cells_csv([Cell(table="streams", period="2026", row='a "b", c', column="from")])
    assert content.endswith(b"\r\n")
    assert b'"a ""b"", c"' in content  # RFC 4180, 2.6 and 2.7
    assert safe_text("＝1") == "'＝1"
