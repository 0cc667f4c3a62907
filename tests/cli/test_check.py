"""`recon check` says what is fit to run and lists everything that is not."""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Callable
from datetime import timedelta
from pathlib import Path
from typing import Any

import pytest
from typer.testing import CliRunner, Result

from recon.cli.main import app
from recon.errors import BAD_INPUT, DONE, PERSON_NEEDED, PlantAddressError, ReconError
from tests.plant.tables import at, make

START = Path(__file__).resolve().parents[2] / "config" / "starting-point.toml"
ASSAYS = {
    ("ORE", "moisture"): ("%", 4.0, "final"),
    ("CONC", "moisture"): ("%", 9.0, "final"),
    ("DESPATCH", "moisture"): ("%", 8.5, "final"),
    ("ORE", "Cu"): ("%", 0.84, "shift"),
    ("TAIL", "Cu"): ("%", 0.1, "final"),
    ("CONC", "Cu"): ("%", 27.5, "final"),
}
RATES = {"ORE.RUN": 1.0, "ORE.WT": 620.0, "TAIL.FT": 900.0, "TAIL.DT": 1.3, "CONC.TOT": 4711.0}
NOON = ("--at", "2026-01-20T12:00")


def laboratory() -> list[tuple[Any, ...]]:
    return [
        (f"S{n}", *place, at(18), at(19), at(19, 8), value, unit, stage, "", "XRF", "site")
        for n, (place, (unit, value, stage)) in enumerate(ASSAYS.items())
    ]


def readings() -> list[tuple[Any, ...]]:
    times = [at(19, 10) + timedelta(minutes=10 * n) for n in range(156)]
    return [(tag, t, value, 0, t) for tag, value in RATES.items() for t in times]


SURVEYS = [
    ("V1", "SHED", "volume", at(10), at(11), 900.0, "m3", "final", "J"),
    ("V1", "SHED", "density", at(10), at(11), 2.1, "t/m3", "final", "J"),
]
TICKETS = [("T1", "WEIGHBRIDGE", "net", at(19), at(19), 24.5, "t", "final", "L1", "R-1")]


def plant(folder: Path, **changed: Any) -> str:
    """Make a plant database that the starting point can run on; give its address."""
    rows = {
        "reading": readings(),
        "laboratory": laboratory(),
        "survey": SURVEYS,
        "ticket": TICKETS,
        "plant_event": [
            ("E1", "ORE.WT", "calibration", at(9), at(9), at(9), 1.0, "", 1.0, 1.0, "")
        ],
    }
    url = f"sqlite:///{folder / 'plant.db'}"
    make(url, **{**rows, **changed})
    return url


def check(*arguments: str) -> Result:
    return CliRunner().invoke(app, ["check", *arguments])


def test_a_sound_site_is_fit_to_run_and_every_tag_is_shown(tmp_path: Path) -> None:
    result = check(str(START), "--plant", plant(tmp_path), *NOON)
    assert result.exit_code == DONE, result.output
    assert "Fit to run: every instrument gives what the site file says." in result.output
    line = next(x for x in result.output.splitlines() if x.startswith("ORE.WT "))
    assert line.split() == ["ORE.WT", "rate", "fit", "t/h", "620", "10", "min", "100%", "144", "-"]
    line = next(x for x in result.output.splitlines() if x.startswith("ORE Cu "))
    assert line.split()[2:] == ["assay", "fit", "%", "0.84", "36.0", "h", "-", "1", "shift", "1"]
    assert "As of 2026-01-20 09:00 plant time (America/Santiago)" in result.output


def test_without_a_database_the_file_alone_is_checked() -> None:
    result = check(str(START))
    assert result.exit_code == DONE
    assert "the site file reads clean" in result.output
    assert "sources and data were not looked at" in result.output


def test_the_json_object_holds_the_same(tmp_path: Path) -> None:
    result = check(str(START), "--plant", plant(tmp_path), "--json", *NOON)
    found = json.loads(result.output)
    assert found["fit"] is True
    assert found["faults"] == []
    tag = next(t for t in found["tags"] if t["tag"] == "CONC.TOT")
    assert (tag["value"], tag["coverage"], tag["rows"]) == (4711.0, 1.0, 144)


