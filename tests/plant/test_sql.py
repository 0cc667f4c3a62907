"""Rows come from a plant database whole, in order, and never by writing to it."""

from __future__ import annotations

import re
import sqlite3
from collections.abc import Callable
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from sqlalchemy import create_engine, text

from recon.errors import (
    ContractError,
    FaultyFileError,
    PlantAddressError,
    PlantQueryError,
    PlantUnreachableError,
)
from recon.ingest.rows import Quality, RowKind, Series
from recon.plant.connection import WAITS, Connection, connect
from recon.plant.instants import microseconds
from recon.plant.sql import SqlPlant
from tests.plant.tables import NOW, at, make, opened, plant, queries
from tests.postgres import Server

READ = "SELECT tag, at, value, quality, known_at FROM reading WHERE tag = :tag AND at >= :since"


def values(series: list[Series]) -> list[float]:
    return [float(v) for s in series for v in s.value]


def test_readings_of_a_window_come_in_time_order_with_the_one_in_force(plant_url: str) -> None:
    rows = [
        ("A", at(2, 3), 3.0, 1, at(2, 4)),
        ("A", at(2, 1), 1.0, 0, at(2, 4)),
        ("A", at(1, 20), 0.5, 2, at(1, 21)),
        ("A", at(1, 10), 0.1, 0, at(1, 11)),
        ("A", at(3), 9.0, 0, at(3)),
        ("B", at(2, 2), 7.0, 0, at(2, 2)),
    ]
    make(plant_url, reading=rows)
    series = list(plant(plant_url).readings(["A", "B"], at(2), at(3)))
    assert [s.tag for s in series] == ["A", "B"]
    assert values(series) == [0.5, 1.0, 3.0, 7.0]
    assert series[0].at.tolist() == [microseconds(t) for t in (at(1, 20), at(2, 1), at(2, 3))]
    assert series[0].quality.tolist() == [Quality.BAD, Quality.GOOD, Quality.UNCERTAIN]
    assert series[0].known_at.tolist()[1] == microseconds(at(2, 4))
    assert series[0].value.dtype == np.dtype(np.float64)
    assert series[0].quality.dtype == np.dtype(np.int8)


def test_a_long_span_comes_in_pieces_that_neither_overlap_nor_leave_a_gap(
    plant_url: str,
) -> None:
    hours = [at(1) + timedelta(hours=h) for h in range(24 * 20)]
    make(plant_url, reading=[("A", t, float(n), 0, t) for n, t in enumerate(hours)])
    series = list(plant(plant_url).readings(["A"], at(1), at(21)))
    assert len(series) == 3
    assert values(series) == [float(n) for n in range(24 * 20)]


def test_a_value_in_force_is_found_five_weeks_back_and_no_further(plant_url: str) -> None:
    start = datetime(2026, 1, 1, tzinfo=UTC)
    near, far = start - timedelta(days=34), start - timedelta(days=36)
    make(plant_url, reading=[("NEAR", near, 1.0, 0, near), ("FAR", far, 2.0, 0, far)])
    near_series, far_series = plant(plant_url).readings(["NEAR", "FAR"], at(1), at(2))
    assert near_series.value.tolist() == [1.0]
    assert far_series.value.tolist() == []


def test_a_tag_without_rows_comes_as_one_empty_piece(plant_url: str) -> None:
    make(plant_url)
    series = list(plant(plant_url).readings(["A"], at(1), at(20)))
    assert [(s.tag, len(s.at)) for s in series] == [("A", 0)]


def test_a_missing_number_is_kept_as_missing_and_noted(plant_url: str) -> None:
    rows = [("A", at(2, h), v, 0, at(2, h)) for h, v in enumerate((1.0, None, 3.0))]
    make(plant_url, reading=rows)
    source = plant(plant_url)
    (series,) = source.readings(["A"], at(2), at(3))
    assert np.isnan(series.value).tolist() == [False, True, False]
    (finding,) = source.noted()
    assert "1 of 3 readings hold no number, first at 2026-01-02 01:00:00+00:00" in finding.text
    assert source.noted() == ()


