"""A sheet is taken whole or refused by cell."""

from __future__ import annotations

import zipfile
from collections.abc import Sequence
from datetime import UTC, datetime
from pathlib import Path

import pytest
from openpyxl import Workbook

from recon.errors import ContractError, ReconError, UnreadableFileError
from recon.ingest.rows import Record, RowKind
from recon.plant import cells
from recon.plant.sheets import SheetPlant
from tests.plant.tables import NOW, at

HEAD = "document,subject,item,true_from,true_to,known_at,value,unit,stage,lot,method"
ROW = "S1,FEED,Cu,2026-01-02T00:00Z,2026-01-02T08:00Z,2026-01-03T00:00Z,0.84,%,final,,XRF"
CUTOFF = """document;subject;item;true_from_local;true_to_local;known_at_local;value;unit;counted by
CUT-01;TRUCKS;mass;2026-01-31 06:00;2026-01-31 06:00;2026-01-31 09:00;74.2;t;J
CUT-01;LADLES;pieces;2026-01-31 06:00;2026-01-31 06:00;2026-01-31 09:00;3;pieces;J
CUT-01;CELLS;pieces;2026-01-31 06:00;2026-01-31 06:00;2026-01-31 09:00;412;pieces;J
"""


def sheet(path: Path, kind: RowKind = RowKind.ASSAY, zone: str = "America/Santiago") -> SheetPlant:
    return SheetPlant(kind, path, zone=zone, now=lambda: NOW)


def written(path: Path, *rows: str, head: str = HEAD) -> Path:
    path.write_text("\n".join((head, *rows)) + "\n", encoding="utf-8")
    return path


def workbook(path: Path, *rows: Sequence[object], name: str = "assays") -> Path:
    book = Workbook()
    assert book.active is not None
    book.active.title = name
    for row in (HEAD.split(","), *rows):
        book.active.append(list(row))
    book.save(path)
    book.close()
    return path


def read(source: SheetPlant, kind: RowKind = RowKind.ASSAY) -> list[Record]:
    return list(source.records(kind, at(1), NOW))


def refused(path: Path, kind: RowKind = RowKind.ASSAY, zone: str = "America/Santiago") -> str:
    with pytest.raises(ReconError) as caught:
        read(sheet(path, kind, zone), kind)
    return str(caught.value)


XLSX_ROW = (
    *("S1", "FEED", "Cu", "2026-01-02T00:00Z", "2026-01-02T08:00Z", "2026-01-03T00:00Z"),
    *(0.84, "%", "final", None, "XRF"),
)


def test_csv_and_workbook_give_the_same_record(tmp_path: Path) -> None:
    from_csv = read(sheet(written(tmp_path / "a.csv", ROW)))
    from_book = read(sheet(workbook(tmp_path / "a.xlsx", XLSX_ROW)))
    assert from_csv == from_book
    (record,) = from_csv
    assert (record.value, record.unit, record.stage) == (0.84, "%", "final")
    assert record.extra == (("method", "XRF"),)
    assert record.true_to == at(2, 8)


def test_a_sample_number_keeps_its_zeros(tmp_path: Path) -> None:
    (record,) = read(sheet(written(tmp_path / "a.csv", ROW.replace("S1", "007"))))
    assert record.document == "007"


@pytest.mark.parametrize("cell", ["1_000", "inf", "1.2.3", '"1,234.5"', "12 %", "0x10"])
def test_what_only_resembles_a_number_is_text(tmp_path: Path, cell: str) -> None:
    said = refused(written(tmp_path / "a.csv", ROW.replace("0.84", cell)))
    assert "value: text where a number is due" in said


@pytest.mark.parametrize(("cell", "value"), [("84e-2", 0.84), (".84", 0.84), ("-1", -1), ("1.", 1)])
def test_a_number_of_a_csv_file_is_read_as_written(tmp_path: Path, cell: str, value: float) -> None:
    (record,) = read(sheet(written(tmp_path / "a.csv", ROW.replace("0.84", cell))))
    assert record.value == value


def test_a_cut_off_sheet_of_trucks_ladles_and_cells_speaks_plant_time(tmp_path: Path) -> None:
    path = tmp_path / "cutoff.csv"
    path.write_text(CUTOFF, encoding="utf-8")
    found = read(sheet(path, RowKind.SURVEY), RowKind.SURVEY)
    assert [(r.subject, r.item, r.value) for r in found] == [
        ("CELLS", "pieces", 412),
        ("LADLES", "pieces", 3),
        ("TRUCKS", "mass", 74.2),
    ]
    assert found[0].true_from == datetime(2026, 1, 31, 9, tzinfo=UTC)
    assert found[0].extra == (("counted by", "J"),)


