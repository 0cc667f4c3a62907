"""Rules no linter knows: file length, first lines, and words that do not belong here."""

from __future__ import annotations

import ast
import re
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
MODULES = sorted((ROOT / "recon").rglob("*.py"))
MOST_LINES = 400


@pytest.mark.parametrize("path", MODULES, ids=lambda p: str(p.relative_to(ROOT)))
def test_a_file_is_short_and_says_what_it_is(path: Path) -> None:
    text = path.read_text(encoding="utf-8")
    assert len(text.splitlines()) <= MOST_LINES
    assert ast.get_docstring(ast.parse(text))
    assert not path.name.startswith("test_")
    assert not path.stem.endswith("_test")
    assert path.stem not in {"utils", "common", "misc", "helpers"}


def test_every_room_is_on_the_map() -> None:
    text = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
    rooms = sorted(p.name for p in (ROOT / "recon").iterdir() if (p / "__init__.py").exists())
    assert [room for room in rooms if f"`{room}/`" not in text] == []


def test_no_path_of_a_machine_and_no_package_index_stands_in_the_project() -> None:
    index = "|".join(
        "-".join(w) for w in (("index", "url"), ("find", "links"), ("trusted", "host"))
    )
    pattern = re.compile(rf"(^|[^\w./-])/(work|root)/|{index}")
    kinds = ("*.py", "*.sql", "*.toml", "*.md", "*.txt", "*.lock")
    found = [
        f"{p.relative_to(ROOT)}:{n}"
        for kind in kinds
        for p in ROOT.rglob(kind)
        if not any(part.startswith((".venv", "build", "dist")) for part in p.parts)
        for n, line in enumerate(p.read_text(encoding="utf-8").splitlines(), start=1)
        if pattern.search(line)
    ]
    assert found == []
