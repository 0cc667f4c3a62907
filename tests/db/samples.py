"""A small month of evidence and a result for it, made of plain rows; no fit is done here."""

from __future__ import annotations

import hashlib
from collections.abc import Sequence
from dataclasses import replace
from datetime import UTC, date, datetime, timedelta

from recon.app.book_types import Chunk, Claim, Material, Proposal, Pulled, RunHead, StoredVersion
from recon.app.identity import data_digest
from recon.app.period import (
    EstimateRow,
    FigureRow,
    MeasurementRow,
    OffsetRow,
    PeriodInputs,
    PeriodResult,
)
from recon.app.ports import Book
from recon.audit.digest import digest_bytes
from recon.findings import Finding, Severity
from recon.ingest.given import OpeningStock
from recon.ingest.rows import Record, RowKind, TagDay
from recon.tabulate.cells import Cell
from recon.tabulate.leaves import YearLeaf

SITE = "five"
MONTH = date(2026, 1, 1)
SEEN = datetime(2026, 1, 4, 6, tzinfo=UTC)


def at(day: int, hour: int = 12) -> datetime:
    return datetime(2026, 1, day, hour, tzinfo=UTC)


def readings_chunk(tag: str, day: date, readings: Sequence[tuple[int, float, int]]) -> Chunk:
    """Readings as (hour of the day, value, hours until known), in the form of evidence."""
    start = datetime(day.year, day.month, day.day, tzinfo=UTC)

    def stamp(hour: int) -> int:
        return int((start + timedelta(hours=hour)).timestamp()) * 1_000_000

    lines = [f"{tag},{day.isoformat()}", "at,value,quality,known_at"]
    lines += [f"{stamp(h)},{value!r},0,{stamp(h + later)}" for h, value, later in readings]
    content = ("\n".join(lines) + "\n").encode()
    return Chunk(
        digest=hashlib.sha256(content).hexdigest(),
        kind=RowKind.READING,
        subject=tag,
        day=day,
        rows=len(readings),
        content=content,
    )


def tag_day(chunk: Chunk, amount: float | None = 100.0) -> TagDay:
    return TagDay(
        tag=chunk.subject,
        day=chunk.day,
        chunk=chunk.digest,
        amount=amount,
        covered_hours=24.0,
        day_hours=24.0,
        running_hours=24.0,
        mean=None if amount is None else amount / 24,
        readings=chunk.rows,
        bad=0,
        last_known=datetime(chunk.day.year, chunk.day.month, chunk.day.day, 23, tzinfo=UTC),
    )


def record(number: int, value: float | None = 0.285, **changes: object) -> Record:
    made = Record(
        kind=RowKind.ASSAY,
        document=f"S{number:03}",
        subject="FEED",
        item="Cu",
        true_from=at(1 + number % 3, 0),
        true_to=at(1 + number % 3, 8),
        known_at=at(2 + number % 2),
        value=value,
        unit="%",
        stage="final",
        extra=(("method", "XRF"),),
    )
    return replace(made, **changes)  # type: ignore[arg-type]


def pulled(
    records: Sequence[Record] = (),
    chunks: Sequence[Chunk] = (),
    tag_days: Sequence[TagDay] = (),
    **more: object,
) -> Pulled:
    made = Pulled(
        query="SELECT * FROM assay",
        records=tuple(records),
        chunks=tuple(chunks),
        tag_days=tuple(tag_days),
    )
    return replace(made, **more)  # type: ignore[arg-type]


def version(text: str = "name = 'five'\n", known: datetime = SEEN) -> StoredVersion:
    return StoredVersion(
        site=SITE,
        digest=digest_bytes(text.encode()),
        valid_from=date(2025, 12, 1),
        known_at=known,
        added_by="j.doe",
        content=text,
    )


def filled(book: Book, seen: datetime = SEEN) -> None:
    """Keep a site version, three days of two tags and twelve assays."""
    book.add_site_version(version())
    chunks = [
        readings_chunk(tag, date(2026, 1, day), [(h, 4.0 + h / 7, 0) for h in range(24)])
        for tag in ("WI-101", "WI-102")
        for day in (1, 2, 3)
    ]
    book.keep(
        SITE,
        pulled(
            records=[record(n, 0.2 + n / 97) for n in range(12)],
            chunks=chunks,
            tag_days=[tag_day(chunk, 100 / 3) for chunk in chunks],
        ),
        seen_at=seen,
    )


def material(book: Book, cut: datetime = SEEN, **changes: object) -> Material:
    asked: dict[str, object] = {
        "month": MONTH,
        "through": date(2026, 1, 3),
        "first_day": date(2025, 12, 2),
        "since": datetime(2025, 12, 2, tzinfo=UTC),
        "until": at(4, 0),
        "knowledge_cut": cut,
        **changes,
    }
    return book.material(SITE, **asked)  # type: ignore[arg-type]


