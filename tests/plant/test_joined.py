"""Each kind of row comes from where the site file says."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from recon.declare.site import Site, SourceQuery
from recon.declare.site_file import read_site
from recon.errors import FaultyFileError
from recon.ingest.rows import RowKind
from recon.plant.joined import open_plant
from recon.plant.queries import faults_of, query_of
from tests.plant.tables import NOW, QUERIES, at, make
from tests.plant.test_sheets import HEAD, ROW

CONFIG = QUERIES.parents[1] / "config"


def site(*queries: SourceQuery) -> Site:
    return replace(read_site(CONFIG / "starting-point.toml").site, queries=queries)


def test_readings_from_a_database_and_assays_from_a_sheet(tmp_path: Path) -> None:
    make(f"sqlite:///{tmp_path / 'plant.db'}", reading=[("A", at(2), 1.0, 0, at(2))])
    (tmp_path / "lab.csv").write_text(f"{HEAD}\n{ROW}\n", encoding="utf-8")
    plant = open_plant(
        site(
            SourceQuery(kind="readings", query="readings.sql"),
            SourceQuery(kind="assays", sheet="lab.csv"),
        ),
        url=f"sqlite:///{tmp_path / 'plant.db'}",
        folder=tmp_path,
        queries=[tmp_path / "sql", QUERIES],
        now=lambda: NOW,
    )
    assert [s.value.tolist() for s in plant.readings(["A"], at(2), at(3))] == [[1.0]]
    assert [r.document for r in plant.records(RowKind.ASSAY, at(1), at(4))] == ["S1"]
    assert list(plant.records(RowKind.TICKET, at(1), at(4))) == []
    assert "FROM reading" in plant.query(RowKind.READING)
    assert plant.query(RowKind.ASSAY).startswith("lab.csv ")
    assert plant.query(RowKind.TICKET) == ""
    assert plant.noted() == ()
    plant.close()


def test_the_sites_own_query_goes_before_the_example(tmp_path: Path) -> None:
    own = "SELECT tag, at, value * 2 AS value, quality, known_at FROM reading WHERE tag = :tag"
    (tmp_path / "readings.sql").write_text(own + " AND at >= :since AND at < :until")
    make(f"sqlite:///{tmp_path / 'plant.db'}", reading=[("A", at(2), 1.0, 0, at(2))])
    plant = open_plant(
        site(SourceQuery(kind="readings", query="readings.sql")),
        url=f"sqlite:///{tmp_path / 'plant.db'}",
        folder=tmp_path,
        queries=[tmp_path, QUERIES],
        now=lambda: NOW,
    )
    assert [s.value.tolist() for s in plant.readings(["A"], at(2), at(3))] == [[2.0]]


def test_all_faults_of_the_queries_are_listed_at_once(tmp_path: Path) -> None:
    (tmp_path / "readings.sql").write_text("DELETE FROM reading")
    with pytest.raises(FaultyFileError) as caught:
        open_plant(
            site(
                SourceQuery(kind="readings", query="readings.sql"),
                SourceQuery(kind="assays", query="laboratory.sql"),
            ),
            url=None,
            folder=tmp_path,
            queries=[tmp_path],
        )
    said = str(caught.value)
    for fault in (
        "is no single SELECT",
        "does not use :since",
        "does not use :until",
        "does not use :tag",
        "laboratory.sql (assay rows): no such file",
    ):
        assert fault in said


def test_queries_without_a_database_are_said_so(tmp_path: Path) -> None:
    with pytest.raises(FaultyFileError, match="no plant database is named"):
        open_plant(
            site(SourceQuery(kind="events", query="events.sql")),
            url=None,
            folder=tmp_path,
            queries=[QUERIES],
        )


WINDOW = "at >= :since AND at < :until"


@pytest.mark.parametrize(
    ("sql", "expected"),
    [
        (f"SELECT * FROM a WHERE {WINDOW}; DROP TABLE a", "is no single SELECT"),
        (f"-- reads\n/* all */ SELECT * FROM a WHERE {WINDOW};", None),
        (f"WITH b AS (SELECT 1) SELECT x::text FROM a WHERE {WINDOW}", None),
        (f"SELECT ':tag; x' FROM a WHERE {WINDOW}", None),
        (f"SELECT * FROM a WHERE {WINDOW} AND tag = :tagg", "unknown parameter :tagg"),
        ("SELECT * FROM a WHERE at >= :since_us AND at < :until_text", None),
    ],
)
def test_a_query_is_judged_before_it_is_asked(sql: str, expected: str | None) -> None:
    faults = faults_of(query_of(RowKind.EVENT, sql, "x.sql"))
    assert [f for f in faults if expected is None or expected not in f] == []
    assert bool(faults) is (expected is not None)
