"""How the plant's database is reached: read-only, with a time limit, asked again while it is away.

Read-only is enforced by the session, not only by what is asked; an account that can do no more than
SELECT is still the site's business.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Generator, Mapping, Sequence
from contextlib import suppress
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, TypeVar
from urllib.parse import quote

from sqlalchemy import URL, Engine, ExceptionContext, create_engine, event, make_url
from sqlalchemy.exc import ArgumentError, DBAPIError
from sqlalchemy.pool import NullPool

from recon.errors import PlantAddressError, PlantQueryError, PlantUnreachableError
from recon.plant.queries import Query

Result = TypeVar("Result")

BATCH = 20_000
"""Rows fetched from a cursor at a time."""

WAITS = (0.5, 1.0, 2.0, 4.0, 8.0)
"""Seconds waited before each further try."""

TIMEOUT_SECONDS = 120.0

PASSING = ("locked", "busy", "disk i/o", "unable to open")
"""SQLite's words for what may pass; everything else it says is the query's fault."""

SHUTTING = ("57P01", "57P02", "57P03", "53300", "53200", "53400")
"""PostgreSQL's states of a server that goes down, comes up, or is full (its manual, appendix A)."""

REFUSING = ("authentication failed", "no password supplied", "does not exist", "pg_hba.conf")
"""PostgreSQL's words for an account or database that waiting does not mend."""


@dataclass(frozen=True, kw_only=True)
class Connection:
    """
    A plant database that is read and never written.

    Attributes
    ----------
    name : str
        Address without password, for messages.
    engine : Engine
    sleep : callable
        Waits so many seconds; tests put their own.
    """

    name: str
    engine: Engine
    sleep: Callable[[float], None] = field(default=time.sleep)

    @property
    def sqlite(self) -> bool:
        """Whether it is an SQLite file."""
        return self.engine.dialect.name == "sqlite"

    def ask(
        self, query: Query, parameters: Mapping[str, object]
    ) -> Generator[tuple[Sequence[str], Sequence[Sequence[Any]]], None, None]:
        """
        Yield column names and rows, batch by batch, through a cursor on the server.

        The first batch comes even without rows, for the names. A failure on the way is not mended
        here, what came before it would be given twice; wrap the whole in ``again``.
        """
        used = {k: v for k, v in parameters.items() if k in query.parameters}
        with (
            self.engine.connect().execution_options(
                stream_results=True, yield_per=BATCH
            ) as session,
            session.execute(query.clause, used) as result,
        ):
            names = tuple(result.keys())
            # SQLite's own rows, where SQLAlchemy holds none back, come in half the time.
            fetch: Any = result.fetchmany
            if self.sqlite and result.cursor is not None:
                fetch = result.cursor.fetchmany
            rows = fetch(BATCH)
            yield names, rows
            while len(rows) == BATCH:
                rows = fetch(BATCH)
                if rows:
                    yield names, rows

    def again(self, work: Callable[[], Result], query: Query) -> Result:
        """
        Do a piece of work, and again from its beginning while the database is away.

        Raises
        ------
        PlantUnreachableError
            It did not answer after all waits.
        PlantQueryError
            It answered, and refused the query.
        """
        for tries, wait in enumerate((*WAITS, None), start=1):
            try:
                return work()
            except (DBAPIError, self.engine.dialect.loaded_dbapi.Error) as error:
                said, own = _said(error), _driver_error(error)
                if not self._passing(own):
                    raise PlantQueryError(self.name, query.path, said) from error
                self.engine.dispose()
                if wait is None or any(words in said for words in REFUSING):
                    raise PlantUnreachableError(self.name, said, tries) from error
                self.sleep(wait)
        raise AssertionError("unreachable: the last try returns or raises")

    def _passing(self, error: BaseException) -> bool:
        """Whether the database is away, rather than unwilling."""
        if self.sqlite:
            said = str(error).lower()
            return any(word in said for word in PASSING)
        state = getattr(error, "sqlstate", None)
        if state is not None:
            return state in SHUTTING or state.startswith("08")
        # Without a state the server said nothing: no session came about, or it broke off.
        driver = self.engine.dialect.loaded_dbapi
        return isinstance(error, driver.OperationalError | driver.InterfaceError)


def connect(
    url: str, *, timeout_seconds: float = TIMEOUT_SECONDS, busy_seconds: float = 10.0
) -> Connection:
    """
    Prepare to read a plant database; nothing is asked yet.

    Parameters
    ----------
    url : str
        ``sqlite:///file`` or ``postgresql://...``.
    timeout_seconds : float
        A statement that takes longer is ended [s].
    busy_seconds : float
        An SQLite file that somebody else locks is waited for so long within one try [s].

    Raises
    ------
    PlantAddressError
        It is no address, of a kind of database that is not read, or of a file that is not there.
    """
    try:
        address = make_url(url)
        backend = address.get_backend_name()
    except ArgumentError as error:
        raise PlantAddressError("it is not an address of a database.") from error
    if backend == "sqlite":
        engine = _sqlite(address, timeout_seconds, busy_seconds)
    elif backend == "postgresql":
        engine = _postgresql(address, timeout_seconds)
    else:
        raise PlantAddressError(f'"{backend}" is not read.')
    return Connection(name=address.render_as_string(hide_password=True), engine=engine)


def _sqlite(address: URL, timeout_seconds: float, busy_seconds: float) -> Engine:
    name = address.database or ""
    file = Path(name.removeprefix("file:").partition("?")[0])
    if not name or name == ":memory:" or not file.is_file():
        raise PlantAddressError(f'there is no SQLite file "{file}".')
    path = quote(str(file.resolve()))
    engine = create_engine(
        URL.create("sqlite+pysqlite", database=f"file:{path}", query={"mode": "ro", "uri": "true"}),
        poolclass=NullPool,
    )

    @event.listens_for(engine, "connect")
    def _only_read(session: Any, _record: object) -> None:
        session.execute("PRAGMA query_only = ON")
        session.execute("PRAGMA trusted_schema = OFF")
        session.execute(f"PRAGMA busy_timeout = {int(busy_seconds * 1000)}")
        ends = time.monotonic() + timeout_seconds
        session.set_progress_handler(lambda: int(time.monotonic() > ends), 100_000)

    return engine


def _postgresql(address: URL, timeout_seconds: float) -> Engine:
    limit = int(timeout_seconds * 1000)
    options = (
        f"-c default_transaction_read_only=on -c statement_timeout={limit} -c timezone=UTC "
        f"-c idle_in_transaction_session_timeout={limit}"
    )
    given = address.query.get("options", "")
    engine = create_engine(
        address.set(drivername="postgresql+psycopg"),
        connect_args={
            "options": f"{given} {options}".strip(),
            "connect_timeout": 10,
            "application_name": "recon reads the plant",
        },
        pool_size=1,
        max_overflow=3,
        pool_recycle=300,
        isolation_level="REPEATABLE READ",
    )

    @event.listens_for(engine, "handle_error")
    def _close(context: ExceptionContext) -> None:
        # Of a session that broke off, SQLAlchemy leaves the cursor open.
        broken = context.execution_context
        if context.is_disconnect and broken is not None and broken.cursor is not None:
            with suppress(Exception):
                broken.cursor.close()

    return engine


def _driver_error(error: BaseException) -> BaseException:
    found = error.orig if isinstance(error, DBAPIError) else None
    return error if found is None else found


def _said(error: BaseException) -> str:
    """Give the database's own words, on one line."""
    said = " ".join(str(_driver_error(error)).split()).rstrip(".")
    return "it took longer than the time limit" if said == "interrupted" else said
