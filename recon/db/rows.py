"""A run's result as rows of the book's tables, and back; the same rows are hashed and stored.

Every value is brought to the form that both databases keep alike before anything else is done with
it: -0.0 becomes 0.0, numbers that are not finite are refused, missing ones need their reason.
"""

from __future__ import annotations

import itertools
import json
import math
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from datetime import UTC, date, datetime, timedelta
from functools import cache
from typing import Any, cast

from sqlalchemy import Table

from recon.app.period import (
    EstimateRow,
    FigureRow,
    MeasurementRow,
    OffsetRow,
    PeriodResult,
)
from recon.audit.canonical import canonical
from recon.audit.digest import table_digest
from recon.db import tables
from recon.errors import DataError
from recon.findings import Finding, Severity
from recon.ingest.given import OpeningStock
from recon.tabulate.cells import BasisOf, Cell
from recon.tabulate.leaves import YearLeaf

Row = tuple[Any, ...]
RESULT_TABLES = (
    tables.MEASUREMENT,
    tables.ESTIMATE,
    tables.SOURCE_OFFSET,
    tables.FINDING,
    tables.FIGURE,
    tables.TABLE_CELL,
    tables.CLOSING_STOCK,
    tables.YEAR_LEAF,
)
_REASONED = {"estimate": ("value",), "figure": ("value",), "table_cell": ("value", "content")}


@dataclass(frozen=True, kw_only=True)
class Shape:
    """Columns of a result table without site and run, and which of them are its natural key."""

    name: str
    columns: tuple[str, ...]
    key: tuple[int, ...]


def shape(table: Table) -> Shape:
    """Give the shape of a result table."""
    columns = tuple(c.name for c in table.columns if c.name not in ("site", "run"))
    keys = {c.name for c in table.primary_key.columns}
    places = tuple(i for i, name in enumerate(columns) if name in keys)
    return Shape(name=table.name, columns=columns, key=places)


def result_rows(result: PeriodResult, month: date) -> dict[str, list[Row]]:
    """
    Bring a result to rows by table, sorted by natural key, without site and run.

    Raises
    ------
    DataError
        A number is not finite, a value is missing without reason, or a key stands twice.
    """
    raw: dict[str, Iterable[Sequence[object]]] = {
        "measurement": _fields(tables.MEASUREMENT, result.measurements),
        "estimate": _fields(tables.ESTIMATE, result.estimates),
        "source_offset": _fields(tables.SOURCE_OFFSET, result.offsets),
        "finding": (_from_finding(n, f, month) for n, f in enumerate(result.findings, start=1)),
        "figure": _fields(tables.FIGURE, result.figures),
        "table_cell": map(_from_cell, result.cells),
        "closing_stock": _fields(tables.CLOSING_STOCK, result.closing),
        "year_leaf": map(_from_leaf, result.leaves),
    }
    return {table.name: clean(table, raw[table.name]) for table in RESULT_TABLES}


def result_of(
    rows: Mapping[str, Sequence[Row]],
    *,
    summary: tuple[tuple[str, str], ...],
    method: tuple[tuple[str, str], ...],
) -> PeriodResult:
    """Bring rows back to a result; the inverse of ``result_rows``."""
    return PeriodResult(
        measurements=tuple(_made(MeasurementRow, tables.MEASUREMENT, rows)),
        estimates=tuple(_made(EstimateRow, tables.ESTIMATE, rows)),
        offsets=tuple(_made(OffsetRow, tables.SOURCE_OFFSET, rows)),
        findings=tuple(map(_to_finding, rows["finding"])),
        figures=tuple(_made(FigureRow, tables.FIGURE, rows)),
        cells=tuple(map(_to_cell, rows["table_cell"])),
        closing=tuple(_made(OpeningStock, tables.CLOSING_STOCK, rows)),
        leaves=tuple(_to_leaf(row) for row in rows["year_leaf"]),
        summary=summary,
        method=method,
    )


def table_digests(rows: Mapping[str, Sequence[Row]]) -> dict[str, str]:
    """Digest of each result table, by name; rows must be clean and sorted."""
    return {
        table.name: table_digest(table.name, shape(table).columns, rows[table.name])
        for table in RESULT_TABLES
    }


