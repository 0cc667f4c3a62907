"""Append-only against every route that a connection of the service, or an owner, might try."""

from __future__ import annotations

import sqlite3
from pathlib import Path

import pytest
from sqlalchemy import text
from sqlalchemy.exc import DBAPIError

from recon.db.book import SqlBook
from recon.db.tables import BOOK, PROTECTED
from recon.errors import BookUnavailableError
from tests.db.samples import filled, inputs, proposal, published
from tests.postgres import Server

SQLITE = pytest.mark.parametrize("book_url", ["sqlite"], indirect=True)
SERVER = pytest.mark.parametrize(
    "book_url", [pytest.param("postgresql", marks=pytest.mark.database)], indirect=True
)


def one_run(book: SqlBook) -> None:
    filled(book)
    book.decide("five", proposal())
    published(book, inputs(book))


def refused(book: SqlBook, statement: str) -> str:
    """Run a statement as the service would; give what the database said to it."""
    with (
        pytest.raises((DBAPIError, BookUnavailableError)) as said,
        book.database.writing() as connection,
    ):
        connection.exec_driver_sql(statement)
    return str(said.value)


def held(book: SqlBook) -> list[str]:
    with book.database.reading() as connection:
        return [
            name
            for name in PROTECTED
            if connection.execute(text(f"SELECT count(*) FROM {name}")).scalar()
        ]


def test_no_row_of_a_protected_table_is_updated_or_deleted(sql_book: SqlBook) -> None:
    one_run(sql_book)
    names = held(sql_book)
    assert len(names) > 15
    for name in names:
        column = BOOK.tables[name].columns[0].name
        assert "append-only" in refused(sql_book, f"UPDATE {name} SET {column} = {column}")
        assert "append-only" in refused(sql_book, f"DELETE FROM {name}")


@SQLITE
def test_replacing_a_row_is_refused_whatever_the_connection_has_switched_on(
    sql_book: SqlBook, book_url: str
) -> None:
    one_run(sql_book)
    names = held(sql_book)
    sql_book.close()
    plain = sqlite3.connect(Path(book_url.removeprefix("sqlite:///")))
    try:
        assert plain.execute("PRAGMA recursive_triggers").fetchone() == (0,)
        for name in names:
            with pytest.raises(sqlite3.IntegrityError, match="already holds this key"):
                plain.execute(f"INSERT OR REPLACE INTO {name} SELECT * FROM {name}")
            with pytest.raises(sqlite3.OperationalError, match="no such column: rowid"):
                plain.execute(f"SELECT rowid FROM {name}")
            plain.rollback()
        columns = [c.name for c in BOOK.tables["run"].columns]
        changed = ", ".join("2" if name == "run" else name for name in columns)
        with pytest.raises(sqlite3.IntegrityError, match="run already holds this key"):
            plain.execute(f"INSERT OR REPLACE INTO run SELECT {changed} FROM run")
    finally:
        plain.close()


@SQLITE
@pytest.mark.parametrize(
    "statement",
    [
        "DROP TRIGGER estimate_no_update",
        "DROP TABLE estimate",
        "DROP VIEW report_cells",
        "DROP INDEX record_span",
        "ALTER TABLE estimate ADD COLUMN more TEXT",
        "ATTACH DATABASE ':memory:' AS other",
        "PRAGMA writable_schema=ON",
    ],
)
def test_a_connection_of_the_service_cannot_take_protection_away(
    sql_book: SqlBook, statement: str
) -> None:
    assert "not authorized" in refused(sql_book, statement)


@SERVER
def test_truncate_and_a_session_that_plays_replica_are_refused_to_the_owner_too(
    sql_book: SqlBook, postgres: Server, book_url: str
) -> None:
    one_run(sql_book)
    names = held(sql_book)
    for name in names:
        assert "append-only" in refused(sql_book, f"TRUNCATE {name} CASCADE")
    for name in names:
        said = refused(
            sql_book,
            f"SET LOCAL session_replication_role = replica; DELETE FROM {name}",
        )
        assert "append-only" in said
    key = "site, run, day, place, boundary, quantity, basis"
    said = refused(
        sql_book,
        f"INSERT INTO estimate SELECT * FROM estimate ON CONFLICT ({key}) DO UPDATE SET value = 0",
    )
    assert "append-only" in said