def test_dates_of_a_workbook_need_the_column_of_plant_time(tmp_path: Path) -> None:
    row = (*XLSX_ROW[:5], datetime(2026, 1, 3), *XLSX_ROW[6:])  # noqa: DTZ001
    path = workbook(tmp_path / "a.xlsx", row)
    assert "known_at: a time without zone or offset, 2026-01-03T00:00:00 (F2)" in refused(path)


@pytest.mark.parametrize(
    ("time", "word"), [("2026-03-29 02:30", "skips"), ("2026-10-25 02:30", "repeats")]
)
def test_an_hour_that_the_clock_skips_or_repeats_is_refused(
    tmp_path: Path, time: str, word: str
) -> None:
    head = HEAD.replace("true_from", "true_from_local")
    path = written(tmp_path / "a.csv", ROW.replace("2026-01-02T00:00Z", time), head=head)
    said = refused(path, zone="Europe/Berlin")
    assert f"true_from_local: a time that the clock of Europe/Berlin {word}" in said
    assert "(D2)" in said


def test_all_faults_are_listed_by_cell(tmp_path: Path) -> None:
    path = written(
        tmp_path / "a.csv",
        ROW,
        ROW.replace("S1", "S2").replace("0.84", '"0,84"'),
        ROW.replace("S1", ""),
        ROW.replace("S1", "S4").replace("2026-01-03T00:00Z", "3 Jan"),
    )
    said = refused(path)
    assert "3 faults, nothing of it is used." in said
    assert 'value: text where a number is due, "0,84" (G3).' in said
    assert "document: is empty (A4)." in said
    assert 'known_at: text that is not ISO 8601, "3 Jan" (F5).' in said


def test_one_faulty_file_of_a_folder_keeps_all_out(tmp_path: Path) -> None:
    written(tmp_path / "a.csv", ROW)
    written(tmp_path / "b.csv", ROW.replace("S1", "S2").replace("0.84", "high"))
    workbook(tmp_path / "c.xlsx", (*XLSX_ROW[:6], "=1+1", *XLSX_ROW[7:]))
    (tmp_path / "~$c.xlsx").write_bytes(b"lock")
    assert "c.xlsx, sheet assays: G2: a formula" in refused(tmp_path)
    (tmp_path / "c.xlsx").unlink()
    assert f'{tmp_path / "b.csv"}: value: text where a number is due, "high" (G2).' in refused(
        tmp_path
    )
    written(tmp_path / "b.csv", ROW.replace("S1", "S2"))
    assert [r.document for r in read(sheet(tmp_path))] == ["S1", "S2"]


def test_a_result_that_stands_in_two_files_is_refused(tmp_path: Path) -> None:
    written(tmp_path / "a.csv", ROW)
    written(tmp_path / "b.csv", ROW)
    said = refused(tmp_path)
    assert "b.csv: S1|FEED|Cu|final, known at 2026-01-03 00:00:00+00:00, stands in" in said


def test_formulas_and_errors_of_a_workbook_are_refused_by_cell(tmp_path: Path) -> None:
    row = (*XLSX_ROW[:6], "=SUM(A1:A2)", "%", "#N/A", None, None)
    said = refused(workbook(tmp_path / "a.xlsx", row))
    assert "G2: a formula or an error; paste the value instead." in said
    assert "I2 (#N/A): a formula or an error" in said


def test_text_that_looks_like_a_formula_in_a_csv_is_only_text(tmp_path: Path) -> None:
    (record,) = read(sheet(written(tmp_path / "a.csv", ROW.replace("XRF", "=1+1"))))
    assert record.extra == (("method", "=1+1"),)


def test_the_sheet_named_after_the_kind_is_read(tmp_path: Path) -> None:
    book = Workbook()
    assert book.active is not None
    book.active.title = "notes"
    for row in (HEAD.split(","), XLSX_ROW):
        book.create_sheet("assays") if "assays" not in book.sheetnames else None
        book["assays"].append(list(row))
    book.save(tmp_path / "a.xlsx")
    assert len(read(sheet(tmp_path / "a.xlsx"))) == 1
    said = refused(tmp_path / "a.xlsx", RowKind.SURVEY)
    assert 'holds the sheets notes, assays; one named "surveys" is expected' in said


