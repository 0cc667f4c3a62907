"""Brings a book to the schema of this program: numbered plain SQL, forward only.

Each file runs in one transaction with its line in ``schema_migration``, under the database's own
lock, so a kill at any moment leaves either all of a file or nothing of it. A changed or unknown
file is refused. Views are made anew by every upgrade; grants where the roles exist.
"""

from __future__ import annotations

import getpass
import hashlib
import re
import sqlite3
from collections.abc import Iterator
from dataclasses import dataclass
from datetime import datetime
from functools import partial
from pathlib import Path

from sqlalchemy import Connection, inspect, select

from recon.db.engines import Database, cut
from recon.db.protection import find_unprotected
from recon.db.tables import SCHEMA_MIGRATION
from recon.errors import AlteredRecordError, OldBookError
from recon.failpoints import reach

_NAME = re.compile(r"(\d{4})_([a-z0-9_]+)\.sql")
_VIEW = re.compile(r"CREATE VIEW (\w+)")


@dataclass(frozen=True, kw_only=True)
class Migration:
    """One numbered file."""

    number: int
    name: str
    sha256: str
    text: str


def sql_folder() -> Path:
    """Folder of the project's SQL: inside an installed package, else the checkout's."""
    package = Path(__file__).resolve().parents[1]
    installed = package / "_data" / "sql"
    return installed if installed.is_dir() else package.parent / "sql"


def migrations(dialect: str, folder: Path | None = None) -> tuple[Migration, ...]:
    """
    Read the numbered files of a dialect.

    Raises
    ------
    OldBookError
        A file's name is not ``NNNN_name.sql`` or the numbers have a gap.
    """
    place = (folder or sql_folder()) / dialect
    found: list[Migration] = []
    for path in sorted(place.glob("*.sql")):
        name = _NAME.fullmatch(path.name)
        text = path.read_text(encoding="utf-8")
        if name is None or int(name[1]) != len(found) + 1:
            said = f"expected {len(found) + 1:04}_name.sql, found {path.name}"
            raise OldBookError(str(place), said)
        found.append(
            Migration(
                number=int(name[1]),
                name=name[2],
                sha256=hashlib.sha256(text.encode()).hexdigest(),
                text=text,
            )
        )
    return tuple(found)


def upgrade(url: str, *, at: datetime, folder: Path | None = None) -> tuple[str, ...]:
    """
    Apply what a book lacks; harmless when repeated.

    Parameters
    ----------
    url : str
        Address with the right to change the schema.
    at : datetime
        Now, aware.
    folder : Path, optional
        Folder of SQL; the project's own by default.

    Returns
    -------
    tuple of str
        Names of the files applied.

    Raises
    ------
    OldBookError
        A file applied before was changed since, or the book is newer than this program.
    BookUnavailableError, DamagedBookError
        The database cannot be used.
    """
    database = Database(url, owner=True)
    try:
        files = migrations(_dialect(database), folder)
        applied = tuple(
            f"{file.number:04}_{file.name}" for file in files if _apply(database, file, files, at)
        )
        with database.writing() as connection:
            _become_owner(database, connection)
            database.lock(connection, "schema")
            for statement in _views(database, folder or sql_folder()):
                _run(connection, statement)
            _grant(database, connection, folder or sql_folder())
        return applied
    finally:
        database.close()


def check_schema(database: Database, folder: Path | None = None) -> None:
    """
    Refuse a book that is older, newer or less protected than this program expects.

    Raises
    ------
    OldBookError
        It was never upgraded, or by another version.
    AlteredRecordError
        A trigger that keeps a table append-only is missing or reads differently.
    """
    files = migrations(_dialect(database), folder)
    with database.reading() as connection:
        missing = [f for f in files if f.number not in _applied(database, connection, files)]
        if missing:
            raise OldBookError(
                database.shown,
                f"migration {missing[0].number:04}_{missing[0].name} has not been applied. "
                "Run `recon database upgrade`.",
            )
        faults = find_unprotected(connection, files[0].text)
    if faults:
        raise AlteredRecordError(
            f"accounting database {database.shown}, protection of {faults[0].table}",
            faults[0].expected,
            faults[0].found,
        )


