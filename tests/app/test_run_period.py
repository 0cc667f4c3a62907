"""A month to date is published once, whatever happens between any two lines."""

from __future__ import annotations

import time
from collections.abc import Iterator
from dataclasses import replace
from datetime import date, timedelta

import pytest

from recon import failpoints
from recon.app.compute_period import compute_period
from recon.app.period import PeriodInputs, PeriodResult
from recon.app.ports import Book
from recon.app.run_period import read_inputs, run_period
from recon.errors import ConfigError, LostClaimError, NotAcceptedError
from recon.ingest.rows import Record, RowKind
from tests.app.kept import (
    JANUARY,
    NOW,
    SITE,
    counted,
    keep_records,
    keep_rows,
    keep_site,
    rows_of,
    runner_of,
)

THIRD = date(2026, 1, 3)
POINTS = ("after_read", "after_claim", "after_compute", "mid_publish", "before_commit")


@pytest.fixture(autouse=True)
def _disarmed() -> Iterator[None]:
    yield
    failpoints.disarm()


@pytest.fixture
def filled(book: Book) -> Book:
    month = rows_of(THIRD)
    keep_site(book, month)
    keep_rows(book, month)
    return book


def late_assay(value: float, *, document: str = "LATE") -> Record:
    (like, *_) = (
        r for r in rows_of(THIRD).records if r.kind is RowKind.ASSAY and r.subject == "SLAG"
    )
    return replace(like, document=document, value=value)


def test_the_five_node_site_is_computed_and_read_back_whole(filled: Book) -> None:
    ran = run_period(runner_of(filled, compute=compute_period), JANUARY, THIRD)
    assert ran.outcome == "published"
    assert ran.head is not None
    inputs = read_inputs(filled, SITE, JANUARY, THIRD, NOW)
    expected, stored = compute_period(inputs), filled.result(SITE, ran.head.run)
    for name in ("measurements", "estimates", "offsets", "figures", "closing", "leaves"):
        assert sorted(map(repr, getattr(stored, name))) == sorted(
            map(repr, getattr(expected, name))
        )
    assert {c.table for c in stored.cells} >= {"site-balance", "streams", "stocks", "tests"}
    assert len(stored.cells) == len(expected.cells)


def test_the_same_inputs_are_not_computed_twice(filled: Book) -> None:
    first = run_period(runner_of(filled), JANUARY, THIRD)
    again = run_period(runner_of(filled), JANUARY, THIRD)
    assert (first.outcome, again.outcome) == ("published", "unchanged")
    assert len(filled.runs(SITE)) == 1


def test_a_confirmed_run_is_not_looked_at_again(filled: Book) -> None:
    run_period(runner_of(filled), JANUARY, THIRD)
    later = NOW + timedelta(days=1)
    run_period(runner_of(filled, now=later), JANUARY, THIRD)
    (standing,) = filled.standing(SITE)
    assert standing.knowledge_cut == later


def test_new_data_make_a_new_revision_and_old_data_point_back(filled: Book) -> None:
    """A, then B, then B's row is set right again by a third value equal to... A again: pointed."""
    first = run_period(runner_of(filled), JANUARY, THIRD)
    keep_records(filled, (late_assay(1.1),), seen_at=NOW + timedelta(hours=1))
    second = run_period(runner_of(filled, now=NOW + timedelta(hours=2)), JANUARY, THIRD)
    assert second.head is not None
    assert first.head is not None
    assert (second.outcome, second.head.revision) == ("published", first.head.revision + 1)
    assert filled.current(SITE, JANUARY, THIRD) == second.head


def test_while_another_holds_the_claim_nothing_is_computed(filled: Book) -> None:
    def refuse(_: PeriodInputs) -> PeriodResult:
        raise AssertionError("computed under another's claim")

    def meanwhile(inputs: PeriodInputs) -> PeriodResult:
        other = run_period(runner_of(filled, owner="other", compute=refuse), JANUARY, THIRD)
        assert (other.outcome, other.head) == ("held by another", None)
        return counted(inputs)

    assert run_period(runner_of(filled, compute=meanwhile), JANUARY, THIRD).outcome == "published"


def test_a_lease_is_kept_alive_through_a_long_computation(filled: Book) -> None:
    def slow(inputs: PeriodInputs) -> PeriodResult:
        time.sleep(2.5)
        other = run_period(runner_of(filled, owner="other"), JANUARY, THIRD)
        assert other.outcome == "held by another"
        return counted(inputs)

    runner = runner_of(filled, compute=slow, lease_seconds=1.0)
    assert run_period(runner, JANUARY, THIRD).outcome == "published"


def test_who_lost_the_lease_publishes_nothing(filled: Book) -> None:
    """A stall past the lease, in which the lease thread stands still too: another takes over."""

    def taken(inputs: PeriodInputs) -> PeriodResult:
        claims[0] = None
        time.sleep(1.2)
        other = run_period(runner_of(filled, owner="other"), JANUARY, THIRD)
        assert other.outcome == "published"
        return counted(inputs)

    claims: list[object] = [0]
    runner = runner_of(filled, compute=taken, lease_seconds=1.0)
    book = _Deaf(filled)
    with pytest.raises(LostClaimError):
        run_period(replace(runner, book=book), JANUARY, THIRD)  # type: ignore[arg-type]
    assert len(filled.runs(SITE)) == 1


class _Deaf:
    """A book whose leases cannot be extended, as seen by a process that stands still."""

    def __init__(self, book: Book) -> None:
        self._book = book

    def __getattr__(self, name: str) -> object:
        if name == "extend":
            return lambda claim, *, lease_seconds: claim
        return getattr(self._book, name)


@pytest.mark.parametrize("point", POINTS)
def test_a_fault_at_any_point_leaves_nothing_and_a_retry_finishes(filled: Book, point: str) -> None:
    failpoints.arm(f"{point}=raise")
    with pytest.raises(failpoints.ReachedError, match=point):
        run_period(runner_of(filled), JANUARY, THIRD)
    assert filled.runs(SITE) == ()
    assert filled.current(SITE, JANUARY) is None
    assert run_period(runner_of(filled), JANUARY, THIRD).outcome == "published"
    assert len(filled.runs(SITE)) == 1


def test_after_the_commit_a_fault_changes_nothing_any_more(filled: Book) -> None:
    failpoints.arm("after_commit=raise")
    with pytest.raises(failpoints.ReachedError):
        run_period(runner_of(filled), JANUARY, THIRD)
    assert run_period(runner_of(filled), JANUARY, THIRD).outcome == "unchanged"
    assert len(filled.runs(SITE)) == 1


def test_what_cannot_be_solved_gives_its_claim_back(filled: Book) -> None:
    def fails(_: PeriodInputs) -> PeriodResult:
        raise NotAcceptedError(["planted"])

    with pytest.raises(NotAcceptedError):
        run_period(runner_of(filled, compute=fails), JANUARY, THIRD)
    assert run_period(runner_of(filled, owner="next"), JANUARY, THIRD).outcome == "published"


def test_a_site_that_the_book_does_not_know_is_named(book: Book) -> None:
    with pytest.raises(ConfigError, match="site five nodes: the book has no version of it"):
        run_period(runner_of(book), JANUARY, THIRD)
