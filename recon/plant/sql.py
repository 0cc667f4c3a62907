"""The plant's database as a source: the site's own queries, a window at a time.

Readings are asked tag by tag and days by days, so memory holds one window of one tag. Each window
is read whole before any of it is handed on: a database that dies in between is asked again, and
nothing comes twice or half.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import closing
from datetime import UTC, datetime, timedelta
from itertools import chain

import numpy as np

from recon.errors import FaultyFileError
from recon.findings import Finding
from recon.ingest.rows import Record, RowKind, Series
from recon.plant.connection import Connection
from recon.plant.contract import (
    NAMES,
    Columns,
    Faults,
    Window,
    columns_of,
    missing_columns,
    records_of,
)
from recon.plant.instants import microseconds, text_of
from recon.plant.one_instant import in_time_order, joined
from recon.plant.queries import Query

WINDOW = timedelta(days=7)
BEFORE = tuple(timedelta(hours=h) for h in (1, 24, 7 * 24, 35 * 24))
"""How far back the value in force at the start is looked for, step by step."""


class SqlPlant:
    """
    Reads one plant database; implements ``recon.app.ports.Plant``.

    Parameters
    ----------
    connection : Connection
    queries : mapping
        Of each kind that comes from this database.
    now : callable
        The clock, aware; later rows are refused as future.
    """

    def __init__(
        self,
        connection: Connection,
        queries: Mapping[RowKind, Query],
        *,
        now: Callable[[], datetime] = lambda: datetime.now(UTC),
    ) -> None:
        self._connection = connection
        self._queries = dict(queries)
        self._now = now
        self._noted: list[Finding] = []

    def readings(self, tags: Sequence[str], since: datetime, until: datetime) -> Iterator[Series]:
        """
        Yield each tag's readings with ``since <= at < until``, and the one in force at ``since``.

        A tag comes in pieces of at most seven days, in time order; one without rows as one empty
        piece. The reading in force is looked for up to five weeks back.

        Raises
        ------
        PlantUnreachableError, PlantQueryError, ContractError
        """
        for tag in tags:
            before = self._in_force(tag, since)
            given = False
            start = since
            while start < until:
                end = min(start + WINDOW, until)
                columns = self._window(tag, start, end)
                if before is not None:
                    columns, before = joined([before, columns]), None
                if len(columns.at):
                    given = True
                    yield _series(tag, columns)
                start = end
            if not given:
                yield _series(tag, joined([] if before is None else [before]))

    def records(self, kind: RowKind, since: datetime, until: datetime) -> Iterator[Record]:
        """
        Yield records whose span touches ``[since, until)``, every stage, in natural-key order.

        Raises
        ------
        PlantUnreachableError, PlantQueryError, ContractError
        """
        query = self._query(kind)
        span = f"{since.isoformat()} to {until.isoformat()}"

        def work() -> list[Record]:
            faults = Faults(source=f"{query.path}, {span}")
            window = Window(since=since, until=until, now=self._now())
            with closing(self._connection.ask(query, self._parameters(since, until))) as batches:
                columns, first = next(batches)
                if missing_columns(kind, columns, faults):
                    faults.refuse()
                rows = chain(first, (row for _, more in batches for row in more))
                records = records_of(kind, columns, rows, window, faults, _row)
            for record in records:
                if record.true_from >= until or record.true_to < since:
                    faults.add(
                        "true_from, true_to",
                        "outside the window asked for; does the query use :since and :until",
                        record.true_from,
                        record.natural_key,
                    )
            faults.refuse()
            return records

        yield from self._connection.again(work, query)

    def query(self, kind: RowKind) -> str:
        """Give the SQL text that is asked for one kind of row."""
        return self._query(kind).sql

    def noted(self) -> tuple[Finding, ...]:
        """Give what was found in passing since this was last asked: revisions, missing values."""
        noted, self._noted = tuple(self._noted), []
        return noted

    def close(self) -> None:
        """Let go of the database; reading again opens it again."""
        self._connection.engine.dispose()

    def _query(self, kind: RowKind) -> Query:
        try:
            return self._queries[kind]
        except KeyError:
            raise FaultyFileError(
                "site file", [f'query: no source is declared for "{NAMES[kind]}".']
            ) from None

    def _in_force(self, tag: str, since: datetime) -> Columns | None:
        """Give the last reading before an instant, from ever wider windows."""
        end = since
        for back in BEFORE:
            columns = self._window(tag, since - back, end)
            if len(columns.at):
                return Columns(
                    at=columns.at[-1:],
                    value=columns.value[-1:],
                    quality=columns.quality[-1:],
                    known_at=columns.known_at[-1:],
                )
            end = since - back
        return None

    def _window(self, tag: str, since: datetime, until: datetime) -> Columns:
        query = self._query(RowKind.READING)
        source = f"{query.path}, tag {tag}, {since.isoformat()} to {until.isoformat()}"

        def work() -> Columns:
            faults = Faults(source=source)
            parts: list[Columns] = []
            seen = 0
            window = Window(since=since, until=until, now=self._now())
            with closing(
                self._connection.ask(query, self._parameters(since, until, tag))
            ) as batches:
                for columns, rows in batches:
                    if missing_columns(RowKind.READING, columns, faults):
                        break
                    if rows:
                        place = _numbered(seen)
                        parts.append(columns_of(tag, columns, rows, window, faults, place))
                        seen += len(rows)
            faults.refuse()
            found = in_time_order(joined(parts), tag, faults, self._noted)
            faults.refuse()
            return found

        return self._connection.again(work, query)

    def _parameters(
        self, since: datetime, until: datetime, tag: str | None = None
    ) -> dict[str, object]:
        given: dict[str, object] = {} if tag is None else {"tag": tag}
        for name, when in (("since", since), ("until", until)):
            given[f"{name}_us"] = microseconds(when)
            given[f"{name}_text"] = text_of(when)
            given[name] = microseconds(when) if self._connection.sqlite else when.astimezone(UTC)
        return given


def _series(tag: str, columns: Columns) -> Series:
    return Series(
        tag=tag,
        at=columns.at,
        value=columns.value,
        quality=columns.quality,
        known_at=np.ascontiguousarray(columns.known_at),
    )


def _row(n: int, _column: str) -> str:
    return f"row {n + 1}"


def _numbered(seen: int) -> Callable[[int, str], str]:
    return lambda n, _column: f"row {seen + n + 1}"