def swapped(rows: list[tuple[Any, ...]], **values: Any) -> list[tuple[Any, ...]]:
    names = [*("sample", "point", "analyte", "taken_from", "taken_to", "reported_at")]
    names += ["value", "unit", "stage"]
    return [
        tuple(values.get(n, v) for n, v in zip(names, row, strict=False)) + row[len(names) :]
        if row[1:3] == ("CONC", "Cu")
        else row
        for row in rows
    ]


@pytest.mark.parametrize(
    ("changed", "expected"),
    [
        (
            {"laboratory": swapped(laboratory(), unit="pct")},
            'CONC Cu: rows come in the unknown unit "pct".',
        ),
        (
            {"laboratory": swapped(laboratory(), unit="g/L")},
            'CONC Cu: rows come in "g/L", a unit of density; "%", a unit of fraction, is declared.',
        ),
        (
            {"laboratory": swapped(laboratory(), stage="settled")},
            'CONC Cu: stage "settled" is not declared; its 1 rows would not count. Declared: final',
        ),
        (
            {"reading": [("ORE.WT", at(20), 1.0, 9, at(20))]},
            "ORE.WT: quality: 0 good, 1 uncertain or 2 bad is due, 9 (row 1).",
        ),
        (
            {"ticket": [TICKETS[0], TICKETS[0]]},
            'the same key twice, "T1|WEIGHBRIDGE|net|final" (row 1 and row 2)',
        ),
    ],
)
def test_a_fault_of_the_data_ends_with_status_2(
    tmp_path: Path, changed: dict[str, Any], expected: str
) -> None:
    result = check(str(START), "--plant", plant(tmp_path, **changed), *NOON)
    assert result.exit_code == BAD_INPUT
    assert expected in result.output
    assert "Not fit to run: 1 fault to correct first." in result.output


@pytest.mark.parametrize(
    ("changed", "expected"),
    [
        (
            {"reading": [r for r in readings() if r[0] != "TAIL.FT"]},
            "TAIL.FT: no reading in the last five weeks.",
        ),
        (
            {"reading": [r for r in readings() if r[0] != "TAIL.FT" or r[1] < at(19, 18)]},
            # 12:00 to 17:50, and ten usual spacings more: 7.5 h of 24.
            "TAIL.FT: covers 31% of the last day; below 50% it is unmeasured.",
        ),
        (
            {"reading": [(*r[:2], 5e3, *r[3:]) if r[0] == "ORE.WT" else r for r in readings()]},
            "ORE.WT: 144 readings of the last day lie outside 0..800 t/h, 5000 last.",
        ),
        (
            {"reading": [(*r[:3], 2, r[4]) if r[0] == "ORE.WT" else r for r in readings()]},
            "ORE.WT: 144 of 144 readings of the last day are bad.",
        ),
        (
            {"reading": [r for r in readings() if r[0] != "TAIL.FT" or r[1] < at(19, 12)]},
            "TAIL.FT: no reading in the last day.",
        ),
        (
            {"laboratory": [r for r in laboratory() if r[1:3] != ("ORE", "moisture")]},
            "ORE moisture: no row in the last 35 days. Its estimate rule would stand in.",
        ),
        ({"laboratory": swapped(laboratory(), value=None)}, "CONC Cu: 1 of 1 rows hold no value."),
        (
            {
                "laboratory": [
                    (*r[:6], 40.0, *r[7:]) if r[2] == "moisture" else r for r in laboratory()
                ]
            },
            "ORE moisture: the last value, 40, lies outside 0..15 %.",
        ),
    ],
)
def test_what_is_only_missing_is_a_warning_and_status_1_when_strict(
    tmp_path: Path, changed: dict[str, Any], expected: str
) -> None:
    url = plant(tmp_path, **changed)
    result = check(str(START), "--plant", url, *NOON)
    assert (expected in result.output, result.exit_code) == (True, DONE), result.output
    assert "will be estimated, found by balance, or left without a number" in result.output
    assert check(str(START), "--plant", url, "--strict", *NOON).exit_code == PERSON_NEEDED


