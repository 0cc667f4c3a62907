"""Evidence: kept once, compared with the source, and given as it was known at any cut."""

from __future__ import annotations

import math
from dataclasses import replace
from datetime import UTC, date, datetime, timedelta

import pytest

from recon import failpoints
from recon.app.book_types import Chunk, Reread, Watermark
from recon.app.ports import Book
from recon.errors import AuditError, DataError
from recon.ingest.rows import RowKind
from tests.db.samples import (
    SEEN,
    SITE,
    at,
    filled,
    material,
    pulled,
    readings_chunk,
    record,
    tag_day,
)

HOUR = timedelta(hours=1)
WHOLE = Reread(kind=RowKind.ASSAY, since=at(1, 0), until=at(4, 0))
DAY = date(2026, 1, 2)


def test_keeping_the_same_pull_twice_adds_nothing(book: Book) -> None:
    filled(book)
    before = material(book)
    chunk = readings_chunk("WI-101", date(2026, 1, 1), [(h, 4.0 + h / 7, 0) for h in range(24)])
    kept = book.keep(
        SITE,
        pulled(
            [record(n, 0.2 + n / 97) for n in range(12)],
            [chunk],
            [tag_day(chunk, 100 / 3)],
            reread=WHOLE,
        ),
        seen_at=SEEN + HOUR,
    )
    assert (kept.chunks, kept.tag_days, kept.records, kept.findings) == (0, 0, 0, ())
    assert material(book, SEEN + HOUR) == before


def test_a_chunk_is_given_back_as_it_came(book: Book) -> None:
    chunk = readings_chunk("WI-101", DAY, [(0, 1.5, 0), (1, 2.5, 3)])
    book.keep(SITE, pulled(chunks=[chunk], tag_days=[tag_day(chunk)]), seen_at=SEEN)
    assert book.chunk(SITE, chunk.digest) == chunk
    with pytest.raises(AuditError, match="no such chunk"):
        book.chunk(SITE, "0" * 64)


def test_a_chunk_that_is_not_what_its_digest_says_is_refused(book: Book) -> None:
    chunk = replace(readings_chunk("WI-101", DAY, [(0, 1.5, 0)]), content=b"other")
    with pytest.raises(DataError, match="another digest"):
        book.keep(SITE, pulled(chunks=[chunk]), seen_at=SEEN)


def test_records_come_back_with_every_column(book: Book) -> None:
    kept = record(5, None, lot="L7", unit="g/t", extra=(("crew", "B"), ("found as", "-0,3")))
    book.keep(SITE, pulled([kept]), seen_at=SEEN)
    assert material(book).records == (kept,)


def test_a_value_changed_at_the_source_is_in_force_and_a_finding(book: Book) -> None:
    filled(book)
    kept = book.keep(SITE, pulled([record(3, 0.9)], reread=None), seen_at=SEEN + HOUR)
    [finding] = kept.findings
    assert (finding.code, finding.subject) == ("changed-at-source", "S003|FEED|Cu|final")
    assert "0.230928 % became 0.9 %" in finding.text
    assert book.source_changes(SITE, at(1, 0), at(4, 0)) == (finding,)
    now = {r.document: r.value for r in material(book, SEEN + HOUR).records}
    then = {r.document: r.value for r in material(book).records}
    assert (now["S003"], then["S003"]) == (0.9, 0.2 + 3 / 97)


def test_a_later_revision_is_in_force_and_no_finding(book: Book) -> None:
    filled(book)
    revised = record(3, 0.9, known_at=SEEN + HOUR)
    kept = book.keep(SITE, pulled([revised]), seen_at=SEEN + 2 * HOUR)
    assert (kept.records, kept.findings) == (1, ())
    assert {r.document: r.value for r in material(book, SEEN + 2 * HOUR).records}["S003"] == 0.9
    assert {r.document: r.value for r in material(book, SEEN + HOUR).records}["S003"] != 0.9


def test_stages_are_kept_side_by_side(book: Book) -> None:
    first = record(3, 0.21, stage="provisional")
    book.keep(SITE, pulled([first, record(3, 0.22)]), seen_at=SEEN)
    assert {r.stage: r.value for r in material(book).records} == {
        "provisional": 0.21,
        "final": 0.22,
    }


