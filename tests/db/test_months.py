"""What a month takes from those before it: printed stocks, leaves, and whether they are signed."""

from __future__ import annotations

from dataclasses import replace
from datetime import date, timedelta

from recon.app.book_types import Material
from recon.app.identity import data_digest
from recon.app.period import PeriodInputs, PeriodResult
from recon.app.ports import Book
from recon.db.book import SqlBook
from recon.db.tables import CLOSING_EVENT
from recon.tabulate.leaves import YearLeaf
from tests.db.samples import SEEN, SITE, filled, inputs, material, result


def publish(book: Book, given: PeriodInputs, made: PeriodResult) -> int:
    claim = book.claim(
        SITE,
        month=given.month,
        through=given.through,
        data_digest=data_digest(given),
        knowledge_cut=given.knowledge_cut,
        owner="worker",
        lease_seconds=60,
    )
    assert claim is not None
    return book.publish(claim, given, made, at=given.knowledge_cut, actor="service").run


def month_of(book: Book, month: date, through: date, scale: float) -> int:
    given = replace(inputs(book), month=month, through=through)
    leaf = YearLeaf(month=f"{month:%Y-%m}", table="site-balance", row="feed", column="Cu", value=1)
    return publish(book, given, replace(result(scale), leaves=(leaf,)))


def february(book: Book) -> Material:
    return material(book, SEEN, month=date(2026, 2, 1), through=date(2026, 2, 3))


def test_the_first_month_takes_its_stocks_on(book: Book) -> None:
    filled(book)
    found = material(book)
    assert (found.first_month, found.opening, found.opening_run, found.opening_signed) == (
        True,
        (),
        None,
        True,
    )


def test_the_opening_is_the_closing_of_the_whole_month_before_as_it_now_stands(
    book: Book,
) -> None:
    filled(book)
    month_of(book, date(2026, 1, 1), date(2026, 1, 30), 1.0)
    partial = february(book)
    assert (partial.opening, partial.first_month) == ((), False)
    run = month_of(book, date(2026, 1, 1), date(2026, 1, 31), 2.0)
    found = february(book)
    assert found.opening_run == run
    assert not found.opening_signed
    assert [(s.node, s.quantity, s.value) for s in found.opening] == [
        ("shed", "Cu", 25.0),
        ("shed", "mass", None),
    ]


def test_the_opening_is_signed_once_the_month_before_is_closed_and_not_when_reopened(
    sql_book: SqlBook,
) -> None:
    filled(sql_book)
    month_of(sql_book, date(2026, 1, 1), date(2026, 1, 31), 1.0)
    for seq, state in enumerate(("reviewed", "approved", "closed", "reopened"), start=1):
        with sql_book.database.writing() as connection:
            connection.execute(
                CLOSING_EVENT.insert().values(
                    site=SITE,
                    month=date(2026, 1, 1),
                    seq=seq,
                    state=state,
                    digest_seen="",
                    by_person="a.roe",
                    at=SEEN + timedelta(hours=seq),
                    content="",
                )
            )
        assert february(sql_book).opening_signed == (state == "closed")


def test_leaves_of_the_twelve_months_before_are_given(book: Book) -> None:
    filled(book)
    for month, last in ((date(2025, 1, 1), 31), (date(2025, 2, 1), 28), (date(2026, 1, 1), 31)):
        month_of(book, month, month.replace(day=last), 1.0)
    found = february(book)
    assert [leaf.month for leaf in found.year] == ["2025-02", "2026-01"]