def test_the_reading_known_last_counts_and_the_revision_is_noted(plant_url: str) -> None:
    rows = [("A", at(2), 1.0, 0, at(2)), ("A", at(2), 2.0, 0, at(2, 9))]
    make(plant_url, reading=rows)
    source = plant(plant_url)
    assert values(list(source.readings(["A"], at(2), at(3)))) == [2.0]
    (finding,) = source.noted()
    assert "1 reading was revised at the source" in finding.text
    assert "1 became 2" in finding.text


LAB = ("S1", "FEED", "Cu", at(2), at(2, 8), at(3), 0.84, "%", "final", "", "XRF", "site")


def test_records_keep_every_stage_and_further_columns(plant_url: str) -> None:
    shift = ("S1", "FEED", "Cu", at(2), at(2, 8), at(2, 9), 0.9, "%", "shift", "L7", None, "site")
    make(plant_url, laboratory=[LAB, shift])
    final, early = plant(plant_url).records(RowKind.ASSAY, at(1), at(4))
    assert (final.natural_key, final.value, final.stage) == ("S1|FEED|Cu|final", 0.84, "final")
    assert final.extra == (("laboratory", "site"), ("method", "XRF"))
    assert (final.true_from, final.true_to, final.known_at) == (at(2), at(2, 8), at(3))
    assert (early.lot, early.extra) == ("L7", (("laboratory", "site"),))


def test_all_kinds_of_record_come_by_the_example_queries(plant_url: str) -> None:
    make(
        plant_url,
        laboratory=[LAB],
        ticket=[("T1", "WB", "net", at(2), at(2), 24.5, "t", "final", "L1", "R-1")],
        survey=[("V1", "SHED", "volume", at(2), at(3), 900.0, "m3", "", "J")],
        plant_event=[
            ("E1", "WB", "calibration", at(2), at(2), at(2), None, "", 1.01, 1.0, "weights")
        ],
    )
    source = plant(plant_url)
    found = [next(source.records(kind, at(1), at(4))) for kind in list(RowKind)[1:]]
    assert [r.subject for r in found] == ["FEED", "WB", "SHED", "WB"]
    assert dict(found[3].extra) == {"as_found": "1.01", "as_left": "1.0", "remark": "weights"}
    assert found[3].value is None


def test_a_sample_whose_span_touches_the_window_is_given(plant_url: str) -> None:
    make(plant_url, laboratory=[LAB])
    source = plant(plant_url)
    assert len(list(source.records(RowKind.ASSAY, at(2, 7), at(4)))) == 1
    assert len(list(source.records(RowKind.ASSAY, at(1), at(2, 1)))) == 1
    assert list(source.records(RowKind.ASSAY, at(3), at(4))) == []


def contract_faults(work: Callable[[], object]) -> str:
    with pytest.raises(ContractError) as caught:
        work()
    return str(caught.value)


def test_every_fault_of_a_batch_is_listed_at_once(tmp_path: Path) -> None:
    url = f"sqlite:///{tmp_path / 'plant.db'}"
    make(url)
    rows: list[tuple[Any, ...]] = [
        ("A", "2026-01-02 06:00:00", 1.0, 0, "2026-01-02T06:00:00Z"),
        ("A", "2026-01-02T07:00:00Z", "n/a", 0, "2026-01-02T07:00:00Z"),
        ("A", "2026-01-02T08:00:00Z", 3.0, 7, "yesterday"),
    ]
    with sqlite3.connect(tmp_path / "plant.db") as session:
        session.executemany("INSERT INTO reading VALUES (?, ?, ?, ?, ?)", rows)
    session.close()
    query = "SELECT * FROM reading WHERE tag = :tag AND :since < :until"
    said = contract_faults(lambda: list(plant(url, reading=query).readings(["A"], at(2), at(3))))
    assert said.startswith("readings.sql, tag A, ")
    assert "4 faults, nothing of it is used." in said
    assert 'at: a time without zone or offset, "2026-01-02 06:00:00" (row 1).' in said
    assert 'value: text where a number is due, "n/a" (row 2).' in said
    assert "quality: 0 good, 1 uncertain or 2 bad is due, 7 (row 3)." in said
    assert 'known_at: text that is not ISO 8601, "yesterday" (row 3).' in said


