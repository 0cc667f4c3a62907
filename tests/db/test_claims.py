"""Claims: one owner at a time, tokens that rise, leases that run out or are given back."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from datetime import timedelta

import pytest

from recon.app.book_types import Claim
from recon.app.ports import Book
from recon.errors import LostClaimError
from tests.db.samples import MONTH, SEEN, SITE

DAY = MONTH.replace(day=3)


def take(
    book: Book, owner: str, lease: float = 60, digest: str = "a", later: int = 0
) -> Claim | None:
    return book.claim(
        SITE,
        month=MONTH,
        through=DAY,
        data_digest=digest,
        knowledge_cut=SEEN + timedelta(hours=later),
        owner=owner,
        lease_seconds=lease,
    )


def test_only_one_of_many_workers_gets_a_claim(book: Book) -> None:
    with ThreadPoolExecutor(4) as pool:
        got = list(pool.map(lambda n: take(book, f"worker-{n}"), range(12)))
    assert sum(claim is not None for claim in got) == 1


def test_a_lease_that_ran_out_is_taken_over_with_a_higher_token(book: Book) -> None:
    first = take(book, "first", lease=-1)
    second = take(book, "second")
    assert first is not None
    assert second is not None
    assert (first.token, second.token) == (1, 2)
    with pytest.raises(LostClaimError, match="second holds token 2"):
        book.extend(first, lease_seconds=60)
    assert take(book, "third") is None


def test_a_lease_that_is_extended_is_not_taken_over(book: Book) -> None:
    first = take(book, "first", lease=-1)
    assert first is not None
    longer = book.extend(first, lease_seconds=60)
    assert longer.lease_until > first.lease_until
    assert replace(longer, lease_until=first.lease_until) == first
    assert take(book, "second") is None


def test_a_claim_given_back_is_free_at_once_and_giving_back_a_lost_one_does_nothing(
    book: Book,
) -> None:
    first = take(book, "first")
    assert first is not None
    book.give_back(first)
    second = take(book, "second")
    assert second is not None
    book.give_back(first)
    assert take(book, "third") is None


def test_claims_of_other_days_and_sites_do_not_stand_in_each_others_way(book: Book) -> None:
    assert take(book, "first") is not None
    for site, day in ((SITE, MONTH.replace(day=4)), ("six", DAY)):
        assert (
            book.claim(
                site,
                month=MONTH,
                through=day,
                data_digest="a",
                knowledge_cut=SEEN,
                owner="second",
                lease_seconds=60,
            )
            is not None
        )
