"""A workbook as a balance file: one sheet a table, one row an entry, the first row its keys.

A sheet ``balance`` holds the head as pairs of key and value. A cell of a list or table key holds
the value as a TOML file would write it, or names separated by commas.
"""

from __future__ import annotations

import tomllib
from typing import TYPE_CHECKING, Any

from recon.errors import FaultyFileError, UnreadableFileError

if TYPE_CHECKING:
    from pathlib import Path

HEAD = "balance"
NAME_LISTS = {"quantities", "conserves", "carries", "shared"}
MOST_BYTES = 20_000_000
MOST_ROWS = 200_000


def read_sheets(path: Path) -> dict[str, Any]:
    """
    Read a workbook into the tables a TOML balance file would hold.

    Parameters
    ----------
    path : Path

    Raises
    ------
    UnreadableFileError
        The file is missing, too large, or no workbook.
    FaultyFileError
        A cell cannot be read; every one is listed by its address.
    """
    import zipfile

    from openpyxl import load_workbook

    try:
        with zipfile.ZipFile(path) as packed:
            size = sum(member.file_size for member in packed.infolist())
        if size > MOST_BYTES:
            raise UnreadableFileError(
                str(path), f"unpacks to {size} bytes; at most {MOST_BYTES} are read."
            )
        book = load_workbook(path, read_only=True, data_only=False, keep_links=False)
    except (OSError, zipfile.BadZipFile, KeyError, ValueError) as error:
        raise UnreadableFileError(str(path), f"is not a readable workbook: {error}") from error
    tables: dict[str, Any] = {}
    faults: list[str] = []
    for sheet in book.worksheets:
        rows = [list(row) for row in sheet.iter_rows(max_row=MOST_ROWS)]
        if sheet.title == HEAD:
            for row in rows:
                if row and row[0].value is not None:
                    key = str(row[0].value)
                    cell = row[1] if len(row) > 1 else None
                    tables[key] = _value(key, cell, sheet.title, faults)
        elif rows:
            tables[sheet.title] = _entries(rows, sheet.title, faults)
    book.close()
    if faults:
        raise FaultyFileError(str(path), faults)
    return tables


def _entries(rows: list[list[Any]], sheet: str, faults: list[str]) -> list[dict[str, Any]]:
    keys = [None if cell.value is None else str(cell.value).strip() for cell in rows[0]]
    entries = []
    for row in rows[1:]:
        entry = {
            key: _value(key, cell, sheet, faults)
            for key, cell in zip(keys, row, strict=False)
            if key and cell.value is not None
        }
        if entry:
            entries.append(entry)
    return entries


def _value(key: str, cell: Any, sheet: str, faults: list[str]) -> Any:
    value = None if cell is None else cell.value
    if isinstance(value, str):
        text = value.strip()
        if text.startswith("="):
            faults.append(f"{sheet}!{cell.coordinate}: a formula; write the value itself.")
            return text
        if text.startswith(("[", "{")):
            try:
                return tomllib.loads(f"value = {text}")["value"]
            except tomllib.TOMLDecodeError as error:
                faults.append(f"{sheet}!{cell.coordinate}: not a TOML value ({error}).")
                return text
        if key in NAME_LISTS:
            return [part.strip() for part in text.split(",") if part.strip()]
        return text
    if isinstance(value, float) and value.is_integer() and key in ("period", "periods"):
        return int(value)
    return value