def inputs(book: Book, cut: datetime = SEEN) -> PeriodInputs:
    """What a run through 3 January is computed from; versions are left out, none is parsed."""
    found = material(book, cut)
    return PeriodInputs(
        site=SITE,
        month=MONTH,
        through=date(2026, 1, 3),
        versions=(),
        tag_days=found.tag_days,
        records=found.records,
        decisions=found.decisions,
        opening=found.opening,
        opening_signed=found.opening_signed,
        year=found.year,
        knowledge_cut=cut,
    )


def result(scale: float = 1.0) -> PeriodResult:
    """A result of every kind of row, numbers that need all their digits among them."""
    days = [date(2026, 1, day) for day in (1, 2, 3)]
    return PeriodResult(
        measurements=(
            *(
                MeasurementRow(
                    day=day,
                    name="WI-101",
                    kind="meter",
                    stream="feed",
                    node=None,
                    boundary=None,
                    quantity="mass",
                    basis="amount",
                    unit="t",
                    value=scale * 1000 / 3,
                    u_random=0.1,
                    u=1 / 7,
                    held=False,
                    estimated=False,
                    reconciled=scale * 1001 / 3,
                    adjustment=scale / 3,
                    standardised=-0.0,
                    redundant=True,
                    sources="[]",
                )
                for day in days
            ),
            MeasurementRow(
                day=days[-1],
                name="shed survey",
                kind="stock",
                stream=None,
                node="shed",
                boundary="closing",
                quantity="Cu",
                basis="amount",
                unit="t",
                value=scale * 12.5,
                u_random=None,
                u=0.5,
                held=True,
                estimated=True,
                reconciled=None,
                adjustment=None,
                standardised=None,
                redundant=False,
                sources="[]",
            ),
        ),
        estimates=tuple(
            EstimateRow(
                day=day,
                place=place,
                boundary="",
                quantity=quantity,
                basis="amount",
                value=None if place == "slag" else scale * 1e22 / 3,
                u=None if place == "slag" else 5e-324,
                determined=place != "slag",
                at_bound=False,
                reason="not measured" if place == "slag" else "",
            )
            for day in days
            for place in ("feed", "slag")
            for quantity in ("mass", "Cu")
        ),
        offsets=(
            OffsetRow(source="belt scale", draw_from=MONTH, value=-1e-3, u=2e-3, standardised=-0.5),
        ),
        findings=(
            Finding(
                code="frozen-value",
                subject="WI-102",
                text="Tag WI-102 read 4.0 t/h for 6 h.",
                severity=Severity.SERIOUS,
                period=2,
                evidence=(("hours", "6.0"),),
            ),
            Finding(code="late", subject="S011", text="Came 9 days late."),
        ),
        figures=(
            FigureRow(
                name="Cu recovery",
                period="2026-01",
                value=0.9127,
                u=0.004,
                basis="fitted",
                budget="[]",
                reason="",
            ),
        ),
        cells=(
            Cell(
                table="streams",
                period="2026-01",
                row="feed",
                column="dry",
                value=scale * 1001.0,
                u=3.5,
                unit="t",
                basis="fitted",
            ),
            Cell(table="streams", period="2026-01", row="feed", column="note", text="ok"),
            Cell(
                table="streams",
                period="2026-01",
                row="slag",
                column="dry",
                reason="not measured",
            ),
        ),
        closing=(
            OpeningStock(node="shed", quantity="Cu", value=scale * 12.5, u=0.5, basis="read"),
            OpeningStock(node="shed", quantity="mass", value=None, u=None, basis="by difference"),
        ),
        leaves=(
            YearLeaf(
                month="2026-01", table="site-balance", row="feed", column="Cu", value=scale * 99.5
            ),
        ),
        summary=(("unaccounted", "3 t of Cu"),),
        method=(("engine", "direct 1"), ("threads", "1")),
    )


def claimed(book: Book, given: PeriodInputs, owner: str = "worker-1") -> Claim:
    made = book.claim(
        SITE,
        month=given.month,
        through=given.through,
        data_digest=data_digest(given),
        knowledge_cut=given.knowledge_cut,
        owner=owner,
        lease_seconds=60,
    )
    assert made is not None
    return made


def published(book: Book, given: PeriodInputs, scale: float = 1.0) -> RunHead:
    return book.publish(
        claimed(book, given), given, result(scale), at=given.knowledge_cut, actor="service"
    )


def proposal(**changes: object) -> Proposal:
    made = Proposal(
        kind="set aside",
        tag="WI-102",
        first=date(2026, 1, 2),
        last=date(2026, 1, 2),
        value=None,
        reason="belt ran empty",
        evidence="shift log 2 January",
        by="j.doe",
        made_at=SEEN,
    )
    return replace(made, **changes)  # type: ignore[arg-type]