def test_rows_that_no_instrument_reads_are_noted_with_the_closest(tmp_path: Path) -> None:
    extra = ("S9", "CONCS", "Cu", at(18), at(19), at(19, 8), 27.0, "%", "final", "", "XRF", "site")
    result = check(str(START), "--plant", plant(tmp_path, laboratory=[*laboratory(), extra]), *NOON)
    assert result.exit_code == DONE
    assert (
        "1 assay rows of CONCS Cu belong to no instrument. CONC Cu reads CONC Cu." in result.output
    )


def changed_site(folder: Path, change: Callable[[str], str]) -> Path:
    text = START.read_text(encoding="utf-8")
    assert change(text) != text
    (folder / "site.toml").write_text(change(text), encoding="utf-8")
    return folder / "site.toml"


def test_a_kind_of_row_without_a_source_is_a_fault(tmp_path: Path) -> None:
    site = changed_site(
        tmp_path,
        lambda t: t.replace('[[query]]\nkind = "tickets"\nquery = "tickets.sql"\n', ""),
    )
    result = check(str(site), "--plant", plant(tmp_path), *NOON)
    assert result.exit_code == BAD_INPUT
    assert "no source of tickets: 1 instruments need it, WEIGHBRIDGE for one." in result.output


def test_a_missing_table_is_said_once_and_other_kinds_are_still_checked(tmp_path: Path) -> None:
    url = plant(tmp_path)
    with sqlite3.connect(tmp_path / "plant.db") as session:
        session.execute("DROP TABLE reading")
    session.close()
    result = check(str(START), "--plant", url, *NOON)
    assert result.exit_code == BAD_INPUT
    assert result.output.count("no such table: reading") == 1
    assert "CONC Cu" in result.output


def raised(*arguments: str) -> ReconError:
    """The error that the command's door turns into a message and a status."""
    error = check(*arguments).exception
    assert isinstance(error, ReconError)
    return error


def test_every_fault_of_the_site_file_is_listed_with_status_2(tmp_path: Path) -> None:
    site = changed_site(
        tmp_path, lambda t: t.replace('to = "FLOTATION"', 'to = "FLOT"').replace("m3/h", "m3h")
    )
    error = raised(str(site))
    assert error.status == BAD_INPUT
    assert 'unknown node "FLOT"' in str(error)
    assert 'unknown unit "m3h"' in str(error)


def test_a_database_that_is_not_there_is_said_so(tmp_path: Path) -> None:
    error = raised(str(START), "--plant", f"sqlite:///{tmp_path / 'absent.db'}")
    assert isinstance(error, PlantAddressError)
    assert "there is no SQLite file" in str(error)


def test_without_a_site_the_settings_are_used(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    plant(tmp_path)
    (tmp_path / "site.toml").write_bytes(START.read_bytes())
    (tmp_path / "recon.toml").write_text(
        'site = "site.toml"\nplant_url = "sqlite:///plant.db"\nbook_url = "sqlite:///book.db"\n'
    )
    monkeypatch.chdir(tmp_path)
    result = check(*NOON)
    assert result.exit_code == DONE, result.output
    assert "Fit to run" in result.output


def test_the_version_in_force_is_the_one_checked(tmp_path: Path) -> None:
    (tmp_path / "versions").mkdir()
    (tmp_path / "versions" / "a.toml").write_bytes(START.read_bytes())
    later = START.read_text().replace("2026-01-01 ", "2026-03-01 ").replace("WEIGHBRIDGE", "WB2")
    (tmp_path / "versions" / "b.toml").write_text(later)
    url = plant(tmp_path)
    result = check(str(tmp_path / "versions"), "--plant", url, *NOON)
    assert "WEIGHBRIDGE" in result.output
    assert "valid from 2026-03-01" in result.output
