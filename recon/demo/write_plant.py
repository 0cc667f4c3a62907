"""Writes the invented plant's own database: SQLite by default, PostgreSQL by its URL."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from datetime import datetime
from typing import TYPE_CHECKING, Any

import numpy as np
from sqlalchemy import Connection, Engine, create_engine, text
from sqlalchemy.engine import make_url

from recon.demo.clock import micros
from recon.ingest.rows import Record, RowKind, Series

if TYPE_CHECKING:
    from recon.demo.simulate import Simulation

Row = tuple[object, ...]

TABLES = """
CREATE TABLE reading (
    tag TEXT NOT NULL, at {time} NOT NULL, value {number}, quality SMALLINT NOT NULL,
    known_at {time} NOT NULL, PRIMARY KEY (tag, at, known_at)){options};
CREATE TABLE laboratory (
    sample TEXT NOT NULL, point TEXT NOT NULL, analyte TEXT NOT NULL, taken_from {time} NOT NULL,
    taken_to {time} NOT NULL, reported_at {time} NOT NULL, value {number}, unit TEXT NOT NULL,
    stage TEXT NOT NULL, lot TEXT NOT NULL, method TEXT NOT NULL, laboratory TEXT NOT NULL);
CREATE TABLE ticket (
    number TEXT NOT NULL, scale TEXT NOT NULL, item TEXT NOT NULL, weighed_at {time} NOT NULL,
    entered_at {time} NOT NULL, value {number}, unit TEXT NOT NULL, stage TEXT NOT NULL,
    lot TEXT NOT NULL, carrier TEXT NOT NULL);
CREATE TABLE survey (
    number TEXT NOT NULL, place TEXT NOT NULL, item TEXT NOT NULL, surveyed_at {time} NOT NULL,
    reported_at {time} NOT NULL, value {number}, unit TEXT NOT NULL, stage TEXT NOT NULL,
    surveyor TEXT NOT NULL);
CREATE TABLE plant_event (
    number TEXT NOT NULL, tag TEXT NOT NULL, item TEXT NOT NULL, began_at {time} NOT NULL,
    ended_at {time} NOT NULL, logged_at {time} NOT NULL, value {number}, unit TEXT NOT NULL,
    as_found TEXT NOT NULL, as_left TEXT NOT NULL, remark TEXT NOT NULL)
"""
"""Tables of the invented site; ``sql/queries`` maps them to the column contract."""

INDEXES = """
CREATE INDEX laboratory_taken ON laboratory (taken_from);
CREATE INDEX ticket_weighed ON ticket (weighed_at);
CREATE INDEX survey_made ON survey (surveyed_at);
CREATE INDEX event_began ON plant_event (began_at)
"""
SQLITE = {"time": "INTEGER", "number": "REAL", "options": " WITHOUT ROWID"}
POSTGRESQL = {"time": "TIMESTAMPTZ", "number": "DOUBLE PRECISION", "options": ""}
COLUMNS = {
    "reading": 5,
    "laboratory": 12,
    "ticket": 10,
    "survey": 9,
    "plant_event": 11,
}


def write_plant(simulation: Simulation, url: str) -> None:
    """
    Write readings and papers into an empty plant database; the truth is not among them.

    Parameters
    ----------
    simulation : Simulation
    url : str
        SQLAlchemy URL, for example ``sqlite:///plant.db`` or ``postgresql+psycopg://...``. The
        five tables must not be there yet.

    Raises
    ------
    ValueError
        The URL is of another database.
    """
    kind = make_url(url).get_backend_name()
    if kind not in ("sqlite", "postgresql"):
        raise ValueError(f"url: a database of kind sqlite or postgresql is expected, found {kind}.")
    engine = create_engine(url)
    try:
        _fill(engine, simulation, kind)
    finally:
        engine.dispose()


def _fill(engine: Engine, simulation: Simulation, kind: str) -> None:
    types = SQLITE if kind == "sqlite" else POSTGRESQL
    insert = _insert if kind == "sqlite" else _copy
    with engine.begin() as connection:
        if kind == "sqlite":  # its driver would leave the tables outside the transaction
            connection.exec_driver_sql("BEGIN")
        _execute(connection, TABLES.format(**types))
        for series in simulation.series:
            insert(connection, "reading", _readings(series))
        for table, rows in _papers(simulation.records).items():
            insert(connection, table, iter(rows))
        _execute(connection, INDEXES)


def _execute(connection: Connection, script: str) -> None:
    for statement in script.split(";"):
        connection.execute(text(statement))


def _readings(series: Series) -> Iterator[Row]:
    """Give rows in time order; a value the source has not is NULL."""
    missing = np.isnan(series.value)
    values: Sequence[float | None] = [
        None if gone else value
        for value, gone in zip(series.value.tolist(), missing.tolist(), strict=True)
    ]
    yield from zip(
        [series.tag] * len(values),
        series.at.tolist(),
        values,
        series.quality.tolist(),
        series.known_at.tolist(),
        strict=True,
    )


def _papers(records: Sequence[Record]) -> dict[str, list[Row]]:
    rows: dict[str, list[Row]] = {"laboratory": [], "ticket": [], "survey": [], "plant_event": []}
    for r in records:
        extra = dict(r.extra)
        first, last, known = (micros(t) for t in (r.true_from, r.true_to, r.known_at))
        head: Row = (r.document, r.subject, r.item)
        if r.kind is RowKind.ASSAY:
            tail: Row = (r.stage, r.lot, extra["method"], extra["laboratory"])
            rows["laboratory"].append((*head, first, last, known, r.value, r.unit, *tail))
        elif r.kind is RowKind.TICKET:
            tail = (r.stage, r.lot, extra["carrier"])
            rows["ticket"].append((*head, first, known, r.value, r.unit, *tail))
        elif r.kind is RowKind.SURVEY:
            tail = (r.stage, extra["surveyor"])
            rows["survey"].append((*head, first, known, r.value, r.unit, *tail))
        else:
            tail = (extra["as_found"], extra["as_left"], extra["remark"])
            rows["plant_event"].append((*head, first, last, known, r.value, r.unit, *tail))
    return rows


def _insert(connection: Connection, table: str, rows: Iterator[Row]) -> None:
    """Insert by the driver itself: the statement layer would cost more than the rows."""
    marks = ", ".join("?" * COLUMNS[table])
    driver: Any = connection.connection.driver_connection
    driver.executemany(f"INSERT INTO {table} VALUES ({marks})", rows)  # noqa: S608


def _copy(connection: Connection, table: str, rows: Iterator[Row]) -> None:
    """Copy in, times as text with their zone."""
    driver: Any = connection.connection.driver_connection
    times = _TIMES[table]
    with driver.cursor() as cursor, cursor.copy(f"COPY {table} FROM STDIN") as copy:
        for row in rows:
            copy.write_row([_zoned(v) if n in times else v for n, v in enumerate(row)])


_TIMES = {
    "reading": {1, 4},
    "laboratory": {3, 4, 5},
    "ticket": {3, 4},
    "survey": {3, 4},
    "plant_event": {3, 4, 5},
}
"""Places of columns that hold times."""


def _zoned(at: object) -> str:
    assert isinstance(at, int)
    whole, rest = divmod(at, 1_000_000)
    stamp = np.datetime64(whole, "s").astype(datetime)
    return f"{stamp:%Y-%m-%d %H:%M:%S}.{rest:06d}+00"
