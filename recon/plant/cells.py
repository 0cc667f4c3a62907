"""The cells of a CSV file or workbook, with their addresses; nothing in them is run.

A sheet comes from outside: its size is looked at before it is opened, a formula is refused rather
than believed, and every fault carries the address where a person finds it.
"""

from __future__ import annotations

import csv
import re
import zipfile
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from io import StringIO
from itertools import zip_longest
from pathlib import Path

from recon.errors import ContractError, UnreadableFileError

NUMERIC = {"value", "quality", "at", "true_from", "true_to", "known_at"}
"""Columns of a CSV file in which a number is meant as one."""

WHOLE = re.compile(r"[+-]?\d+")
DECIMAL = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")

MOST_BYTES = 20_000_000
MOST_UNPACKED = 200_000_000
MOST_ROWS = 200_000
MOST_COLUMNS = 200


@dataclass(frozen=True, kw_only=True)
class Table:
    """
    One table of a sheet: names in its first row, cells below.

    Attributes
    ----------
    path : str
        File, with the sheet's name for a workbook.
    columns : tuple of str
    rows : tuple of tuple
        As long as ``columns``; None where a cell is empty. Empty rows are left out.
    numbers : tuple of int
        Row number of each row, as the sheet counts, 1-based.
    """

    path: str
    columns: tuple[str, ...]
    rows: tuple[tuple[object, ...], ...]
    numbers: tuple[int, ...]

    def address(self, row: int, column: str) -> str:
        """Give the address of a cell, ``C7``; of the row where the column is not there."""
        if column not in self.columns:
            return f"row {self.numbers[row]}"
        return f"{letters(self.columns.index(column))}{self.numbers[row]}"


def read_table(path: Path, sheet: str) -> Table:
    """
    Read one table.

    Parameters
    ----------
    path : Path
        ``.csv``: UTF-8, commas or semicolons. ``.xlsx``: the sheet named, else the only one.
    sheet : str

    Raises
    ------
    UnreadableFileError
        It is missing, too large, or not what its name says.
    ContractError
        It holds formulas or a row longer than the names; all are listed.
    """
    try:
        size = path.stat().st_size
    except OSError as error:
        raise UnreadableFileError(str(path), f"cannot be read: {error.strerror}.") from error
    if size > MOST_BYTES:
        raise UnreadableFileError(
            str(path),
            f"is {size / 1e6:,.1f} MB; at most {MOST_BYTES / 1e6:g} MB are read. Split it.",
        )
    if path.suffix.lower() == ".csv":
        return _csv(path)
    if path.suffix.lower() == ".xlsx":
        return _workbook(path, sheet)
    raise UnreadableFileError(str(path), "is neither .csv nor .xlsx.")


def letters(index: int) -> str:
    """
    Name a column as spreadsheets do, 0 is A.

    Examples
    --------
    >>> letters(0), letters(25), letters(26), letters(701), letters(702)
    ('A', 'Z', 'AA', 'ZZ', 'AAA')
    """
    name = ""
    index += 1
    while index:
        index, rest = divmod(index - 1, 26)
        name = chr(ord("A") + rest) + name
    return name


def _csv(path: Path) -> Table:
    try:
        text = path.read_text(encoding="utf-8-sig")
    except OSError as error:
        raise UnreadableFileError(str(path), f"cannot be read: {error.strerror}.") from error
    except UnicodeDecodeError as error:
        raise UnreadableFileError(str(path), "is not UTF-8 text. Save it as CSV UTF-8.") from error
    head = text.partition("\n")[0]
    mark = ";" if head.count(";") > head.count(",") else ","
    reader = csv.reader(StringIO(text, newline=""), delimiter=mark, strict=True)
    try:
        lines = [(reader.line_num, row) for row in reader]
    except csv.Error as error:
        raise UnreadableFileError(
            str(path), f"is not CSV: {error}, line {reader.line_num}."
        ) from error
    names = next((row for _, row in lines if any(cell.strip() for cell in row)), [])
    columns = [name.strip() for name in names]
    rows = [
        (n, [_given(c, k) for c, k in zip_longest(row, columns, fillvalue="")]) for n, row in lines
    ]
    return _table(str(path), rows)