def test_the_same_fault_of_many_rows_is_one_line(tmp_path: Path) -> None:
    url = f"sqlite:///{tmp_path / 'plant.db'}"
    rows = [("A", at(2) + timedelta(seconds=n), "x", 0, at(2)) for n in range(5000)]
    make(url, reading=rows)
    said = contract_faults(lambda: list(plant(url).readings(["A"], at(2), at(3))))
    assert said.count("\n") == 1
    assert "row 1, row 2, " in said
    assert "and 4,988 more" in said


@pytest.mark.parametrize(
    ("rows", "expected"),
    [
        ([("A", at(2), 1.0, 0, at(40))], "known_at: in the future"),
        (
            [("A", at(2), 1.0, 0, at(3)), ("A", at(2), 2.0, 0, at(3))],
            "two rows of one instant, known at the same time (2026-01-02 00:00:00+00:00: 1 and 2)",
        ),
        ([("A", at(2), float("inf"), 0, at(3))], "value: an infinite number, inf"),
    ],
)
def test_readings_that_cannot_be_right_are_refused(
    plant_url: str, rows: list[tuple[Any, ...]], expected: str
) -> None:
    make(plant_url, reading=rows)
    said = contract_faults(lambda: list(plant(plant_url).readings(["A"], at(2), at(3))))
    assert expected in said


@pytest.mark.parametrize(
    ("row", "expected"),
    [
        (("S|1", *LAB[1:]), 'document: holds "|", which parts the natural key'),
        (("", *LAB[1:]), "document: is empty (row 1)"),
        ((*LAB[:3], at(2, 9), *LAB[4:]), "true_to: before true_from"),
        ((*LAB[:5], at(40), *LAB[6:]), "known_at: in the future"),
        ((*LAB[:7], "", *LAB[8:]), "unit: is empty beside a value"),
        ((*LAB[:6], float("inf"), *LAB[7:]), "value: an infinite number"),
    ],
)
def test_records_that_cannot_be_right_are_refused(
    plant_url: str, row: tuple[Any, ...], expected: str
) -> None:
    make(plant_url, laboratory=[row])
    said = contract_faults(lambda: list(plant(plant_url).records(RowKind.ASSAY, at(1), at(4))))
    assert expected in said


def test_the_same_record_twice_is_refused_with_both_rows(plant_url: str) -> None:
    make(plant_url, laboratory=[LAB, LAB])
    said = contract_faults(lambda: list(plant(plant_url).records(RowKind.ASSAY, at(1), at(4))))
    assert 'the same key twice, "S1|FEED|Cu|final" (row 1 and row 2)' in said


def test_a_later_revision_of_a_record_comes_beside_the_first(plant_url: str) -> None:
    make(plant_url, laboratory=[LAB, (*LAB[:5], at(4), 0.85, *LAB[7:])])
    found = list(plant(plant_url).records(RowKind.ASSAY, at(1), at(5)))
    assert [r.value for r in found] == [0.84, 0.85]


@pytest.mark.database
def test_a_number_that_is_none_becomes_missing_and_is_kept_as_given(
    plant_server: str,
) -> None:
    make(plant_server, laboratory=[(*LAB[:6], float("nan"), *LAB[7:])])
    (record,) = plant(plant_server).records(RowKind.ASSAY, at(1), at(4))
    assert record.value is None
    assert ("value as given", "nan") in record.extra


def test_missing_columns_are_all_named_with_what_was_found(plant_url: str) -> None:
    make(plant_url)
    query = "SELECT tag AS name, at FROM reading WHERE tag = :tag AND at >= :since AND at < :until"
    source = plant(plant_url, reading=query)
    said = contract_faults(lambda: list(source.readings(["A"], at(2), at(3))))
    for column in ("tag", "value", "quality", "known_at"):
        assert f"{column}: this column is missing; found name, at." in said


