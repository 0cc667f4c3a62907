"""Migrations: both databases get the same book, files are checked, and a kill leaves no half."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
from datetime import UTC, datetime
from pathlib import Path

import pytest
from sqlalchemy import inspect, text

from recon import failpoints
from recon.db.engines import Database
from recon.db.migrate import check_schema, migrations, sql_folder, upgrade
from recon.db.tables import BOOK, PROTECTED
from recon.errors import AlteredRecordError, OldBookError

NOW = datetime(2026, 2, 1, 8, tzinfo=UTC)
ROOT = Path(__file__).resolve().parents[2]


def shape(url: str) -> dict[str, list[tuple[str, bool]]]:
    """Tables and columns of a database, with whether null is allowed."""
    database = Database(url)
    try:
        with database.reading() as connection:
            seen = inspect(connection)
            return {
                name: [(c["name"], bool(c["nullable"])) for c in seen.get_columns(name)]
                for name in seen.get_table_names()
            }
    finally:
        database.close()


def keys(url: str) -> dict[str, list[str]]:
    database = Database(url)
    try:
        with database.reading() as connection:
            seen = inspect(connection)
            return {
                name: list(seen.get_pk_constraint(name)["constrained_columns"])
                for name in seen.get_table_names()
            }
    finally:
        database.close()


def test_a_migrated_book_holds_the_tables_that_the_code_sees(database_url: str) -> None:
    upgrade(database_url, at=NOW)
    assert shape(database_url) == {
        table.name: [(c.name, bool(c.nullable)) for c in table.columns]
        for table in BOOK.tables.values()
    }
    assert keys(database_url) == {
        table.name: [c.name for c in table.primary_key.columns] for table in BOOK.tables.values()
    }


def test_every_table_but_four_is_protected_as_the_migration_made_it(database_url: str) -> None:
    upgrade(database_url, at=NOW)
    database = Database(database_url)
    check_schema(database)
    database.close()
    assert len(PROTECTED) == len(BOOK.tables) - 4


def test_an_upgrade_repeated_does_nothing(database_url: str) -> None:
    assert upgrade(database_url, at=NOW) == ("0001_book",)
    assert upgrade(database_url, at=NOW) == ()


def test_a_book_that_was_never_upgraded_is_refused(database_url: str) -> None:
    database = Database(database_url)
    with pytest.raises(OldBookError, match="0001_book has not been applied"):
        check_schema(database)
    database.close()


def changed_copy(folder: Path) -> Path:
    copy = folder / "sql"
    shutil.copytree(sql_folder(), copy)
    return copy


def test_a_file_changed_after_it_was_applied_is_refused(database_url: str, tmp_path: Path) -> None:
    copy = changed_copy(tmp_path)
    upgrade(database_url, at=NOW, folder=copy)
    for path in copy.glob("*/0001_book.sql"):
        path.write_text(path.read_text() + "-- a word more\n")
    with pytest.raises(OldBookError, match=r"was applied with checksum .* Put the file back"):
        upgrade(database_url, at=NOW, folder=copy)


def test_a_book_newer_than_the_program_is_refused(database_url: str, tmp_path: Path) -> None:
    copy = changed_copy(tmp_path)
    for dialect in ("sqlite", "postgresql"):
        (copy / dialect / "0002_more.sql").write_text("CREATE TABLE more (n integer);\n")
    assert upgrade(database_url, at=NOW, folder=copy) == ("0001_book", "0002_more")
    database = Database(database_url)
    with pytest.raises(OldBookError, match="holds migration 0002_more"):
        check_schema(database)
    database.close()


def test_a_gap_in_the_numbers_is_refused(tmp_path: Path) -> None:
    copy = changed_copy(tmp_path)
    (copy / "sqlite" / "0003_late.sql").write_text("SELECT 1;\n")
    with pytest.raises(OldBookError, match=r"expected 0002_name\.sql, found 0003_late\.sql"):
        migrations("sqlite", copy)


@pytest.mark.parametrize("passes", [1, 30, 60])
def test_an_upgrade_broken_off_leaves_nothing_and_can_be_repeated(
    database_url: str, passes: int
) -> None:
    if not database_url.startswith("sqlite"):
        passes = 1
    failpoints.arm(f"mid_migration=raise@{passes}")
    with pytest.raises(failpoints.ReachedError):
        upgrade(database_url, at=NOW)
    assert shape(database_url) == {}
    assert upgrade(database_url, at=NOW) == ("0001_book",)


def test_an_upgrade_that_is_killed_can_be_repeated(database_url: str) -> None:
    code = (
        "import sys; from datetime import UTC, datetime; from recon import failpoints\n"
        "from recon.db.migrate import upgrade\n"
        "failpoints.arm_from_environment(); upgrade(sys.argv[1], at=datetime.now(UTC))"
    )
    ended = subprocess.run(
        [sys.executable, "-c", code, database_url],
        env={**os.environ, failpoints.VARIABLE: "before_commit=kill"},
        cwd=ROOT,
        check=False,
    )
    assert ended.returncode == -9
    assert shape(database_url) == {}
    assert upgrade(database_url, at=NOW) == ("0001_book",)


@pytest.mark.parametrize("how", ["dropped", "changed"])
def test_a_protecting_trigger_that_is_gone_or_changed_is_noticed(
    database_url: str, how: str
) -> None:
    upgrade(database_url, at=NOW)
    owner = Database(database_url, owner=True)
    with owner.writing() as connection:
        if owner.sqlite:
            connection.execute(text("DROP TRIGGER estimate_no_update"))
            if how == "changed":
                connection.execute(
                    text(
                        "CREATE TRIGGER estimate_no_update BEFORE UPDATE ON estimate WHEN 0 "
                        "BEGIN SELECT RAISE(ABORT, 'estimate is append-only'); END"
                    )
                )
        elif how == "dropped":
            connection.execute(text("DROP TRIGGER estimate_no_change ON estimate"))
        else:
            connection.execute(text("ALTER TABLE estimate DISABLE TRIGGER estimate_no_change"))
    with pytest.raises(AlteredRecordError, match="protection of estimate"):
        check_schema(owner)
    owner.close()


@pytest.mark.database
def test_a_changed_body_of_the_protecting_function_is_noticed(postgres_url: str) -> None:
    upgrade(postgres_url, at=NOW)
    owner = Database(postgres_url, owner=True)
    with owner.writing() as connection:
        connection.execute(
            text(
                "CREATE OR REPLACE FUNCTION refuse_change() RETURNS trigger LANGUAGE plpgsql "
                "AS $$ BEGIN RETURN NEW; END $$"
            )
        )
    with pytest.raises(AlteredRecordError, match="refuse_change"):
        check_schema(owner)
    owner.close()
