"""Many rows at once: COPY on PostgreSQL, one prepared statement on SQLite."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from datetime import date, datetime
from typing import Any

from sqlalchemy import Connection, Table

from recon.audit.canonical import instant_text

_ON_SQLITE: dict[type, Callable[[Any], Any]] = {
    date: date.isoformat,
    datetime: instant_text,
    bool: int,
}
_ON_POSTGRESQL = {
    str: "text",
    float: "float8",
    int: "int8",
    bool: "bool",
    date: "date",
    datetime: "timestamptz",
    bytes: "bytea",
}


def insert(
    connection: Connection, table: Table, rows: Iterable[Sequence[Any]], *leading: object
) -> None:
    """
    Insert rows into a table.

    Parameters
    ----------
    connection : Connection
        In a transaction.
    table : Table
    rows : iterable of sequences
        Values in the order of the table's columns, after the leading ones.
    leading : object
        Values of the first columns, the same in every row.
    """
    kinds = [column.type.python_type for column in table.columns]
    cursor = connection.connection.cursor()
    try:
        if connection.dialect.name == "sqlite":
            _prepared(cursor, table, kinds, rows, leading)
        else:
            _copied(cursor, table, kinds, rows, leading)
    finally:
        cursor.close()


def _prepared(
    cursor: Any, table: Table, kinds: list[type], rows: Iterable[Sequence[Any]], leading: Any
) -> None:
    changed = [(i, _ON_SQLITE[kind]) for i, kind in enumerate(kinds) if kind in _ON_SQLITE]

    def encoded(row: Sequence[Any]) -> list[Any]:
        values = [*leading, *row]
        for i, encode in changed:
            if values[i] is not None:
                values[i] = encode(values[i])
        return values

    marks = ", ".join("?" * len(kinds))
    names = ", ".join(column.name for column in table.columns)
    # Names come from the code's own tables, never from data.
    statement = f"INSERT INTO {table.name} ({names}) VALUES ({marks})"  # noqa: S608
    cursor.executemany(statement, map(encoded, rows))


def _copied(
    cursor: Any, table: Table, kinds: list[type], rows: Iterable[Sequence[Any]], leading: Any
) -> None:
    names = ", ".join(column.name for column in table.columns)
    with cursor.copy(f"COPY {table.name} ({names}) FROM STDIN WITH (FORMAT BINARY)") as copy:
        copy.set_types([_ON_POSTGRESQL[kind] for kind in kinds])
        for row in rows:
            copy.write_row((*leading, *row))