def _given(cell: str, column: str) -> object:
    """
    Give a number where a column holds numbers, None where a cell is empty, else its text.

    A sample number keeps its zeros: ``007`` is a name, not seven.
    """
    text = cell.strip()
    if not text:
        return None
    if column in NUMERIC and WHOLE.fullmatch(text):
        return int(text)
    if column == "value" and (DECIMAL.fullmatch(text) or text.lower() == "nan"):
        return float(text)
    return text


def _workbook(path: Path, sheet: str) -> Table:
    from openpyxl import load_workbook
    from openpyxl.utils.exceptions import InvalidFileException

    try:
        with zipfile.ZipFile(path) as packed:
            unpacked = sum(part.file_size for part in packed.infolist())
    except (OSError, zipfile.BadZipFile) as error:
        raise UnreadableFileError(
            str(path), "is not an .xlsx workbook, or it is protected by a password."
        ) from error
    if unpacked > MOST_UNPACKED:
        raise UnreadableFileError(
            str(path), f"unpacks to {unpacked / 1e6:,.0f} MB; at most {MOST_UNPACKED / 1e6:g} MB."
        )
    try:
        book = load_workbook(path, read_only=True, data_only=False, keep_links=False)
    except (InvalidFileException, KeyError, ValueError, SyntaxError) as error:
        raise UnreadableFileError(str(path), f"is not an .xlsx workbook: {error}.") from error
    try:
        names = book.sheetnames
        if sheet not in names and len(names) != 1:
            raise UnreadableFileError(
                str(path),
                f'holds the sheets {", ".join(names)}; one named "{sheet}" is expected.',
            )
        name = sheet if sheet in names else names[0]
        where = f"{path}, sheet {name}"
        rows: list[tuple[int, list[object]]] = []
        formulas: list[str] = []
        for number, row in enumerate(book[name].iter_rows(), start=1):
            if number > MOST_ROWS + 1:
                raise UnreadableFileError(where, f"holds more than {MOST_ROWS:,} rows. Split it.")
            if len(row) > MOST_COLUMNS:
                raise UnreadableFileError(where, f"has more than {MOST_COLUMNS} columns.")
            cells: list[object] = []
            for index, cell in enumerate(row):
                if cell.data_type == "f":
                    formulas.append(f"{letters(index)}{number}")
                elif cell.data_type == "e":
                    formulas.append(f"{letters(index)}{number} ({cell.value})")
                cells.append(cell.value)
            rows.append((number, cells))
    finally:
        book.close()
    if formulas:
        raise ContractError(
            where,
            [f"{cell}: a formula or an error; paste the value instead." for cell in formulas],
        )
    return _table(where, rows)


def _table(path: str, rows: Sequence[tuple[int, list[object]]]) -> Table:
    if len(rows) > MOST_ROWS + 1:
        raise UnreadableFileError(path, f"holds more than {MOST_ROWS:,} rows. Split it.")
    filled = [(n, row) for n, row in rows if any(cell not in (None, "") for cell in row)]
    if not filled:
        raise UnreadableFileError(path, "is empty; names of columns are expected in row 1.")
    names = tuple(_trimmed(filled[0][1]))
    columns = tuple("" if name is None else str(name).strip() for name in names)
    faults = [
        f"{letters(i)}{filled[0][0]}: a column has no name." for i, c in enumerate(columns) if not c
    ]
    faults += list(_too_long(filled[1:], len(columns)))
    if faults:
        raise ContractError(path, faults)
    width = len(columns)
    return Table(
        path=path,
        columns=columns,
        rows=tuple((*row[:width], *[None] * (width - len(row))) for _, row in filled[1:]),
        numbers=tuple(n for n, _ in filled[1:]),
    )


def _trimmed(row: list[object]) -> list[object]:
    last = max((i for i, cell in enumerate(row) if cell not in (None, "")), default=-1)
    return row[: last + 1]


def _too_long(rows: Sequence[tuple[int, list[object]]], width: int) -> Iterator[str]:
    for number, row in rows:
        for index, cell in enumerate(row[width:], start=width):
            if cell not in (None, ""):
                yield f"{letters(index)}{number}: a value beyond the last named column."
