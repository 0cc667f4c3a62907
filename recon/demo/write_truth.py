"""Writes what is true of a simulation to a file of its own, which the service never opens."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import closing
from datetime import timedelta
from pathlib import Path
from typing import TYPE_CHECKING

from recon.demo.shapes import QUANTITIES

if TYPE_CHECKING:
    from recon.demo.simulate import Simulation

TABLES = """
CREATE TABLE setting (name TEXT PRIMARY KEY, value TEXT NOT NULL);
CREATE TABLE flow (day TEXT, stream TEXT, quantity TEXT, amount REAL,
    PRIMARY KEY (day, stream, quantity));
CREATE TABLE stock (day TEXT, place TEXT, quantity TEXT, amount REAL,
    PRIMARY KEY (day, place, quantity));
CREATE TABLE lost (day TEXT, place TEXT, quantity TEXT, amount REAL,
    PRIMARY KEY (day, place, quantity));
CREATE TABLE shared_error (source TEXT, first_day TEXT, value REAL,
    PRIMARY KEY (source, first_day));
CREATE TABLE fault (name TEXT PRIMARY KEY, kind TEXT, tag TEXT, other TEXT, first_day TEXT,
    hour REAL, hours REAL, size REAL, unit TEXT, what TEXT);
"""


def write_truth(simulation: Simulation, path: Path) -> None:
    """
    Write true amounts, stocks at the cuts, shared errors and planted faults.

    Parameters
    ----------
    simulation : Simulation
    path : Path
        A SQLite file that is not there yet. Stocks stand on the day that they open; the day after
        the last closes it. Amounts are tonnes.

    Raises
    ------
    FileExistsError
        Something is there.
    """
    if path.exists():
        raise FileExistsError(f"{path} exists already; name a new file for the truth.")
    with closing(sqlite3.connect(path)) as database, database:
        database.executescript(TABLES)
        database.executemany("INSERT INTO setting VALUES (?, ?)", _settings(simulation))
        database.executemany("INSERT INTO flow VALUES (?, ?, ?, ?)", _flows(simulation))
        database.executemany("INSERT INTO stock VALUES (?, ?, ?, ?)", _stocks(simulation))
        database.executemany("INSERT INTO lost VALUES (?, ?, ?, ?)", _lost(simulation))
        database.executemany("INSERT INTO shared_error VALUES (?, ?, ?)", _shared(simulation))
        database.executemany(
            "INSERT INTO fault VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?)", _faults(simulation)
        )


def _settings(simulation: Simulation) -> Iterator[tuple[str, str]]:
    yield "site", simulation.site.name
    yield "seed", str(simulation.seed)
    yield "interval minutes", str(simulation.interval)
    yield "days", str(len(simulation.truth.grid.days))


def _flows(simulation: Simulation) -> Iterator[tuple[str, str, str, float]]:
    truth = simulation.truth
    for stream in truth.site.streams:
        amounts = truth.amounts(stream.name)
        for q in stream.carries:
            for d, day in enumerate(truth.grid.days):
                yield day.isoformat(), stream.name, q, float(amounts[d, QUANTITIES.index(q)])


def _stocks(simulation: Simulation) -> Iterator[tuple[str, str, str, float]]:
    truth = simulation.truth
    days = [*truth.grid.days, truth.grid.days[-1] + timedelta(days=1)]
    for node in truth.site.nodes:
        if node.stock:
            held = truth.at_cuts(node.name)
            for q in node.conserves:
                for d, day in enumerate(days):
                    yield day.isoformat(), node.name, q, float(held[d, QUANTITIES.index(q)])


def _lost(simulation: Simulation) -> Iterator[tuple[str, str, str, float]]:
    truth = simulation.truth
    for place in truth.lost:
        lost = truth.lost_by_day(place)
        for n, q in enumerate(QUANTITIES):
            for d, day in enumerate(truth.grid.days):
                yield day.isoformat(), place, q, float(lost[d, n])


def _shared(simulation: Simulation) -> Iterator[tuple[str, str, float]]:
    days = simulation.truth.grid.days
    for draw in simulation.offsets.draws:
        yield draw.source, days[draw.first].isoformat(), draw.value


def _faults(simulation: Simulation) -> Iterator[tuple[object, ...]]:
    days = simulation.truth.grid.days
    for f in simulation.faults:
        if f.day < len(days):
            first = days[f.day].isoformat()
            yield f.name, f.kind, f.tag, f.other, first, f.hour, f.hours, f.size, f.unit, f.text