def _dialect(database: Database) -> str:
    return "sqlite" if database.sqlite else "postgresql"


def _applied(
    database: Database, connection: Connection, files: tuple[Migration, ...]
) -> frozenset[int]:
    """Numbers applied, each checked against its file."""
    if not inspect(connection).has_table(SCHEMA_MIGRATION.name):
        return frozenset()
    known = {file.number: file for file in files}
    rows = connection.execute(select(SCHEMA_MIGRATION).order_by("number")).all()
    for row in rows:
        file = known.get(row.number)
        if file is None:
            raise OldBookError(
                database.shown,
                f"holds migration {row.number:04}_{row.name}, which this program does not know. "
                "Use the program that wrote it, or a newer one.",
            )
        if file.sha256 != row.sha256:
            raise OldBookError(
                database.shown,
                f"migration {row.number:04}_{row.name} was applied with checksum "
                f"{row.sha256[:16]}, the file now has {file.sha256[:16]}. Put the file back as it "
                "was; a change needs a file of its own.",
            )
    return frozenset(row.number for row in rows)


def _apply(database: Database, file: Migration, files: tuple[Migration, ...], at: datetime) -> bool:
    """Apply one file with its line in one transaction; False where it has been."""
    with database.writing() as connection:
        _become_owner(database, connection)
        database.lock(connection, "schema")
        if file.number in _applied(database, connection, files):
            return False
        for statement in _statements(database, file.text):
            _run(connection, statement)
            reach("mid_migration", cut=partial(cut, connection))
        connection.execute(
            SCHEMA_MIGRATION.insert().values(
                number=file.number,
                name=file.name,
                sha256=file.sha256,
                applied_at=at,
                applied_by=getpass.getuser(),
            )
        )
        reach("before_commit", cut=partial(cut, connection))
    return True


def _run(connection: Connection, statements: str) -> None:
    """Run plain SQL as it stands, a percent sign included."""
    connection.exec_driver_sql(statements, execution_options={"no_parameters": True})


def _statements(database: Database, text: str) -> Iterator[str]:
    """Statements one by one on SQLite, whose script runner would commit first; else the whole."""
    if not database.sqlite:
        yield text
        return
    pending = ""
    for line in text.splitlines(keepends=True):
        pending += line
        if sqlite3.complete_statement(pending):
            yield pending.strip()
            pending = ""


def _views(database: Database, folder: Path) -> Iterator[str]:
    for path in sorted((folder / "views").glob("*.sql")):
        text = path.read_text(encoding="utf-8")
        if database.sqlite:
            yield from (f"DROP VIEW IF EXISTS {name}" for name in _VIEW.findall(text))
            yield from _statements(database, text)
        else:
            yield _VIEW.sub(r"CREATE OR REPLACE VIEW \1", text)


def _become_owner(database: Database, connection: Connection) -> None:
    """On PostgreSQL objects belong to ``recon_owner`` where we may become that."""
    if database.sqlite:
        return
    member = connection.exec_driver_sql(
        "SELECT pg_has_role(current_user, oid, 'MEMBER') "
        "AND has_schema_privilege(oid, 'public', 'CREATE') FROM pg_roles "
        "WHERE rolname = 'recon_owner'"
    ).scalar()
    if member:
        connection.exec_driver_sql("SET LOCAL ROLE recon_owner")


def _grant(database: Database, connection: Connection, folder: Path) -> None:
    grants = folder / "postgresql" / "access" / "grants.sql"
    if database.sqlite or not grants.exists():
        return
    there = connection.exec_driver_sql(
        "SELECT count(*) FROM pg_roles WHERE rolname IN "
        "('recon_owner', 'recon_job', 'recon_web', 'recon_reader')"
    ).scalar()
    if there == 4:
        _run(connection, grants.read_text(encoding="utf-8"))
