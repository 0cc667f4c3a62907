"""Where each cell stands in the workbook: sheets as grids of rows and columns, before writing."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from recon.tabulate.columns import TABLE

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from recon.documents.find import Cells
    from recon.tabulate.cells import Cell


@dataclass(frozen=True, kw_only=True)
class Grid:
    """
    One sheet of a table.

    Attributes
    ----------
    sheet, table : str
    keys : tuple of (str, str)
        Period and row of each line.
    columns : tuple of str
        Columns of the table, in order.
    with_u : frozenset of str
        Columns followed by a column of standard uncertainties.
    dated : bool
        Lines are of days: the second key column is the day.
    own_unit : bool
        Some columns have no unit in their head: the last sheet column names each line's.
    """

    sheet: str
    table: str
    keys: tuple[tuple[str, str], ...]
    columns: tuple[str, ...]
    with_u: frozenset[str]
    dated: bool = False
    own_unit: bool = False

    @property
    def heads(self) -> int:
        """How many columns name the line."""
        return 2 if self.dated else 1

    def place(self, column: str) -> int:
        """Give the sheet column of a table column, 0-based."""
        before = self.columns[: self.columns.index(column)]
        return self.heads + len(before) + sum(1 for name in before if name in self.with_u)

    @property
    def width(self) -> int:
        """Number of sheet columns."""
        return self.heads + len(self.columns) + len(self.with_u) + self.own_unit


@dataclass
class Places:
    """
    Addresses of all cells of a workbook.

    Attributes
    ----------
    grids : list of Grid
    """

    grids: list[Grid] = field(default_factory=list)
    _line: dict[tuple[str, str, str], tuple[Grid, int]] = field(default_factory=dict)

    def add(self, grid: Grid) -> None:
        """Lay a grid out."""
        self.grids.append(grid)
        for i, (period, row) in enumerate(grid.keys, start=1):
            self._line[grid.table, period, row] = (grid, i)

    def address(
        self, table: str, period: str, row: str, column: str, *, here: str = "", u: bool = False
    ) -> str | None:
        """Give the address of a cell, with its sheet unless that is ``here``, if it has one."""
        found = self._line.get((table, period, row))
        if found is None or column not in found[0].columns:
            return None
        grid, line = found
        name = a1(line, grid.place(column) + (1 if u else 0))
        return name if grid.sheet == here else f"'{grid.sheet}'!{name}"


def a1(row: int, column: int) -> str:
    """
    Name a cell, both 0-based.

    Examples
    --------
    >>> a1(0, 0), a1(9, 27)
    ('A1', 'AB10')
    """
    letters = ""
    column += 1
    while column:
        column, rest = divmod(column - 1, 26)
        letters = chr(65 + rest) + letters
    return f"{letters}{row + 1}"


def grid_of(
    cells: Cells,
    *,
    sheet: str,
    table: str,
    periods: Sequence[str],
    leave_out: Iterable[str] = (),
    by_row: bool = False,
) -> Grid:
    """Lay out the lines of a table for some periods; those of one row together if ``by_row``."""
    out = set(leave_out)
    keys = [(p, row) for p in periods for row in cells.rows(table, p)]
    if by_row:
        order = {row: i for i, row in enumerate(dict.fromkeys(row for _, row in keys))}
        keys.sort(key=lambda key: (order[key[1]], key[0]))
    present = [c for c in cells.all if c.table == table and c.period in set(periods)]
    seen = {c.column for c in present}
    return Grid(
        sheet=sheet,
        table=table,
        keys=tuple(keys),
        columns=tuple(c for c in cells.columns(table) if c in seen and c not in out),
        with_u=frozenset(c.column for c in present if c.u is not None and c.column not in out),
        dated=len(periods) > 1,
        own_unit=any(has_own_unit(c) for c in present),
    )


def has_own_unit(cell: Cell) -> bool:
    """Whether a number's unit stands with the cell and not with its column."""
    return (
        cell.text is None and TABLE[cell.table].column(cell.column).unit == "" and cell.unit != ""
    )
