"""Decisions and site versions: kept with an entry, in force only by the rules."""

from __future__ import annotations

import json
from dataclasses import replace
from datetime import date, timedelta

import pytest

from recon.app.ports import Book
from recon.audit.digest import digest_bytes
from recon.errors import ConflictError, DataError
from tests.db.samples import SEEN, SITE, material, proposal, version

HOUR = timedelta(hours=1)


def test_a_decision_is_in_force_from_when_it_was_made(book: Book) -> None:
    made = book.decide(SITE, proposal())
    [found] = material(book).decisions
    assert (found.decision, found.kind, found.tag, found.by) == (
        made,
        "set aside",
        "WI-102",
        "j.doe",
    )
    assert material(book, SEEN - HOUR).decisions == ()
    assert material(book, first_day=date(2026, 1, 3)).decisions == ()
    [entry] = book.audit(SITE)
    assert (entry.action, entry.actor, entry.subject) == ("decide", "j.doe", made)
    assert json.loads(entry.body)["reason"] == "belt ran empty"


def test_a_decision_that_needs_approval_waits_for_another_person(book: Book) -> None:
    made = book.decide(SITE, proposal(needs_approval=True))
    assert material(book, SEEN + HOUR).decisions == ()
    with pytest.raises(ConflictError, match="another person must answer"):
        book.approve(SITE, made, by="j.doe", at=SEEN + HOUR, digest_seen=made, granted=True)
    with pytest.raises(ConflictError, match="what was seen has digest"):
        book.approve(SITE, made, by="a.roe", at=SEEN + HOUR, digest_seen="0" * 64, granted=True)
    book.approve(SITE, made, by="a.roe", at=SEEN + HOUR, digest_seen=made, granted=True)
    assert material(book).decisions == ()
    assert [d.decision for d in material(book, SEEN + HOUR).decisions] == [made]
    with pytest.raises(ConflictError, match=r"answered by a\.roe already"):
        book.approve(SITE, made, by="b.poe", at=SEEN + HOUR, digest_seen=made, granted=False)
    with pytest.raises(ConflictError, match="no decision"):
        book.approve(SITE, "f" * 64, by="b.poe", at=SEEN, digest_seen="f" * 64, granted=True)


def test_a_refused_decision_is_never_in_force(book: Book) -> None:
    made = book.decide(SITE, proposal(needs_approval=True))
    book.approve(SITE, made, by="a.roe", at=SEEN, digest_seen=made, granted=False)
    assert material(book, SEEN + HOUR).decisions == ()


def test_a_decision_is_withdrawn_by_another_decision_and_only_from_then_on(book: Book) -> None:
    made = book.decide(SITE, proposal())
    book.decide(SITE, proposal(kind="withdraw", tag=made, made_at=SEEN + HOUR))
    assert [d.decision for d in material(book).decisions] == [made]
    assert material(book, SEEN + HOUR).decisions == ()


def test_the_same_decision_sent_twice_is_kept_once(book: Book) -> None:
    assert book.decide(SITE, proposal()) == book.decide(SITE, proposal())
    assert len(list(book.audit(SITE))) == 1


def test_a_version_is_kept_once_and_only_as_its_digest_says(book: Book) -> None:
    assert book.add_site_version(version())
    assert not book.add_site_version(version())
    with pytest.raises(DataError, match="its text has digest"):
        book.add_site_version(replace(version(), content="name = 'six'\n"))
    assert book.site_versions(SITE) == (version(),)
    assert book.sites() == (SITE,)


def test_the_versions_given_are_those_known_at_the_cut_from_the_months_first_day(
    book: Book,
) -> None:
    def kept(text: str, valid: date, hours: int = 0) -> str:
        made = replace(
            version(text, SEEN + hours * HOUR),
            digest=digest_bytes(text.encode()),
            valid_from=valid,
        )
        book.add_site_version(made)
        return made.digest

    kept("first", date(2025, 6, 1))
    before = kept("second", date(2025, 12, 1))
    inside = kept("third", date(2026, 1, 2))
    kept("not yet", date(2026, 1, 9))
    corrected = kept("third, corrected", date(2026, 1, 2), hours=1)
    assert [v.digest for v in material(book).versions] == [before, inside]
    assert [v.digest for v in material(book, SEEN + HOUR).versions] == [before, corrected]
