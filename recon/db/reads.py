"""Reads runs back: heads, where pointers stand, and results, checked before they are shown."""

from __future__ import annotations

import json
from collections.abc import Iterable
from datetime import date
from typing import Any, cast

from sqlalchemy import ColumnElement, Connection, Row, select

from recon.app.book_types import RunHead, RunKind, Standing
from recon.app.period import PeriodResult
from recon.audit.digest import result_digest, table_digest
from recon.db.rows import RESULT_TABLES, result_of, shape
from recon.db.rows import Row as Values
from recon.db.tables import BOOK, CURRENT_RUN, RUN
from recon.errors import AlteredRecordError

Pairs = tuple[tuple[str, str], ...]


def published(
    connection: Connection, site: str, month: date, through: date, data_digest: str
) -> RunHead | None:
    """Give the published run of exactly these inputs, current or not."""
    return _one(
        connection,
        RUN.c.site == site,
        RUN.c.month == month,
        RUN.c.through_day == through,
        RUN.c.data_digest == data_digest,
        RUN.c.kind == "published",
    )


def current(
    connection: Connection, site: str, month: date, through: date | None = None
) -> RunHead | None:
    """Give the run that speaks for a month through a day, or through its latest day."""
    asked = (
        select(CURRENT_RUN.c.run)
        .where(CURRENT_RUN.c.site == site, CURRENT_RUN.c.month == month)
        .order_by(CURRENT_RUN.c.through_day.desc())
        .limit(1)
    )
    if through is not None:
        asked = asked.where(CURRENT_RUN.c.through_day == through)
    run = connection.execute(asked).scalar()
    return None if run is None else _one(connection, RUN.c.site == site, RUN.c.run == run)


def standing(connection: Connection, site: str) -> tuple[Standing, ...]:
    """List where every pointer stands, by month and day."""
    asked = (
        select(CURRENT_RUN, RUN.c.data_digest)
        .join(RUN, (RUN.c.site == CURRENT_RUN.c.site) & (RUN.c.run == CURRENT_RUN.c.run))
        .where(CURRENT_RUN.c.site == site)
        .order_by(CURRENT_RUN.c.month, CURRENT_RUN.c.through_day)
    )
    return tuple(
        Standing(
            month=row.month,
            through=row.through_day,
            run=row.run,
            data_digest=row.data_digest,
            knowledge_cut=row.knowledge_cut,
            moved_at=row.moved_at,
        )
        for row in connection.execute(asked)
    )


def runs(connection: Connection, site: str, month: date | None = None) -> tuple[RunHead, ...]:
    """List runs in the order they were published."""
    asked = select(RUN).where(RUN.c.site == site).order_by(RUN.c.run)
    if month is not None:
        asked = asked.where(RUN.c.month == month)
    return tuple(head_of(row) for row in connection.execute(asked))


def result(connection: Connection, site: str, run: int) -> PeriodResult:
    """
    Give all rows of a run, each table checked whole.

    Raises
    ------
    AlteredRecordError
        There is no such run, or a table is not what its digest says: no number is given.
    """
    row = run_row(connection, site, run)
    rows = {table.name: checked_table(connection, row, table.name) for table in RESULT_TABLES}
    return result_of(rows, summary=_pairs(row.summary), method=_pairs(row.method))


def run_row(connection: Connection, site: str, run: int) -> Row[Any]:
    """Give the row of a run whose list of table digests is what its result digest says."""
    row = connection.execute(select(RUN).where(RUN.c.site == site, RUN.c.run == run)).first()
    if row is None:
        raise AlteredRecordError(f"site {site}, run {run}", "its record", "no such run")
    made = result_digest(json.loads(row.table_digests))
    if made != row.result_digest:
        raise AlteredRecordError(
            f"site {site}, run {run}", f"result digest {row.result_digest[:16]}", made[:16]
        )
    return row


def checked_table(connection: Connection, run: Row[Any], name: str) -> list[Values]:
    """
    Read one result table of a run whole, sorted by natural key, without site and run.

    Raises
    ------
    AlteredRecordError
        It is not what its digest says.
    """
    rows = stored_rows(connection, run.site, run.run, name)
    expected = json.loads(run.table_digests)[name]
    try:
        found = table_digest(name, shape(BOOK.tables[name]).columns, rows)
    except (ValueError, TypeError) as error:
        found = str(error)
    if found != expected:
        raise AlteredRecordError(
            f"site {run.site}, run {run.run}, table {name}",
            f"digest {expected[:16]}",
            f"{found[:16]} ({len(rows)} rows)",
        )
    return rows


def stored_rows(connection: Connection, site: str, run: int, name: str) -> list[Values]:
    """Read one result table of a run as it stands, sorted by natural key."""
    table = BOOK.tables[name]
    form = shape(table)
    columns: Iterable[ColumnElement[Any]] = [table.c[column] for column in form.columns]
    asked = select(*columns).where(table.c.site == site, table.c.run == run)
    try:
        rows = [tuple(row) for row in connection.execute(asked)]
    except ValueError as error:  # a stored day or time that is none
        raise AlteredRecordError(
            f"site {site}, run {run}, table {name}", "rows as written", str(error)
        ) from error
    rows.sort(key=lambda row: tuple([row[i] for i in form.key]))
    return rows


def head_of(row: Row[Any]) -> RunHead:
    """Make a run's head from its row."""
    return RunHead(
        site=row.site,
        run=row.run,
        month=row.month,
        through=row.through_day,
        kind=cast(RunKind, row.kind),
        revision=row.revision,
        data_digest=row.data_digest,
        knowledge_cut=row.knowledge_cut,
        manifest=row.manifest,
        site_versions=tuple(json.loads(row.site_versions)),
        method=_pairs(row.method),
        summary=_pairs(row.summary),
        result_digest=row.result_digest,
        published_at=row.published_at,
    )


def _one(connection: Connection, *where: ColumnElement[bool]) -> RunHead | None:
    row = connection.execute(select(RUN).where(*where)).first()
    return None if row is None else head_of(row)


def _pairs(text: str) -> Pairs:
    return tuple((name, value) for name, value in json.loads(text))