def test_a_record_gone_from_the_source_stays_in_force_and_is_said_once(book: Book) -> None:
    filled(book)
    rest = [record(n, 0.2 + n / 97) for n in range(12) if n != 4]
    kept = book.keep(SITE, pulled(rest, reread=WHOLE), seen_at=SEEN + HOUR)
    assert [(f.code, f.subject) for f in kept.findings] == [
        ("vanished-at-source", "S004|FEED|Cu|final")
    ]
    again = book.keep(SITE, pulled(rest, reread=WHOLE), seen_at=SEEN + 2 * HOUR)
    assert again.findings == ()
    assert len(material(book, SEEN + 2 * HOUR).records) == 12
    back = book.keep(
        SITE, pulled([*rest, record(4, 0.2 + 4 / 97)], reread=WHOLE), seen_at=SEEN + 3 * HOUR
    )
    assert [f.code for f in back.findings] == ["back-at-source"]
    gone = book.keep(SITE, pulled(rest, reread=WHOLE), seen_at=SEEN + 4 * HOUR)
    assert [f.code for f in gone.findings] == ["vanished-at-source"]


def test_a_revision_that_moves_a_record_out_of_a_span_takes_it_out_of_force_there(
    book: Book,
) -> None:
    filled(book)
    moved = record(3, true_from=at(20, 0), true_to=at(20, 8), known_at=SEEN + HOUR)
    book.keep(SITE, pulled([moved]), seen_at=SEEN + HOUR)
    assert "S003" not in {r.document for r in material(book, SEEN + HOUR).records}


def test_readings_changed_at_the_source_are_in_force_and_a_finding(book: Book) -> None:
    before = readings_chunk("WI-101", DAY, [(0, 1.0, 0), (1, 2.0, 0), (2, 3.0, 0)])
    book.keep(SITE, pulled(chunks=[before], tag_days=[tag_day(before, 6.0)]), seen_at=SEEN)
    after = readings_chunk("WI-101", DAY, [(0, 1.0, 0), (1, 2.5, 0), (3, 4.0, 0)])
    kept = book.keep(
        SITE, pulled(chunks=[after], tag_days=[tag_day(after, 7.5)]), seen_at=SEEN + HOUR
    )
    [finding] = kept.findings
    assert finding.code == "changed-at-source"
    assert "of 3 readings the book had, 1 now read differently" in finding.text
    assert "1 are gone" in finding.text
    assert [row.amount for row in material(book, SEEN + HOUR).tag_days] == [7.5]
    assert [row.amount for row in material(book).tag_days] == [6.0]


def test_readings_that_only_come_late_or_are_corrected_openly_are_no_finding(book: Book) -> None:
    before = readings_chunk("WI-101", DAY, [(0, 1.0, 0), (1, 2.0, 0)])
    book.keep(SITE, pulled(chunks=[before], tag_days=[tag_day(before, 3.0)]), seen_at=SEEN)
    after = readings_chunk("WI-101", DAY, [(0, 1.0, 0), (1, 2.5, 30), (2, 3.0, 30)])
    kept = book.keep(
        SITE, pulled(chunks=[after], tag_days=[tag_day(after, 6.5)]), seen_at=SEEN + HOUR
    )
    assert (kept.findings, kept.tag_days) == ((), 1)


def test_a_day_of_readings_that_is_gone_stays_in_force_and_is_said_once(book: Book) -> None:
    before = readings_chunk("WI-101", DAY, [(0, 1.0, 0), (1, 2.0, 0)])
    book.keep(SITE, pulled(chunks=[before], tag_days=[tag_day(before, 3.0)]), seen_at=SEEN)
    empty = readings_chunk("WI-101", DAY, [])
    gone = pulled(chunks=[empty], tag_days=[tag_day(empty, None)])
    kept = book.keep(SITE, gone, seen_at=SEEN + HOUR)
    assert [f.code for f in kept.findings] == ["vanished-at-source"]
    assert book.keep(SITE, gone, seen_at=SEEN + 2 * HOUR).findings == ()
    assert [row.amount for row in material(book, SEEN + 2 * HOUR).tag_days] == [3.0]
    back = pulled(chunks=[before], tag_days=[tag_day(before, 3.0)])
    assert [f.code for f in book.keep(SITE, back, seen_at=SEEN + 3 * HOUR).findings] == [
        "back-at-source"
    ]


