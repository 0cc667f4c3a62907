"""Look cells up in a test."""

from __future__ import annotations

from recon.tabulate.cells import Cell
from recon.tabulate.tables import Tables


def cell(tables: Tables, table: str, row: str, column: str, period: str = "2026-01") -> Cell:
    """Find the one cell at a place."""
    found = [
        c
        for c in tables.cells
        if (c.table, c.period, c.row, c.column) == (table, period, row, column)
    ]
    assert len(found) == 1, f"{len(found)} cells at {table} {period} {row} {column}"
    return found[0]


def value(tables: Tables, table: str, row: str, column: str, period: str = "2026-01") -> float:
    """The number at a place."""
    found = cell(tables, table, row, column, period)
    assert found.value is not None, found.reason
    return found.value
