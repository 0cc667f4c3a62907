"""Publishing: all or nothing, once for the same data, fenced by the token, read back exactly."""

from __future__ import annotations

import json
import math
import struct
from dataclasses import replace
from datetime import date, timedelta

import pytest
from sqlalchemy import func, select

from recon import failpoints
from recon.app.identity import data_digest
from recon.app.ports import Book
from recon.audit.chain import Head, check_chain
from recon.db.book import SqlBook
from recon.db.rows import RESULT_TABLES
from recon.db.tables import RUN
from recon.errors import BookUnavailableError, DataError, LostClaimError
from tests.db.samples import (
    MONTH,
    SEEN,
    SITE,
    claimed,
    filled,
    inputs,
    published,
    pulled,
    record,
    result,
)


def test_what_was_published_is_read_back_to_the_last_bit(book: Book) -> None:
    filled(book)
    head = published(book, inputs(book))
    back = book.result(SITE, head.run)
    expected = result()
    assert sorted(back.cells, key=repr) == sorted(expected.cells, key=repr)
    assert back.findings == expected.findings
    assert sorted(back.leaves, key=repr) == sorted(expected.leaves, key=repr)
    assert sorted(back.estimates, key=repr) == sorted(expected.estimates, key=repr)
    assert back.measurements == expected.measurements
    assert (back.offsets, back.figures) == (expected.offsets, expected.figures)
    assert sorted(back.closing, key=repr) == sorted(expected.closing, key=repr)
    assert (back.method, back.summary) == (expected.method, expected.summary)
    # -0.0 is the one number that is brought to another form, before hashing and storing
    assert struct.pack("d", back.measurements[0].standardised) == struct.pack("d", 0.0)


def test_a_run_carries_what_it_was_made_from(book: Book) -> None:
    filled(book)
    given = inputs(book)
    head = published(book, given)
    assert (head.run, head.revision, head.kind) == (1, 1, "published")
    assert head.data_digest == data_digest(given)
    assert book.current(SITE, MONTH) == head
    assert book.current(SITE, MONTH, date(2026, 1, 3)) == head
    assert book.current(SITE, MONTH, date(2026, 1, 2)) is None
    assert book.published(SITE, MONTH, given.through, head.data_digest) == head
    assert book.runs(SITE) == book.runs(SITE, MONTH) == (head,)
    assert book.runs(SITE, date(2026, 2, 1)) == ()
    [standing] = book.standing(SITE)
    assert (standing.run, standing.knowledge_cut) == (head.run, SEEN)


def test_the_audit_entry_of_a_run_holds_the_digest_of_every_table(book: Book) -> None:
    filled(book)
    head = published(book, inputs(book))
    entries = list(book.audit(SITE))
    assert [entry.action for entry in entries] == ["add site version", "publish", "move pointer"]
    assert isinstance(check_chain(entries), Head)
    body = json.loads(entries[1].body)
    assert set(body["table_digests"]) == {table.name for table in RESULT_TABLES}
    assert body["result_digest"] == head.result_digest
    assert list(book.audit(SITE, after=2)) == entries[2:]


def test_data_a_then_b_then_a_move_the_pointer_back_and_compute_nothing_again(book: Book) -> None:
    filled(book)
    first = published(book, inputs(book))
    later = SEEN + timedelta(hours=1)
    book.keep(SITE, pulled([record(0, 0.9)]), seen_at=later)
    second = published(book, inputs(book, later), scale=2.0)
    assert (second.run, second.revision) == (2, 2)
    last = later + timedelta(hours=1)
    book.keep(SITE, pulled([record(0, 0.2)]), seen_at=last)
    given = inputs(book, last)
    assert data_digest(given) == first.data_digest
    found = book.published(SITE, MONTH, given.through, first.data_digest)
    assert found == first
    moved = book.point(claimed(book, given), first.run, at=last, actor="service")
    assert moved == first == book.current(SITE, MONTH)
    moves = [json.loads(e.body) for e in book.audit(SITE) if e.action == "move pointer"]
    assert [(m["from_run"], m["to_run"]) for m in moves] == [(None, "1"), ("1", "2"), ("2", "1")]
    assert len(book.runs(SITE)) == 2


def test_publishing_the_same_data_again_writes_no_second_run(book: Book) -> None:
    filled(book)
    given = inputs(book)
    first = published(book, given)
    later = SEEN + timedelta(hours=1)
    book.keep(SITE, pulled([record(0, 0.9)]), seen_at=later)
    published(book, inputs(book, later), scale=2.0)
    book.keep(SITE, pulled([record(0, 0.2)]), seen_at=later + timedelta(hours=1))
    again = published(book, inputs(book, later + timedelta(hours=1)), scale=3.0)
    assert again == first
    assert len(book.runs(SITE)) == 2


def test_a_worker_that_was_overtaken_cannot_publish(book: Book) -> None:
    filled(book)
    given = inputs(book)
    slow = book.claim(
        SITE,
        month=MONTH,
        through=given.through,
        data_digest=data_digest(given),
        knowledge_cut=SEEN,
        owner="slow",
        lease_seconds=-1,
    )
    assert slow is not None
    quick = claimed(book, given, owner="quick")
    assert quick.token == slow.token + 1
    with pytest.raises(LostClaimError, match="quick holds token 2"):
        book.publish(slow, given, result(), at=SEEN, actor="service")
    assert book.runs(SITE) == ()
    book.publish(quick, given, result(), at=SEEN, actor="service")
    with pytest.raises(LostClaimError, match="it is done"):
        book.publish(quick, given, result(), at=SEEN, actor="service")
    assert len(book.runs(SITE)) == 1