@pytest.mark.parametrize(
    ("content", "expected"),
    [
        (b"", "is empty; names of columns are expected in row 1"),
        (b"\xff\xfe\x00", "is not UTF-8 text. Save it as CSV UTF-8"),
        (b'a,b\n"x', "is not CSV"),
        (b"document,,item\n", "B1: a column has no name"),
        (b"document,item\nS1,Cu,0.8\n", "C2: a value beyond the last named column"),
        (b"document,item\nS1,Cu\n", "subject: this column is missing; found document, item"),
    ],
)
def test_a_file_that_is_no_table_is_refused(tmp_path: Path, content: bytes, expected: str) -> None:
    (tmp_path / "a.csv").write_bytes(content)
    assert expected in refused(tmp_path / "a.csv")


def test_sizes_are_looked_at_before_anything_is_opened(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(cells, "MOST_BYTES", 100)
    written(tmp_path / "a.csv", ROW)
    assert "at most 0.0001 MB are read" in refused(tmp_path / "a.csv")


def test_a_workbook_that_unpacks_to_too_much_is_refused(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(cells, "MOST_UNPACKED", 2_000_000)
    with zipfile.ZipFile(tmp_path / "a.xlsx", "w", zipfile.ZIP_DEFLATED) as packed:
        packed.writestr("xl/worksheets/sheet1.xml", b"\0" * (cells.MOST_UNPACKED + 1))
    assert (tmp_path / "a.xlsx").stat().st_size < 10_000
    assert "unpacks to 2 MB; at most 2 MB" in refused(tmp_path / "a.xlsx")


def test_too_many_rows_are_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(cells, "MOST_ROWS", 1)
    written(tmp_path / "a.csv", ROW, ROW.replace("S1", "S2"))
    assert "holds more than 1 rows" in refused(tmp_path / "a.csv")
    workbook(tmp_path / "a.xlsx", XLSX_ROW, ("S2", *XLSX_ROW[1:]))
    assert "holds more than 1 rows" in refused(tmp_path / "a.xlsx")


@pytest.mark.parametrize("name", ["a.xls", "a.xlsx", "absent.csv"])
def test_a_file_that_is_not_what_its_name_says_is_refused(tmp_path: Path, name: str) -> None:
    if name != "absent.csv":
        (tmp_path / name).write_text("no workbook")
    with pytest.raises(ReconError, match=r"neither|not an \.xlsx workbook|cannot be read"):
        read(sheet(tmp_path / name))


def test_an_empty_folder_is_said_so(tmp_path: Path) -> None:
    with pytest.raises(UnreadableFileError, match=r"holds no \.csv or \.xlsx file"):
        read(sheet(tmp_path))


READINGS = """tag,at,value,quality,known_at
A,2026-01-01T20:00Z,1.5,good,2026-01-01T20:00Z
B,2026-01-02T01:00Z,7,0,2026-01-02T01:00Z
A,2026-01-02T02:00Z,nan,uncertain,2026-01-02T02:00Z
A,2026-01-03T00:00Z,3,0,2026-01-03T00:00Z
"""


def test_readings_of_a_sheet_come_by_tag_with_the_one_in_force(tmp_path: Path) -> None:
    (tmp_path / "a.csv").write_text(READINGS, encoding="utf-8")
    source = sheet(tmp_path / "a.csv", RowKind.READING)
    first, second, third = source.readings(["A", "B", "C"], at(2), at(3))
    assert first.value.tolist()[0] == 1.5
    assert first.quality.tolist() == [0, 1]
    assert second.value.tolist() == [7.0]
    assert len(third.at) == 0
    (finding,) = source.noted()
    assert finding.subject == "A"


def test_faults_of_readings_carry_the_cells_of_the_sheet(tmp_path: Path) -> None:
    text = READINGS.replace("7,0", "x,9").replace(",3,0,", ",3,0,soon")
    (tmp_path / "a.csv").write_text(text, encoding="utf-8")
    with pytest.raises(ContractError) as caught:
        list(sheet(tmp_path / "a.csv", RowKind.READING).readings(["A"], at(2), at(3)))
    assert 'value: text where a number is due, "x" (C3).' in str(caught.value)
    assert "quality: 0 good, 1 uncertain or 2 bad is due, 9 (D3)." in str(caught.value)
    assert "(E5)" in str(caught.value)


def test_what_is_asked_of_a_sheet_is_its_name_and_digest(tmp_path: Path) -> None:
    path = written(tmp_path / "a.csv", ROW)
    before = sheet(path).query(RowKind.ASSAY)
    assert before.startswith("a.csv ")
    written(path, ROW, ROW.replace("S1", "S2"))
    assert sheet(path).query(RowKind.ASSAY) != before
