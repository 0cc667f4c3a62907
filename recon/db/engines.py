"""How the book's database is reached: one writer's and one reader's way in, on either kind.

SQLite: WAL, synchronous FULL, foreign keys on; writers begin with BEGIN IMMEDIATE, since a
transaction that reads first and writes later fails at once when another has written meanwhile.
PostgreSQL: UTC, writers READ COMMITTED, readers one REPEATABLE READ snapshot.
"""

from __future__ import annotations

import sqlite3
import zlib
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import psycopg
from sqlalchemy import Connection, Engine, create_engine, event, make_url, text
from sqlalchemy.engine import URL
from sqlalchemy.exc import DBAPIError, PendingRollbackError
from sqlalchemy.exc import TimeoutError as PoolTimeout

from recon.errors import BookUnavailableError, DamagedBookError

BUSY_SECONDS = 10
_REFUSED = {
    sqlite3.SQLITE_DROP_TABLE,
    sqlite3.SQLITE_DROP_TRIGGER,
    sqlite3.SQLITE_DROP_INDEX,
    sqlite3.SQLITE_DROP_VIEW,
    sqlite3.SQLITE_ALTER_TABLE,
    sqlite3.SQLITE_ATTACH,
    sqlite3.SQLITE_DETACH,
}
_DAMAGE = ("malformed", "not a database", "corrupt", "invalid page", "checksum", "Could not decode")

_REFUSALS = (
    sqlite3.IntegrityError,
    sqlite3.ProgrammingError,
    psycopg.IntegrityError,
    psycopg.ProgrammingError,
    psycopg.DataError,
)
"""A constraint, a trigger or a right said no, or the SQL is wrong: not the server's state."""


class Database:
    """
    A book's database.

    Parameters
    ----------
    url : str
        SQLAlchemy URL of a SQLite file or a PostgreSQL database.
    owner : bool
        For migrations: the connection may change the schema.

    Raises
    ------
    BookUnavailableError
        The URL names neither kind, or a database in memory.
    """

    def __init__(self, url: str, *, owner: bool = False) -> None:
        self.url = _checked(url)
        self.shown = self.url.render_as_string(hide_password=True)
        self.sqlite = self.url.get_backend_name() == "sqlite"
        self._owner = owner
        self._writer = self._engine(begin="BEGIN IMMEDIATE")
        self._reader = self._engine(begin="BEGIN", reading=True) if self.sqlite else self._writer

    @contextmanager
    def writing(self) -> Iterator[Connection]:
        """
        Open one transaction that may write; it commits at the end or leaves nothing.

        Raises
        ------
        BookUnavailableError, DamagedBookError
            What the database said, in words.
        """
        with self._in_words(), self._writer.begin() as connection:
            yield connection

    @contextmanager
    def reading(self) -> Iterator[Connection]:
        """Open one snapshot: whatever is read inside belongs together. Errors as above."""
        try:
            with self._in_words(), self._reader.connect() as connection:
                if not self.sqlite:
                    connection.execution_options(
                        isolation_level="REPEATABLE READ", postgresql_readonly=True
                    )
                with connection.begin():
                    yield connection
        except ValueError as error:  # stored text, days, times or JSON that cannot be read
            raise DamagedBookError(self.shown, str(error)) from error

    def lock(self, connection: Connection, what: str) -> None:
        """Let only one transaction at a time do a named thing; ends with the transaction."""
        if not self.sqlite:
            connection.execute(
                text("SELECT pg_advisory_xact_lock(:place, :what)"),
                {"place": 0x7EC0, "what": zlib.crc32(what.encode()) - 2**31},
            )

    def close(self) -> None:
        """Close every connection that is not in use."""
        self._writer.dispose()
        self._reader.dispose()

    def _engine(self, begin: str, *, reading: bool = False) -> Engine:
        if not self.sqlite:
            return create_engine(
                self.url,
                pool_pre_ping=True,
                pool_size=4,
                connect_args={
                    "application_name": "recon",
                    "connect_timeout": BUSY_SECONDS,
                    "options": "-c timezone=UTC -c lock_timeout=30s",
                },
            )
        engine = create_engine(self.url, connect_args={"timeout": BUSY_SECONDS})

        @event.listens_for(engine, "connect")
        def prepare(connection: Any, _record: object) -> None:
            connection.isolation_level = None  # transactions begin by our own word
            for pragma in _pragmas(reading):
                connection.execute(f"PRAGMA {pragma}")
            if not self._owner:
                connection.set_authorizer(_authorise)

        @event.listens_for(engine, "begin")
        def begin_by_word(connection: Connection) -> None:
            connection.exec_driver_sql(begin)

        return engine

    @contextmanager
    def _in_words(self) -> Iterator[None]:
        try:
            yield
        except (DBAPIError, sqlite3.Error, psycopg.Error) as error:
            # bulk inserts speak to the driver itself, so its own errors come here too
            worded = self._worded((isinstance(error, DBAPIError) and error.orig) or error)
            if worded is None:
                raise
            raise worded from error
        except (PoolTimeout, PendingRollbackError) as error:
            raise BookUnavailableError(self.shown, str(error).splitlines()[0]) from error

    def _worded(self, error: BaseException) -> BookUnavailableError | DamagedBookError | None:
        """What an error of the database means; None where a constraint or trigger said no."""
        said = (str(error).strip() or type(error).__name__).splitlines()[0]
        if any(word in said for word in _DAMAGE):
            return DamagedBookError(self.shown, said)
        refused = isinstance(error, _REFUSALS) and "closed" not in said
        return None if refused else BookUnavailableError(self.shown, said)


def cut(connection: Connection) -> None:
    """Break a connection in use, as a network would; for failpoints."""
    driver = connection.connection.driver_connection
    assert driver is not None
    driver.close()


def _checked(url: str) -> URL:
    parsed = make_url(url)
    if parsed.drivername in ("postgresql", "postgres"):
        parsed = parsed.set(drivername="postgresql+psycopg")
    if parsed.drivername not in ("sqlite", "sqlite+pysqlite", "postgresql+psycopg"):
        raise BookUnavailableError(
            parsed.render_as_string(hide_password=True),
            "the book lies in a SQLite file or a PostgreSQL database; this is neither",
        )
    if parsed.get_backend_name() == "sqlite":
        place = Path(parsed.database or ":memory:")
        if str(place) == ":memory:":
            raise BookUnavailableError(str(parsed), "a book in memory would be gone at the end")
        if not place.parent.is_dir():
            raise BookUnavailableError(str(parsed), f"folder {place.parent} does not exist")
    return parsed


def _pragmas(reading: bool) -> tuple[str, ...]:
    common = (
        f"busy_timeout={BUSY_SECONDS * 1000}",
        "journal_mode=WAL",
        "synchronous=FULL",
        "foreign_keys=ON",
        "trusted_schema=OFF",
        "recursive_triggers=ON",
    )
    return (*common, "query_only=ON") if reading else common


def _authorise(
    action: int, name: str | None, value: str | None, _database: str | None, _by: str | None
) -> int:
    """What a connection of the service may not do, whatever statement reaches it."""
    if action in _REFUSED:
        return sqlite3.SQLITE_DENY
    if action == sqlite3.SQLITE_PRAGMA and name == "writable_schema" and value is not None:
        return sqlite3.SQLITE_DENY
    return sqlite3.SQLITE_OK
