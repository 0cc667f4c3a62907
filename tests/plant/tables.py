"""Plant databases for tests: the tables of the invented site, on either database."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Any

from sqlalchemy import create_engine, text

from recon.ingest.rows import RowKind
from recon.plant.connection import Connection, connect
from recon.plant.instants import microseconds
from recon.plant.queries import Query, query_of
from recon.plant.sql import SqlPlant

QUERIES = Path(__file__).resolve().parents[2] / "sql" / "queries"
FILES = {
    RowKind.READING: "readings.sql",
    RowKind.ASSAY: "assays.sql",
    RowKind.TICKET: "tickets.sql",
    RowKind.SURVEY: "surveys.sql",
    RowKind.EVENT: "events.sql",
}
COLUMNS = {
    "reading": "tag TEXT, at TIME, value REAL, quality INTEGER, known_at TIME",
    "laboratory": "sample TEXT, point TEXT, analyte TEXT, taken_from TIME, taken_to TIME, "
    "reported_at TIME, value REAL, unit TEXT, stage TEXT, lot TEXT, method TEXT, laboratory TEXT",
    "ticket": "number TEXT, scale TEXT, item TEXT, weighed_at TIME, entered_at TIME, value REAL, "
    "unit TEXT, stage TEXT, lot TEXT, carrier TEXT",
    "survey": "number TEXT, place TEXT, item TEXT, surveyed_at TIME, reported_at TIME, value REAL, "
    "unit TEXT, stage TEXT, surveyor TEXT",
    "plant_event": "number TEXT, tag TEXT, item TEXT, began_at TIME, ended_at TIME, "
    "logged_at TIME, value REAL, unit TEXT, as_found REAL, as_left REAL, remark TEXT",
}
OPENED: list[Connection] = []
NOW = datetime(2026, 2, 1, 12, tzinfo=UTC)


def at(day: int, hour: int = 0, minute: int = 0) -> datetime:
    """Give an instant of January 2026, counted from its first day."""
    return datetime(2026, 1, 1, tzinfo=UTC) + timedelta(days=day - 1, hours=hour, minutes=minute)


def make(url: str, **rows: Sequence[Sequence[Any]]) -> None:
    """Make all tables and fill some, tables by keyword."""
    engine = create_engine(url)
    sqlite = engine.dialect.name == "sqlite"
    with engine.begin() as session:
        for table, columns in COLUMNS.items():
            kinds = ("INTEGER", "REAL") if sqlite else ("timestamptz", "double precision")
            columns = columns.replace(" TIME", f" {kinds[0]}").replace(" REAL", f" {kinds[1]}")
            session.execute(text(f"DROP TABLE IF EXISTS {table}"))
            session.execute(text(f"CREATE TABLE {table} ({columns})"))
        for table, given in rows.items():
            names = [c.split()[0] for c in COLUMNS[table].split(", ")]
            values = ", ".join(f":{name}" for name in names)
            for row in given:
                stored = [microseconds(v) if sqlite and isinstance(v, datetime) else v for v in row]
                session.execute(
                    text(f"INSERT INTO {table} VALUES ({values})"),
                    dict(zip(names, stored, strict=True)),
                )
    engine.dispose()


def queries(**changed: str) -> dict[RowKind, Query]:
    """Give the example queries, some with another text, by the kind's value."""
    return {
        kind: query_of(kind, changed.get(kind.value) or (QUERIES / name).read_text(), name)
        for kind, name in FILES.items()
    }


def opened(url: str, **limits: float) -> Connection:
    """Connect; the fixture of this room lets go after the test."""
    connection = connect(url, **limits)
    OPENED.append(connection)
    return connection


def plant(url: str, **changed: str) -> SqlPlant:
    """Open a plant database with the example queries, some changed."""
    return SqlPlant(opened(url), queries(**changed), now=lambda: NOW)