def clean(table: Table, rows: Iterable[Sequence[object]]) -> list[Row]:
    """
    Bring rows to the form both databases keep alike, sorted by natural key.

    Parameters
    ----------
    table : Table
        A result table, or any table whose rows are given without site and run.
    rows : iterable of sequences
        In the order of the table's columns.

    Raises
    ------
    DataError
        As in ``result_rows``.
    """
    form = shape(table)
    cleaners = [_cleaner(table, name) for name in form.columns]
    reasoned = [form.columns.index(name) for name in _REASONED.get(table.name, ())]
    reason = form.columns.index("reason") if reasoned else -1
    made: list[Row] = []
    for raw in rows:
        try:
            row = tuple([clean(value) for clean, value in zip(cleaners, raw, strict=True)])
        except ValueError as error:
            raise DataError(f"{_place(form, raw)}: {error}. Nothing was written.") from error
        if reasoned and not row[reason] and all(row[i] is None for i in reasoned):
            raise DataError(f"{_place(form, raw)}: no value and no reason. Nothing was written.")
        made.append(row)
    made.sort(key=lambda row: tuple([row[i] for i in form.key]))
    for before, after in itertools.pairwise(made):
        if all(before[i] == after[i] for i in form.key):
            raise DataError(f"{_place(form, after)}: stands twice. Nothing was written.")
    return made


def clean_values(table: Table, values: Sequence[object]) -> Row:
    """
    Bring one row to the form both databases keep alike; values follow the site.

    Raises
    ------
    DataError
        A number is not finite, or a text or time cannot be kept.
    """
    columns = [column.name for column in table.columns if column.name != "site"]
    try:
        return tuple([_cleaner(table, name)(v) for name, v in zip(columns, values, strict=True)])
    except ValueError as error:
        named = ", ".join(str(value) for value in values[:5])
        raise DataError(f"table {table.name}, {named}: {error}. Nothing was written.") from error


def _place(form: Shape, row: Sequence[object]) -> str:
    return f"table {form.name}, {', '.join(str(row[i]) for i in form.key)}"


@cache
def _cleaner(table: Table, name: str) -> Callable[[Any], Any]:
    column = table.columns[name]
    by_kind: dict[type, Callable[[Any], Any]] = {
        float: _number,
        int: int,
        bool: bool,
        str: _text,
        date: _day,
        datetime: _instant,
    }
    cleaner = by_kind.get(column.type.python_type, _as_is)
    if not column.nullable:
        return cleaner
    return lambda value: None if value is None else cleaner(value)


def _number(value: float) -> float:
    number = float(value) + 0.0
    if not math.isfinite(number):
        raise ValueError(f"{number} is not a finite number")
    return number


def _text(value: str) -> str:
    if not isinstance(value, str):
        raise ValueError(f"text expected, found {value!r}")
    if "\0" in value:
        raise ValueError("text holds a NUL character")
    return str(value)


def _day(value: date) -> date:
    if isinstance(value, datetime) or not isinstance(value, date):
        raise ValueError(f"a day expected, found {value!r}")
    return value


def _instant(value: datetime) -> datetime:
    if value.utcoffset() is None:
        raise ValueError(f"a time without zone: {value.isoformat()}")
    return value.astimezone(UTC)


def _as_is(value: object) -> object:
    return value


def _fields(table: Table, rows: Iterable[object]) -> Iterable[Row]:
    columns = shape(table).columns
    return (tuple([getattr(row, name) for name in columns]) for row in rows)


def _made(
    kind: Callable[..., Any], table: Table, rows: Mapping[str, Sequence[Row]]
) -> Iterable[Any]:
    columns = shape(table).columns
    return (kind(**dict(zip(columns, row, strict=True))) for row in rows[table.name])


def _from_finding(number: int, finding: Finding, month: date) -> Row:
    day = None if finding.period is None else month + timedelta(days=finding.period - 1)
    return (
        number,
        finding.code,
        finding.subject,
        finding.severity.value,
        day,
        finding.period,
        finding.text,
        canonical(finding.evidence).decode(),
    )


def _to_finding(row: Row) -> Finding:
    _, code, subject, severity, _, period, content, evidence = row
    return Finding(
        code=code,
        subject=subject,
        text=content,
        severity=Severity(severity),
        period=period,
        evidence=tuple((name, value) for name, value in json.loads(evidence)),
    )


def _from_cell(c: Cell) -> Row:
    return (c.table, c.period, c.row, c.column, c.value, c.text, c.u, c.unit, c.basis, c.reason)


def _to_cell(row: Row) -> Cell:
    table, period, key, column, value, content, u, unit, basis, reason = row
    return Cell(
        table=table,
        period=period,
        row=key,
        column=column,
        value=value,
        text=content,
        u=u,
        unit=unit,
        basis=cast(BasisOf, basis),
        reason=reason,
    )


def _from_leaf(leaf: YearLeaf) -> Row:
    return (leaf.month, leaf.table, leaf.row, leaf.column, leaf.value)


def _to_leaf(row: Row) -> YearLeaf:
    month, table, key, column, value = row
    return YearLeaf(month=month, table=table, row=key, column=column, value=value)
