"""Look cells up by table, period, row and column, and print their numbers."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

from recon.flowsheet.network import MASS
from recon.tabulate.columns import TABLE, decimals_of

if TYPE_CHECKING:
    from collections.abc import Iterable

    from recon.tabulate.cells import Cell

NO_VALUE = "no value"
BRIDGE = "unaccounted-bridge"


class Cells:
    """
    The cells of one run, indexed.

    Parameters
    ----------
    cells : iterable of Cell
        Their order is the order of rows and columns in documents.
    """

    def __init__(self, cells: Iterable[Cell]) -> None:
        self.all = tuple(cells)
        self._at = {(c.table, c.period, c.row, c.column): c for c in self.all}

    def at(self, table: str, period: str, row: str, column: str) -> Cell | None:
        """Give one cell, or None."""
        return self._at.get((table, period, row, column))

    def value(self, table: str, period: str, row: str, column: str) -> float | None:
        """Give a number, or None."""
        found = self.at(table, period, row, column)
        return None if found is None else found.value

    def text(self, table: str, period: str, row: str, column: str) -> str:
        """Give the words of a cell, or nothing."""
        found = self.at(table, period, row, column)
        return "" if found is None or found.text is None else found.text

    def rows(self, table: str, period: str) -> tuple[str, ...]:
        """Rows of a table in a period, in order."""
        return tuple(
            dict.fromkeys(c.row for c in self.all if (c.table, c.period) == (table, period))
        )

    def columns(self, table: str) -> tuple[str, ...]:
        """Columns of a table that occur, in the dictionary's order, components as they come."""
        order = {c.name: i for i, c in enumerate(TABLE[table].columns)}
        found = dict.fromkeys(c.column for c in self.all if c.table == table)
        return tuple(sorted(found, key=lambda name: order[TABLE[table].column(name).name]))

    def periods(self, table: str) -> tuple[str, ...]:
        """Periods of a table in rising order: year, month, days."""
        return tuple(sorted({c.period for c in self.all if c.table == table}))


def quantity_of(cell: Cell) -> str:
    """Give the quantity that a cell is of, which its row or column ends with."""
    if cell.table == "streams":
        column = TABLE[cell.table].column(cell.column)
        stem = column.name.removesuffix("{q}")
        return cell.column.removeprefix(stem) if stem != column.name else MASS
    row = re.split(r" \d{3} ", cell.row, maxsplit=1)[0] if cell.table == BRIDGE else cell.row
    return row.rsplit(" ", 1)[-1]


def digits(cell: Cell) -> int:
    """Decimals to print of a cell."""
    column = TABLE[cell.table].column(cell.column)
    return decimals_of(column, quantity=quantity_of(cell), unit=cell.unit)


def shown(cell: Cell | None, *, u: bool = False) -> str:
    """
    Print a cell's number, or its standard uncertainty, with spaces between thousands.

    Returns
    -------
    str
        ``no value`` where there is none; blank where there is no cell, or no uncertainty.
    """
    if cell is None:
        return ""
    if cell.text is not None:
        return cell.text
    number = cell.u if u else cell.value
    if number is None:
        return "" if u else NO_VALUE
    return grouped(number, digits(cell))


def grouped(number: float, decimals: int) -> str:
    """
    Print a number with spaces between thousands; never minus zero.

    Examples
    --------
    >>> grouped(-1234567.891, 1), grouped(-0.0001, 2)
    ('-1 234 567.9', '0.00')
    """
    text = f"{number:,.{decimals}f}".replace(",", " ")
    return text.lstrip("-") if set(text) <= set("-0. ") else text
