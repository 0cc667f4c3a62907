"""Which tables are append-only, and whether the triggers that keep them so stand as written."""

from __future__ import annotations

import re
import sqlite3
from dataclasses import dataclass

from sqlalchemy import Connection

from recon.db.tables import PROTECTED

_BODY = re.compile(r"CREATE FUNCTION refuse_change\(\).*?AS \$\$(.*?)\$\$", re.DOTALL)


@dataclass(frozen=True, kw_only=True)
class Unprotected:
    """A table whose protection is missing or reads differently."""

    table: str
    expected: str
    found: str


def find_unprotected(connection: Connection, first_migration: str) -> tuple[Unprotected, ...]:
    """
    Compare every protecting trigger with what the first migration made, word for word.

    Parameters
    ----------
    connection : Connection
    first_migration : str
        Text of ``0001_book.sql`` of this database's kind.
    """
    if connection.dialect.name == "sqlite":
        expected = _expected_on_sqlite(first_migration)
        found = {
            row.name: (row.tbl_name, row.sql)
            for row in connection.exec_driver_sql(
                "SELECT name, tbl_name, sql FROM sqlite_schema WHERE type = 'trigger'"
            )
        }
    else:
        body = _BODY.search(first_migration)
        assert body is not None
        expected = _expected_on_postgresql(body[1].strip())
        found = {
            row.name: (row.owner, f"{row.text}; {row.state}; {row.body.strip()}")
            for row in connection.exec_driver_sql(
                "SELECT t.tgname AS name, c.relname AS owner, p.prosrc AS body, "
                "pg_get_triggerdef(t.oid, true) AS text, "
                "CASE t.tgenabled WHEN 'A' THEN 'always' ELSE 'not always' END AS state "
                "FROM pg_trigger t JOIN pg_class c ON c.oid = t.tgrelid "
                "JOIN pg_proc p ON p.oid = t.tgfoid "
                "WHERE NOT t.tgisinternal AND c.relnamespace = current_schema()::regnamespace"
            )
        }
    return tuple(
        Unprotected(
            table=table,
            expected=f'trigger {name} "{text}"',
            found=f'"{found[name][1]}"' if name in found else "no such trigger",
        )
        for name, (table, text) in sorted(expected.items())
        if found.get(name) != (table, text)
    )


def _expected_on_sqlite(first_migration: str) -> dict[str, tuple[str, str]]:
    fresh = sqlite3.connect(":memory:")
    try:
        fresh.executescript(first_migration)
        rows = fresh.execute(
            "SELECT name, tbl_name, sql FROM sqlite_schema WHERE type = 'trigger'"
        ).fetchall()
    finally:
        fresh.close()
    assert {row[1] for row in rows} == set(PROTECTED)
    return {name: (table, text) for name, table, text in rows}


def _expected_on_postgresql(body: str) -> dict[str, tuple[str, str]]:
    expected = {}
    for table in PROTECTED:
        for kind, when, each in (
            ("change", "DELETE OR UPDATE", "ROW"),
            ("truncate", "TRUNCATE", "STATEMENT"),
        ):
            name = f"{table}_no_{kind}"
            text = (
                f"CREATE TRIGGER {name} BEFORE {when} ON {table} "
                f"FOR EACH {each} EXECUTE FUNCTION refuse_change(); always; {body}"
            )
            expected[name] = (table, text)
    return expected