def test_a_query_that_forgets_the_window_is_found_out(plant_url: str) -> None:
    make(plant_url, reading=[("A", at(9), 1.0, 0, at(9))])
    source = plant(plant_url, reading=READ)
    said = contract_faults(lambda: list(source.readings(["A"], at(2), at(3))))
    assert "outside the window asked for; does the query use :since and :until" in said


def test_times_are_taken_as_text_numbers_or_aware_timestamps(tmp_path: Path) -> None:
    url = f"sqlite:///{tmp_path / 'plant.db'}"
    make(url)
    times = [microseconds(at(2, 1)), "2026-01-02T02:00:00Z", "2026-01-02T00:00:00-03:00"]
    with sqlite3.connect(tmp_path / "plant.db") as session:
        for given in times:
            session.execute("INSERT INTO reading VALUES ('A', ?, 1.0, 0, ?)", (given, given))
    session.close()
    query = (
        "SELECT * FROM reading WHERE tag = :tag AND :since_us = :since AND "
        ":until_text = '2026-01-02T04:00:00.000000Z'"
    )
    (series,) = plant(url, reading=query).readings(["A"], at(2), at(2, 4))
    assert series.at.tolist() == [microseconds(at(2, h)) for h in (1, 2, 3)]
    assert series.known_at.tolist() == series.at.tolist()


@pytest.mark.parametrize("statement", ["DELETE FROM reading", "CREATE TABLE x (y INTEGER)"])
def test_the_session_cannot_write(plant_url: str, statement: str) -> None:
    make(plant_url, reading=[("A", at(2), 1.0, 0, at(2))])
    connection = opened(plant_url)
    with connection.engine.connect() as session, pytest.raises(Exception, match=r"read-?only"):
        session.execute(text(statement))
    writer = create_engine(plant_url)
    with writer.connect() as session:
        assert session.execute(text("SELECT count(*) FROM reading")).scalar() == 1
    writer.dispose()


def test_a_table_that_is_not_there_is_said_at_once(plant_url: str) -> None:
    make(plant_url)
    waited: list[float] = []
    connection = opened(plant_url)
    patient = Connection(name=connection.name, engine=connection.engine, sleep=waited.append)
    query = "SELECT * FROM readngs WHERE tag = :tag AND at >= :since AND at < :until"
    source = SqlPlant(patient, queries(reading=query), now=lambda: NOW)
    with pytest.raises(PlantQueryError, match="readngs"):
        list(source.readings(["A"], at(2), at(3)))
    assert waited == []


def test_a_statement_that_takes_too_long_is_ended(plant_url: str) -> None:
    make(plant_url, reading=[("A", at(2, 0, m), 1.0, 0, at(2)) for m in range(60)])
    endless = (
        "SELECT a.tag, a.at, a.value, a.quality, a.known_at FROM reading a, reading b, reading c, "
        "reading d, reading e WHERE a.tag = :tag AND a.at < :until AND a.at >= :since "
        "AND a.value + b.value + c.value + d.value + e.value < 0"
    )
    connection = opened(plant_url, timeout_seconds=0.3)
    source = SqlPlant(connection, queries(reading=endless), now=lambda: NOW)
    with pytest.raises(PlantQueryError, match=r"time limit|timeout"):
        list(source.readings(["A"], at(2), at(3)))


@pytest.mark.database
def test_a_session_that_the_server_ends_is_opened_again(plant_server: str) -> None:
    make(plant_server, reading=[("A", at(2), 1.0, 0, at(2))])
    waited: list[float] = []
    plain = opened(plant_server)
    source = SqlPlant(
        Connection(name=plain.name, engine=plain.engine, sleep=waited.append),
        queries(),
        now=lambda: NOW,
    )
    assert values(list(source.readings(["A"], at(2), at(3)))) == [1.0]
    other = create_engine(plant_server)
    with other.connect() as session:
        session.execute(
            text(
                "SELECT pg_terminate_backend(pid) FROM pg_stat_activity "
                "WHERE application_name = 'recon reads the plant'"
            )
        )
    other.dispose()
    assert values(list(source.readings(["A"], at(2), at(3)))) == [1.0]
    assert waited == [WAITS[0]]


