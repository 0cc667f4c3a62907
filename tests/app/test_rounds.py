"""A round brings in what is new, runs what is due, and does neither twice."""

from __future__ import annotations

import shutil
import sqlite3
from collections.abc import Iterator
from contextlib import closing, contextmanager
from datetime import UTC, date, datetime, timedelta
from pathlib import Path

import pytest

from recon.app.rounds import Rounds
from recon.errors import DataError, NotAcceptedError
from recon.settings import read_settings
from recon.wiring import Workplace, workplace
from tests.app.kept import counted
from tests.fakes.five_node_plant import write_five_nodes

FIRST, THIRD = date(2026, 1, 1), date(2026, 1, 3)
SETTLED = datetime(2026, 1, 5, 14, tzinfo=UTC)


class Silent:
    def __init__(self) -> None:
        self.ended: list[tuple[str, str]] = []

    def found_due(self, count: int) -> None: ...

    def reading(self, what: str, done: int, total: int) -> None: ...

    def period_began(self, period: str) -> None: ...

    def period_ended(
        self, period: str, outcome: str, *, seconds: float, at: datetime, trouble: str = ""
    ) -> None:
        self.ended.append((period, outcome))


@pytest.fixture(scope="module")
def plant(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("plant")
    write_five_nodes(folder, month=FIRST, through=THIRD)
    return folder


@pytest.fixture
def folder(plant: Path, tmp_path: Path) -> Path:
    for name in ("site.toml", "recon.toml", "plant.db"):
        shutil.copy(plant / name, tmp_path / name)
    return tmp_path


@contextmanager
def opened(folder: Path, clock: list[datetime], watcher: Silent) -> Iterator[Workplace]:
    settings = read_settings(folder / "recon.toml", {})
    with workplace(settings, watcher=watcher, actor="test", clock=lambda: clock[0]) as place:
        object.__setattr__(place.rounds.runner, "compute", counted)
        yield place


def periods(rounds: Rounds) -> list[tuple[date, str]]:
    return [(ran.through, ran.outcome) for ran in rounds.until_nothing_is_due()]


def test_what_is_due_is_run_once_and_late_data_run_again(folder: Path) -> None:
    clock, watcher = [SETTLED], Silent()
    with opened(folder, clock, watcher) as place:
        assert periods(place.rounds) == [
            (date(2026, 1, 1), "published"),
            (date(2026, 1, 2), "published"),
            (date(2026, 1, 3), "published"),
        ]
        assert periods(place.rounds) == []
        clock[0] = SETTLED + timedelta(hours=7)
        with closing(sqlite3.connect(folder / "plant.db")) as database:
            known = int((clock[0] - timedelta(hours=2)).timestamp() * 1_000_000)
            database.execute(
                "INSERT INTO laboratory SELECT 'LATE', point, analyte, taken_from, taken_to, ?, "
                "value, unit, stage, lot, method, laboratory FROM laboratory LIMIT 1",
                (known,),
            )
            database.commit()
        assert periods(place.rounds) == []
        clock[0] += timedelta(hours=1, minutes=1)
        assert periods(place.rounds) == [(THIRD, "published")]
        assert place.book.runs(place.site)[-1].revision == 2


def test_a_value_changed_at_the_source_is_a_finding_of_the_book(folder: Path) -> None:
    clock, watcher = [SETTLED], Silent()
    with opened(folder, clock, watcher) as place:
        place.rounds.look()
        with closing(sqlite3.connect(folder / "plant.db")) as database:
            database.execute(
                "UPDATE reading SET value = value * 1.1 WHERE tag = 'CHARGE-WI' AND at = "
                "(SELECT min(at) + 3600000000 FROM reading WHERE tag = 'CHARGE-WI')"
            )
            database.commit()
        clock[0] += timedelta(hours=25)
        place.rounds.look()
        changes = place.book.source_changes(
            place.site, SETTLED - timedelta(days=9), SETTLED + timedelta(days=9)
        )
    assert [(f.code, f.subject) for f in changes] == [("changed-at-source", "CHARGE-WI 2026-01-01")]


def test_a_period_that_cannot_be_solved_is_told_and_passed_over(folder: Path) -> None:
    clock, watcher = [SETTLED], Silent()
    with opened(folder, clock, watcher) as place:

        def second_fails(inputs: object) -> object:
            if inputs.through.day == 2:  # type: ignore[attr-defined]
                raise NotAcceptedError(["planted"])
            return counted(inputs)  # type: ignore[arg-type]

        object.__setattr__(place.rounds.runner, "compute", second_fails)
        assert [d.day for d, _ in periods(place.rounds)] == [1, 3]
        assert [o for _, o in watcher.ended] == ["published", "failed", "published"]
        assert place.rounds.due() == ()


def test_a_day_that_has_not_ended_cannot_be_run(folder: Path) -> None:
    with (
        opened(folder, [SETTLED], Silent()) as place,
        pytest.raises(DataError, match="have ended"),
    ):
        place.rounds.only(FIRST, date(2026, 1, 20))