def test_a_run_that_knows_less_never_takes_the_place_of_one_that_knows_more(book: Book) -> None:
    filled(book)
    old = inputs(book)
    later = SEEN + timedelta(hours=1)
    book.keep(SITE, pulled([record(0, 0.9)]), seen_at=later)
    stale = book.claim(
        SITE,
        month=MONTH,
        through=old.through,
        data_digest=data_digest(old),
        knowledge_cut=SEEN,
        owner="slow",
        lease_seconds=-1,
    )
    assert stale is not None
    new = published(book, inputs(book, later))
    assert (
        book.claim(
            SITE,
            month=MONTH,
            through=old.through,
            data_digest=data_digest(old),
            knowledge_cut=SEEN,
            owner="slow",
            lease_seconds=60,
        )
        is None
    )
    assert book.current(SITE, MONTH) == new


@pytest.mark.parametrize(
    "where", ["mid_publish=raise@1", "mid_publish=raise@8", "before_commit=raise"]
)
def test_a_publication_broken_off_leaves_nothing_and_succeeds_when_repeated(
    book: Book, where: str
) -> None:
    filled(book)
    given = inputs(book)
    claim = claimed(book, given)
    failpoints.arm(where)
    with pytest.raises(failpoints.ReachedError):
        book.publish(claim, given, result(), at=SEEN, actor="service")
    assert book.runs(SITE) == ()
    assert book.current(SITE, MONTH) is None
    assert [entry.action for entry in book.audit(SITE)] == ["add site version"]
    head = book.publish(claim, given, result(), at=SEEN, actor="service")
    assert book.result(SITE, head.run).findings == result().findings


def test_a_connection_cut_in_the_middle_leaves_nothing(book: Book) -> None:
    filled(book)
    given = inputs(book)
    claim = claimed(book, given)
    failpoints.arm("mid_publish=cut@3")
    with pytest.raises(BookUnavailableError):
        book.publish(claim, given, result(), at=SEEN, actor="service")
    assert book.runs(SITE) == ()
    book.publish(claim, given, result(), at=SEEN, actor="service")
    assert len(book.runs(SITE)) == 1


@pytest.mark.parametrize("value", [math.nan, math.inf])
def test_a_number_that_is_not_finite_is_refused_and_nothing_is_written(
    book: Book, value: float
) -> None:
    filled(book)
    given = inputs(book)
    bad = replace(result(), closing=(replace(result().closing[0], value=value),))
    with pytest.raises(DataError, match=r"closing_stock, shed, Cu: .* is not a finite"):
        book.publish(claimed(book, given), given, bad, at=SEEN, actor="service")
    assert book.runs(SITE) == ()


def test_a_missing_value_without_reason_and_a_key_twice_are_refused(book: Book) -> None:
    filled(book)
    given = inputs(book)
    claim = claimed(book, given)
    cells = result().cells
    for bad, said in (
        ((replace(cells[2], reason=""),), "no value and no reason"),
        ((cells[0], cells[0]), "stands twice"),
    ):
        with pytest.raises(DataError, match=said):
            book.publish(claim, given, replace(result(), cells=bad), at=SEEN, actor="service")
    assert book.runs(SITE) == ()


def test_inputs_that_are_not_the_claims_are_refused(book: Book) -> None:
    filled(book)
    given = inputs(book)
    claim = claimed(book, given)
    other = replace(given, opening_signed=False)
    with pytest.raises(DataError, match="the claim is for data"):
        book.publish(claim, other, result(), at=SEEN, actor="service")


def test_a_record_that_was_never_kept_as_evidence_is_refused(book: Book) -> None:
    filled(book)
    given = inputs(book)
    invented = replace(given, records=(*given.records, record(99)))
    with pytest.raises(DataError, match=r"S099.* was never kept as evidence"):
        book.publish(claimed(book, invented), invented, result(), at=SEEN, actor="service")


def test_numbers_of_runs_and_entries_have_no_gap_after_failures(sql_book: SqlBook) -> None:
    filled(sql_book)
    given = inputs(sql_book)
    claim = claimed(sql_book, given)
    for _ in range(3):
        failpoints.arm("before_commit=raise")
        with pytest.raises(failpoints.ReachedError):
            sql_book.publish(claim, given, result(), at=SEEN, actor="service")
    sql_book.publish(claim, given, result(), at=SEEN, actor="service")
    with sql_book.database.reading() as connection:
        assert connection.execute(select(func.max(RUN.c.run))).scalar() == 1
    assert [entry.seq for entry in sql_book.audit(SITE)] == [1, 2, 3]


def test_confirming_a_run_moves_its_cut_and_logs_nothing(book: Book) -> None:
    filled(book)
    published(book, inputs(book))
    [before] = book.standing(SITE)
    count = len(list(book.audit(SITE)))
    later = SEEN + timedelta(hours=7)
    book.confirm(before, SITE, knowledge_cut=later, at=later)
    [after] = book.standing(SITE)
    assert (after.run, after.knowledge_cut, after.moved_at) == (before.run, later, later)
    assert len(list(book.audit(SITE))) == count
