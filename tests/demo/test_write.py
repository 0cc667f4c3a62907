"""The plant's database holds what its instruments said, and nothing of the truth."""

from __future__ import annotations

import sqlite3
from contextlib import closing
from datetime import timedelta
from pathlib import Path

import pytest
from sqlalchemy import create_engine, inspect, text

from recon.demo.__main__ import main
from recon.demo.clock import micros
from recon.demo.write_plant import write_plant
from recon.demo.write_truth import write_truth
from recon.ingest.rows import RowKind
from tests.demo.made import hourly

ROOT = Path(__file__).resolve().parents[2]


def test_every_reading_and_paper_arrives(database_url: str) -> None:
    simulation = hourly(faults="on", months=1)
    write_plant(simulation, database_url)
    engine = create_engine(database_url)
    with engine.connect() as connection:
        count = {
            table: connection.execute(text(f"SELECT count(*) FROM {table}")).scalar_one()
            for table in inspect(engine).get_table_names()
        }
        gone = connection.execute(
            text("SELECT count(*) FROM reading WHERE value IS NULL AND tag = 'FT-226'")
        ).scalar_one()
        total = connection.execute(
            text("SELECT sum(value) FROM reading WHERE tag = 'WT-210'")
        ).scalar_one()
    engine.dispose()
    kinds = [r.kind for r in simulation.records]
    assert count == {
        "reading": sum(len(s.at) for s in simulation.series),
        "laboratory": kinds.count(RowKind.ASSAY),
        "ticket": kinds.count(RowKind.TICKET),
        "survey": kinds.count(RowKind.SURVEY),
        "plant_event": kinds.count(RowKind.EVENT),
    }
    assert gone == 4
    assert total == pytest.approx(float(simulation.tag("WT-210").value.sum()), rel=1e-12)


@pytest.mark.database
def test_times_are_the_same_instants_on_both_databases(postgres_url: str, tmp_path: Path) -> None:
    simulation = hourly(months=1)
    write_plant(simulation, postgres_url)
    write_plant(simulation, f"sqlite:///{tmp_path / 'plant.db'}")
    engine = create_engine(postgres_url)
    with engine.connect() as connection:
        there = connection.execute(text("SELECT sample, taken_to FROM laboratory")).all()
    engine.dispose()
    with closing(sqlite3.connect(tmp_path / "plant.db")) as database:
        here = dict(database.execute("SELECT sample, taken_to FROM laboratory").fetchall())
    assert {name: micros(at) for name, at in there} == here


def test_results_come_hours_to_weeks_after_what_they_speak_of() -> None:
    late = [r.known_at - r.true_to for r in hourly().records if r.kind is RowKind.ASSAY]
    assert min(late) > timedelta(hours=2)
    assert min(late) < timedelta(hours=4)
    assert timedelta(days=50) < max(late) < timedelta(days=60)
    by_stage: dict[str, list[timedelta]] = {}
    for r in hourly().records:
        if r.subject == "custom A" and r.item == "Cu":
            by_stage.setdefault(r.stage, []).append(r.known_at - r.true_to)
    assert max(by_stage["provisional"]) < min(by_stage["final"])
    assert max(by_stage["final"]) < min(by_stage["settled"])


def test_piles_are_surveyed_hours_off_the_cut_and_baths_at_it() -> None:
    grid = hourly().truth.grid
    cuts = {int(grid.edges[k]) for k in grid.first}
    at: dict[str, list[int]] = {}
    for r in hourly().records:
        if r.kind is RowKind.SURVEY:
            at.setdefault(r.subject, []).append(micros(r.true_from))
    assert {micros_ in cuts for micros_ in at["flash furnace"]} == {True}
    assert len(set(at["flash furnace"])) == 62
    for place in ("ore pile", "shed", "reverts"):
        times = sorted(set(at[place]))
        assert len(times) == 3
        assert not set(times) & cuts
        for time, cut in zip(times, (0, 31, 61), strict=True):
            assert abs(time - int(grid.edges[grid.first[cut]])) <= 5 * 3.6e9


def test_every_document_has_a_key_of_its_own() -> None:
    for faults in ("off", "on"):
        records = hourly(faults=faults).records
        keys = [(r.kind, r.natural_key) for r in records]
        assert len(keys) == len(set(keys))
        assert not [r for r in records if "|" in r.document + r.subject + r.item]


def test_the_command_writes_plant_and_truth_and_refuses_to_write_twice(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    site = str(ROOT / "config" / "demo" / "site.toml")
    asked = ["--out", str(tmp_path), "--site", site, "--months", "1", "--interval", "60"]
    assert main(asked) == 0
    assert "31 plant days" in capsys.readouterr().out
    plant, truth = tmp_path / "plant.db", tmp_path / "truth.db"
    assert sorted(p.name for p in tmp_path.iterdir()) == ["plant.db", "truth.db"]
    with closing(sqlite3.connect(truth)) as database:
        planted = {row[0] for row in database.execute("SELECT name FROM fault")}
        assert "mill-belt-span" in planted
        assert "launder-spill" not in planted, "beyond the last day"
        cut = "SELECT count(*) FROM stock WHERE place = 'shed' AND quantity = 'Cu'"
        assert database.execute(cut).fetchone() == (32,)
    before = plant.read_bytes()
    assert main(asked) == 2
    assert "exist already" in capsys.readouterr().err
    assert plant.read_bytes() == before


def test_wrong_arguments_are_told_and_nothing_is_written(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    site = str(ROOT / "config" / "demo" / "site.toml")
    asked = ["--out", str(tmp_path), "--site", site, "--faults", "gremlins"]
    assert main(asked) == 2
    assert "unknown 'gremlins'" in capsys.readouterr().err
    assert not list(tmp_path.iterdir())


def test_a_database_that_is_not_empty_is_refused_and_nothing_is_left_behind(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    taken = tmp_path / "taken.db"
    with closing(sqlite3.connect(taken)) as database:
        database.execute("CREATE TABLE ticket (number TEXT)")
    before = taken.read_bytes()
    site = str(ROOT / "config" / "demo" / "site.toml")
    out = tmp_path / "out"
    asked = ["--out", str(out), "--site", site, "--months", "1", "--interval", "60"]
    assert main([*asked, "--plant", f"sqlite:///{taken}"]) == 2
    assert "table ticket already exists" in capsys.readouterr().err
    assert not list(out.iterdir())
    assert taken.read_bytes() == before


def test_no_name_of_a_fault_and_no_true_value_is_in_the_plants_database(tmp_path: Path) -> None:
    simulation = hourly(faults="on", months=1)
    path = tmp_path / "plant.db"
    write_plant(simulation, f"sqlite:///{path}")
    content = path.read_bytes()
    for fault in simulation.faults:
        assert fault.name.encode() not in content
    for word in (b"fault", b"truth", b"spoil"):
        assert word not in content


def test_no_room_below_the_doors_knows_the_invented_site() -> None:
    doors = {"demo", "cli", "wiring.py"}
    knowing = [
        str(path.relative_to(ROOT))
        for path in (ROOT / "recon").rglob("*.py")
        if path.relative_to(ROOT / "recon").parts[0] not in doors
        and "recon.demo" in path.read_text(encoding="utf-8")
    ]
    assert knowing == []


def test_the_truth_is_never_written_over(tmp_path: Path) -> None:
    there = tmp_path / "truth.db"
    there.write_text("mine")
    with pytest.raises(FileExistsError, match="exists already"):
        write_truth(hourly(months=1), there)
    assert there.read_text() == "mine"
