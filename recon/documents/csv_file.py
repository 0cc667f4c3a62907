"""Cells as CSV (RFC 4180): every number in full, no text that a spreadsheet would run."""

from __future__ import annotations

import csv
import io
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterable

    from recon.tabulate.cells import Cell

HEADER = (
    "table", "period", "row", "column", "value", "text", "u", "unit", "basis", "reason"
)  # fmt: skip
NOTE = (
    "Text that a spreadsheet would take for a formula has a leading apostrophe; numbers are "
    "never changed. Numbers have a decimal point; fields are separated by commas, lines end in "
    "CR LF, the encoding is UTF-8."
)
DANGEROUS = ("=", "+", "-", "@", "|", "%", "\t", "\r", "\n", "＝", "＋", "－", "＠")


def cells_csv(cells: Iterable[Cell]) -> bytes:
    """
    Write cells one a line under ``HEADER``.

    Parameters
    ----------
    cells : iterable of Cell

    Returns
    -------
    bytes
        UTF-8; doubles as their shortest decimal, so that they read back unchanged.
    """
    out = io.StringIO(newline="")
    writer = csv.writer(out, lineterminator="\r\n", quoting=csv.QUOTE_MINIMAL)
    writer.writerow(HEADER)
    for c in cells:
        writer.writerow(
            (
                *(safe_text(t) for t in (c.table, c.period, c.row, c.column)),
                _number(c.value),
                safe_text(c.text or ""),
                _number(c.u),
                _unit(c.unit),
                safe_text(c.basis),
                safe_text(c.reason),
            )
        )
    return out.getvalue().encode()


def safe_text(text: str) -> str:
    """
    Put an apostrophe before text that a spreadsheet would run; drop what no file should hold.

    Examples
    --------
    >>> safe_text("=cmd|' /c calc'!A0"), safe_text("FEED"), safe_text("-2 is text here")
    ("'=cmd|' /c calc'!A0", 'FEED', "'-2 is text here")
    """
    plain = text.replace("\x00", "")
    return (
        f"'{plain}"
        if plain.lstrip(" \u00a0\ufeff").startswith(DANGEROUS) or plain.startswith(DANGEROUS)
        else plain
    )


def _unit(unit: str) -> str:
    """Units are ours, from a closed table; ``%`` and ``-`` stay as they are read elsewhere."""
    return unit if unit in ("%", "-") else safe_text(unit)


def _number(value: float | None) -> str:
    return "" if value is None else repr(float(value))
