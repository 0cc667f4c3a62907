"""Insert a row or change the one with its key: the same statement on either database."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from sqlalchemy import Connection, Table
from sqlalchemy.dialects import postgresql, sqlite


def insert_or(connection: Connection, table: Table, values: Mapping[str, Any]) -> Any:
    """An insert that takes ``on_conflict_do_update`` and ``on_conflict_do_nothing``."""
    if connection.dialect.name == "sqlite":
        return sqlite.insert(table).values(**values)
    return postgresql.insert(table).values(**values)


def upsert(connection: Connection, table: Table, values: Mapping[str, Any]) -> None:
    """Insert a row of a changeable table, or bring the one with its key to these values."""
    keys = [column.name for column in table.primary_key.columns]
    changed = {name: value for name, value in values.items() if name not in keys}
    statement = insert_or(connection, table, values)
    connection.execute(statement.on_conflict_do_update(index_elements=keys, set_=changed))