@pytest.mark.slow
@pytest.mark.database
def test_a_server_that_restarts_is_asked_again_and_nothing_comes_twice() -> None:
    server = Server(durable=True).start()
    try:
        url = server.url(server.create())
        make(url, reading=[("A", at(2, h), float(h), 0, at(2, h)) for h in range(20)])
        waited: list[float] = []

        def sleep(seconds: float) -> None:
            waited.append(seconds)
            server.restart()

        plain = opened(url)
        source = SqlPlant(
            Connection(name=plain.name, engine=plain.engine, sleep=sleep),
            queries(),
            now=lambda: NOW,
        )
        assert len(values(list(source.readings(["A"], at(2), at(3))))) == 20
        server.crash()
        assert values(list(source.readings(["A"], at(2), at(3)))) == [float(h) for h in range(20)]
        assert waited == [WAITS[0]]
    finally:
        server.stop()


@pytest.mark.database
def test_a_server_that_stays_away_is_given_up_with_its_address_and_no_password(
    plant_server: str, tmp_path: Path
) -> None:
    waited: list[float] = []
    plain = opened(f"postgresql://reader:secret@/plant?host={tmp_path}")
    away = Connection(name=plain.name, engine=plain.engine, sleep=waited.append)
    with pytest.raises(PlantUnreachableError, match="could not be read, 6 tries") as caught:
        list(SqlPlant(away, queries()).records(RowKind.ASSAY, at(1), at(2)))
    assert "secret" not in str(caught.value)
    assert tuple(waited) == WAITS


@pytest.mark.database
def test_a_database_that_does_not_exist_is_not_waited_for(plant_server: str) -> None:
    waited: list[float] = []
    plain = opened(re.sub(r"/\w+\?", "/nowhere?", plant_server))
    source = SqlPlant(
        Connection(name=plain.name, engine=plain.engine, sleep=waited.append), queries()
    )
    with pytest.raises(PlantUnreachableError, match=r'1 try .*"nowhere" does not exist'):
        list(source.records(RowKind.ASSAY, at(1), at(2)))
    assert waited == []


def test_a_file_that_is_no_database_is_said_so(tmp_path: Path) -> None:
    (tmp_path / "plant.db").write_text("no database" * 100)
    source = plant(f"sqlite:///{tmp_path / 'plant.db'}")
    with pytest.raises(PlantQueryError, match="file is not a database"):
        list(source.records(RowKind.ASSAY, at(1), at(2)))


def test_a_locked_file_is_asked_again(tmp_path: Path) -> None:
    url = f"sqlite:///{tmp_path / 'plant.db'}"
    make(url, reading=[("A", at(2), 1.0, 0, at(2))])
    blocker = sqlite3.connect(tmp_path / "plant.db", isolation_level=None)
    blocker.execute("BEGIN EXCLUSIVE")
    plain = opened(url, busy_seconds=0.05)
    patient = Connection(
        name=plain.name, engine=plain.engine, sleep=lambda _: blocker.execute("ROLLBACK").close()
    )
    try:
        source = SqlPlant(patient, queries(), now=lambda: NOW)
        assert values(list(source.readings(["A"], at(2), at(3)))) == [1.0]
    finally:
        blocker.close()


@pytest.mark.parametrize(
    ("url", "expected"),
    [
        ("not an address", "it is not an address of a database"),
        ("sqlite:///absent.sqlite", 'there is no SQLite file "absent.sqlite"'),
        ("mysql://user@host/plant", '"mysql" is not read'),
    ],
)
def test_an_address_that_cannot_be_used_says_what_to_write(url: str, expected: str) -> None:
    with pytest.raises(PlantAddressError, match=expected):
        connect(url)


def test_a_kind_without_a_source_is_said_so(tmp_path: Path) -> None:
    url = f"sqlite:///{tmp_path / 'plant.db'}"
    make(url)
    with pytest.raises(FaultyFileError, match='no source is declared for "tickets"'):
        list(SqlPlant(opened(url), {}).records(RowKind.TICKET, at(1), at(2)))


def test_a_source_says_what_it_asks(plant_url: str) -> None:
    make(plant_url)
    assert "FROM laboratory" in plant(plant_url).query(RowKind.ASSAY)
