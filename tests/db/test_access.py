"""Who may do what on PostgreSQL: every role, every table, every verb, tried on the real server."""

from __future__ import annotations

import re
from collections.abc import Iterator
from datetime import UTC, datetime

import psycopg
import pytest

from recon.db.book import SqlBook
from recon.db.migrate import sql_folder, upgrade
from recon.db.tables import BOOK
from tests.db.samples import SITE, filled, inputs, published
from tests.postgres import Server

pytestmark = pytest.mark.database
VERBS = {
    "select": "SELECT count(*) FROM {}",
    "insert": "INSERT INTO {} DEFAULT VALUES",
    "update": "UPDATE {} SET {column} = DEFAULT",
    "delete": "DELETE FROM {}",
    "truncate": "TRUNCATE {} CASCADE",
}
ALL = frozenset(BOOK.tables)
CHANGED_BY_JOB = {"current_run", "claim", "watermark", "progress"}
ADDED_BY_WEB = {
    "site_version",
    "decision",
    "decision_approval",
    "closing_event",
    "prior_period_adjustment",
    "document",
    "audit_entry",
}
NOT_ADDED_BY_JOB = (ADDED_BY_WEB - {"site_version", "audit_entry"}) | {"schema_migration"}
ALLOWED: dict[str, dict[str, frozenset[str]]] = {
    "recon_job": {
        "select": ALL,
        "insert": ALL - NOT_ADDED_BY_JOB,
        "update": frozenset(CHANGED_BY_JOB),
    },
    "recon_web": {"select": ALL, "insert": frozenset(ADDED_BY_WEB)},
    "recon_reader": {},
    "recon_migrate": {},
}


@pytest.fixture
def shared(postgres: Server) -> Iterator[str]:
    """A book of a site: roles by the administrator, schema by the migrating role."""
    name = postgres.create()
    roles = (sql_folder() / "postgresql" / "access" / "roles.sql").read_text()
    with postgres.connect(name) as connection:
        connection.execute(roles.encode())
        connection.execute(roles.encode())
    upgrade(postgres.url(name, "recon_migrate"), at=datetime(2026, 1, 1, tzinfo=UTC))
    yield name
    postgres.drop(name)


def views() -> list[str]:
    texts = (path.read_text() for path in sorted((sql_folder() / "views").glob("*.sql")))
    return re.findall(r"CREATE VIEW (\w+)", "".join(texts))


def allowed(connection: psycopg.Connection, statement: str) -> bool:
    """Whether a statement is let through; what a constraint or trigger says does not matter."""
    try:
        with connection.transaction(force_rollback=True):
            connection.execute(statement.encode())
    except psycopg.errors.InsufficientPrivilege:
        return False
    except psycopg.errors.ReadOnlySqlTransaction:
        return False
    except psycopg.Error:
        return True
    return True


@pytest.mark.parametrize("role", ALLOWED)
def test_every_role_may_do_to_every_table_what_the_matrix_says_and_nothing_else(
    postgres: Server, shared: str, role: str
) -> None:
    found: dict[str, set[str]] = {verb: set() for verb in VERBS}
    with postgres.connect(shared, role) as connection:
        connection.execute("SET default_transaction_read_only = off")
        for table in BOOK.tables.values():
            for verb, statement in VERBS.items():
                if allowed(connection, statement.format(table.name, column=table.columns[0].name)):
                    found[verb].add(table.name)
    expected = {verb: set(ALLOWED[role].get(verb, ())) for verb in VERBS}
    assert found == expected


@pytest.mark.parametrize("role", ALLOWED)
def test_no_role_of_the_service_may_change_the_schema_or_its_protection(
    postgres: Server, shared: str, role: str
) -> None:
    with postgres.connect(shared, role) as connection:
        for statement in (
            "ALTER TABLE estimate DISABLE TRIGGER estimate_no_change",
            "DROP TRIGGER estimate_no_change ON estimate",
            "DROP TABLE estimate",
            "CREATE TABLE own (n int)",
            "CREATE TEMP TABLE own (n int)",
            "SET session_replication_role = replica",
            "CREATE OR REPLACE FUNCTION refuse_change() RETURNS trigger LANGUAGE plpgsql "
            "AS $$ BEGIN RETURN NEW; END $$",
            "CREATE ROLE another",
        ):
            assert not allowed(connection, statement), statement


def test_readers_see_every_view_and_no_table(postgres: Server, shared: str) -> None:
    with postgres.connect(shared, "recon_reader") as connection:
        for view in views():
            assert allowed(connection, f"SELECT count(*) FROM {view}"), view
            held = connection.execute(
                "SELECT has_table_privilege(%s, 'INSERT, UPDATE, DELETE, TRUNCATE')", [view]
            ).fetchone()
            assert held == (False,), view


def test_the_service_does_its_work_with_the_rights_of_its_role(
    postgres: Server, shared: str
) -> None:
    book = SqlBook(postgres.url(shared, "recon_job"))
    try:
        filled(book)
        head = published(book, inputs(book))
        assert book.current(SITE, head.month) == head
    finally:
        book.close()


def test_everything_belongs_to_the_owner_that_nobody_logs_in_as(
    postgres: Server, shared: str
) -> None:
    with postgres.connect(shared) as connection:
        owners = connection.execute(
            "SELECT DISTINCT pg_get_userbyid(relowner) FROM pg_class "
            "WHERE relnamespace = 'public'::regnamespace"
        ).fetchall()
    assert owners == [("recon_owner",)]
    with pytest.raises(psycopg.OperationalError, match="not permitted to log in"):
        postgres.connect(shared, "recon_owner")