def test_the_same_readings_integrated_anew_are_in_force_and_no_finding(book: Book) -> None:
    chunk = readings_chunk("WI-101", DAY, [(0, 1.0, 0), (1, 2.0, 0)])
    book.keep(SITE, pulled(chunks=[chunk], tag_days=[tag_day(chunk, 3.0)]), seen_at=SEEN)
    kept = book.keep(SITE, pulled(tag_days=[tag_day(chunk, 2.9)]), seen_at=SEEN + HOUR)
    assert (kept.tag_days, kept.findings) == (1, ())
    assert [row.amount for row in material(book, SEEN + HOUR).tag_days] == [2.9]


def test_the_watermark_moves_with_its_rows_or_not_at_all(book: Book) -> None:
    mark = Watermark(source="assay", known_through=at(3), fingerprint="12", read_at=SEEN)
    failpoints.arm("before_commit=raise")
    with pytest.raises(failpoints.ReachedError):
        book.keep(SITE, pulled([record(1)], watermark=mark), seen_at=SEEN)
    assert (book.watermarks(SITE), material(book).records) == ({}, ())
    book.keep(SITE, pulled([record(1)], watermark=mark), seen_at=SEEN)
    assert book.watermarks(SITE) == {"assay": mark}
    later = replace(mark, known_through=at(4))
    book.keep(SITE, pulled(watermark=later), seen_at=SEEN + HOUR)
    assert book.watermarks(SITE) == {"assay": later}


@pytest.mark.parametrize(
    ("bad", "said"),
    [
        (record(1, math.nan), "nan is not a finite number"),
        (record(1, -math.inf), "-inf is not a finite number"),
        (record(1, known_at=datetime(2026, 1, 2)), "without zone"),  # noqa: DTZ001
        (record(1, lot="a\0b"), "NUL"),
    ],
)
def test_a_row_that_no_database_keeps_is_refused_and_nothing_of_its_pull_is_kept(
    book: Book, bad: object, said: str
) -> None:
    with pytest.raises(DataError, match=said):
        book.keep(SITE, pulled([record(2), bad]), seen_at=SEEN)  # type: ignore[list-item]
    assert material(book).records == ()


def test_what_arrived_after_a_cut_is_told_by_when_it_became_known_to_the_book(book: Book) -> None:
    filled(book)
    span = {"since": at(1, 0), "until": at(4, 0)}
    assert book.arrivals(SITE, after=SEEN, **span) is None
    book.keep(SITE, pulled([record(20)]), seen_at=SEEN + HOUR)
    book.keep(SITE, pulled([record(21)]), seen_at=SEEN + 3 * HOUR)
    assert book.arrivals(SITE, after=SEEN, **span) == (SEEN + HOUR, SEEN + 3 * HOUR)
    assert book.arrivals(SITE, after=SEEN, since=at(10), until=at(12)) is None


def test_a_row_known_after_the_cut_is_not_in_force_yet(book: Book) -> None:
    filled(book)
    assert material(book, SEEN - HOUR).records == ()
    assert material(book, SEEN - HOUR).tag_days == ()


def test_material_is_the_same_from_both_databases_whatever_the_order_of_keeping(
    book: Book,
) -> None:
    for number in (7, 2, 11, 0):
        book.keep(SITE, pulled([record(number)]), seen_at=SEEN)
    assert [r.document for r in material(book).records] == ["S000", "S002", "S007", "S011"]


def chunk_of_kind(book: Book, kind: RowKind) -> Chunk:
    from sqlalchemy import select

    from recon.db.book import SqlBook
    from recon.db.tables import EVIDENCE_CHUNK

    assert isinstance(book, SqlBook)
    with book.database.reading() as connection:
        digest = connection.execute(
            select(EVIDENCE_CHUNK.c.digest).where(EVIDENCE_CHUNK.c.kind == kind.value)
        ).scalar_one()
    return book.chunk(SITE, digest)


def test_the_evidence_of_a_record_can_be_read_by_anybody(book: Book) -> None:
    book.keep(SITE, pulled([record(1, 0.285)]), seen_at=SEEN)
    chunk = chunk_of_kind(book, RowKind.ASSAY)
    assert chunk.rows == 1
    assert chunk.content.decode().splitlines()[1] == (
        '["assay","S001","FEED","Cu","final","2026-01-02T00:00:00.000000Z",'
        '"2026-01-02T08:00:00.000000Z","2026-01-03T12:00:00.000000Z","0.285","%","",'
        r'"[[\"method\",\"XRF\"]]"]'
    )
    assert chunk.day == datetime(2026, 1, 2, tzinfo=UTC).date()
