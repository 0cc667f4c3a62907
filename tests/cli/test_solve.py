"""`recon solve`: the JSON object, the table, and every kind of wrong file."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
KEYS = {
    "status", "title", "objective", "test_objective", "degrees_of_freedom", "p_value", "estimates",
    "measurements", "sources", "figures", "suspects", "alarm", "undetermined", "solver", "notes",
}  # fmt: skip


def recon(*words: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", "recon", *words],
        cwd=ROOT,
        capture_output=True,
        text=True,
        check=False,
    )


@pytest.mark.parametrize("engine", ["direct", "cvxpy"])
def test_json_has_every_promised_key(engine: str) -> None:
    ended = recon("solve", "config/balances/rougher.toml", "--json", "--engine", engine)
    assert ended.returncode == 0, ended.stderr
    found = json.loads(ended.stdout)
    assert set(found) == KEYS
    assert found["status"] == "solved"
    (recovery,) = found["figures"]
    assert sum(s["share"] for s in recovery["budget"]) == pytest.approx(1.0, abs=1e-9)


def test_the_table_names_the_suspect() -> None:
    ended = recon("solve", "config/balances/exchanger.toml")
    assert ended.returncode == 0
    assert "Alarm RAISED" in ended.stdout
    assert "meter F2: reads high by" in ended.stdout


def test_all_faults_of_a_file_are_listed_at_once(tmp_path: Path) -> None:
    path = tmp_path / "wrong.toml"
    path.write_text(
        """
quantities = ["mass", "Cu"]
perods = 2
node = [{ name = "mill" }, { name = "mill" }]
stream = [
    { name = "feed", to = "mil" },
    { name = "out", from = "mill", to = "mill", carries = ["mas"] },
]
measured = [
    { stream = "feed", quantity = "mass", value = nan, u = 1.0 },
    { stream = "fed", quantity = "mass", value = 1.0, u = 1.0 },
    { stream = "feed", quantity = "Cu", value = 1.0, u = -1.0 },
    { stream = "feed", quantity = "Cu", unit = "t", value = 1.0, u = 1.0, shared = ["lab"] },
]
"""
    )
    ended = recon("solve", str(path))
    assert ended.returncode == 2
    assert "Traceback" not in ended.stderr
    for words in (
        'perods: unknown key. Did you mean "periods"?',
        "node 2 (mill): the name is used twice",
        'unknown node "mil". Did you mean "mill"?',
        "leaves and enters the same node",
        'unknown quantity "mas". Did you mean "mass"?',
        "a finite number is expected",
        'unknown stream "fed". Did you mean "feed"?',
        "greater than 0",
        'unknown source "lab"',
        "is a mass; a fraction is expected here",
    ):
        assert words in ended.stderr, words


@pytest.mark.parametrize(
    ("name", "content", "words"),
    [
        ("missing.toml", None, "cannot be read"),
        ("broken.toml", "quantities = [", "is not valid TOML"),
        ("broken.xlsx", "no workbook", "is not a readable workbook"),
    ],
)
def test_unreadable_files_end_with_status_two(
    tmp_path: Path, name: str, content: str | None, words: str
) -> None:
    path = tmp_path / name
    if content is not None:
        path.write_text(content)
    ended = recon("solve", str(path))
    assert ended.returncode == 2
    assert words in ended.stderr
    assert "Traceback" not in ended.stderr


def test_contradicting_held_figures_end_with_status_three(tmp_path: Path) -> None:
    path = tmp_path / "held.toml"
    path.write_text(
        """
quantities = ["mass"]
node = [{ name = "tank" }]
stream = [{ name = "in", to = "tank" }, { name = "out", from = "tank" }]
measured = [
    { stream = "in", quantity = "mass", value = 100.0, held = true },
    { stream = "out", quantity = "mass", value = 90.0, held = true },
]
"""
    )
    ended = recon("solve", str(path), "--json")
    assert ended.returncode == 3
    assert "cannot be met together" in json.loads(ended.stdout)["status"]


def test_a_workbook_of_the_same_shape_gives_the_same_answer(tmp_path: Path) -> None:
    import tomllib

    import xlsxwriter

    tables = tomllib.loads((ROOT / "config/balances/rougher.toml").read_text())
    path = tmp_path / "rougher.xlsx"
    with xlsxwriter.Workbook(path) as book:
        head = book.add_worksheet("balance")
        head.write_row(0, 0, ["title", tables["title"]])
        head.write_row(1, 0, ["quantities", ", ".join(tables["quantities"])])
        for table, entries in tables.items():
            if not isinstance(entries, list) or isinstance(entries[0], str):
                continue
            sheet = book.add_worksheet(table)
            keys = list(dict.fromkeys(k for e in entries for k in e))
            sheet.write_row(0, 0, keys)
            for i, entry in enumerate(entries, start=1):
                for j, key in enumerate(keys):
                    if key not in entry:
                        continue
                    value = entry[key]
                    if isinstance(value, list):
                        value = json.dumps(value).replace('":', '" =')
                        value = value.replace('"stream" =', "stream =").replace(
                            '"quantity" =', "quantity ="
                        )
                    sheet.write(i, j, value)
    first = json.loads(recon("solve", "config/balances/rougher.toml", "--json").stdout)
    second = json.loads(recon("solve", str(path), "--json").stdout)
    assert first["estimates"] == second["estimates"]


def test_help_imports_neither_cvxpy_nor_pandas() -> None:
    code = (
        "import sys\nfrom recon.cli.main import app\nsys.argv = ['recon', '--help']\n"
        "try:\n    app()\nexcept SystemExit:\n    pass\n"
        "print(sorted({'cvxpy', 'pandas', 'numpy', 'scipy'} & set(sys.modules)))"
    )
    ended = subprocess.run(
        [sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True, check=True
    )
    assert ended.stdout.strip().endswith("[]")
