"""A book with the five-node site and a month of its rows kept, as a pull would leave it."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from dataclasses import replace
from datetime import UTC, date, datetime
from functools import lru_cache

import numpy as np

from recon.app.book_types import Chunk, Pulled, StoredVersion
from recon.app.period import PeriodInputs, PeriodResult
from recon.app.ports import Book
from recon.app.reading_chunks import chunk_of
from recon.app.run_period import Runner
from recon.ingest.rows import Record, RowKind, Series, TagDay
from recon.tabulate.cells import Cell
from tests.fakes.five_node_rows import Month, five_node_month
from tests.fakes.site_toml import toml_of

SITE = "five nodes"
JANUARY = date(2026, 1, 1)
SEEN = datetime(2025, 12, 1, tzinfo=UTC)
NOW = datetime(2026, 3, 1, tzinfo=UTC)


@lru_cache(maxsize=8)
def rows_of(through: date, *, seed: int = 1) -> Month:
    """Give the rows of a month to date, two days before it included."""
    return five_node_month(through=through, noisy=True, seed=seed, history=2)


def keep_site(book: Book, month: Month) -> str:
    """Keep the site's version; give its digest."""
    text = toml_of(month.site)
    digest = hashlib.sha256(text.encode()).hexdigest()
    book.add_site_version(
        StoredVersion(
            site=month.site.name,
            digest=digest,
            valid_from=month.site.valid_from,
            known_at=SEEN,
            added_by="test",
            content=text,
        )
    )
    return digest


def keep_rows(book: Book, month: Month) -> None:
    """Keep a month's tag days, each with a chunk of its own, and its documents."""
    chunks = [_chunk(day) for day in month.tag_days]
    book.keep(
        month.site.name,
        Pulled(
            query="made by the test",
            chunks=tuple(chunks),
            tag_days=tuple(
                replace(day, chunk=chunk.digest)
                for day, chunk in zip(month.tag_days, chunks, strict=True)
            ),
        ),
        seen_at=SEEN,
    )
    for kind in (RowKind.ASSAY, RowKind.TICKET, RowKind.SURVEY, RowKind.EVENT):
        keep_records(book, tuple(r for r in month.records if r.kind is kind))


def keep_records(book: Book, records: tuple[Record, ...], *, seen_at: datetime = SEEN) -> None:
    """Keep documents."""
    if records:
        book.keep(SITE, Pulled(query="made by the test", records=records), seen_at=seen_at)


def _chunk(day: TagDay) -> Chunk:
    at = int(day.last_known.timestamp()) * 1_000_000
    return chunk_of(
        Series(
            tag=day.tag,
            at=np.array([at], dtype=np.int64),
            value=np.array([np.nan if day.mean is None else day.mean]),
            quality=np.zeros(1, dtype=np.int8),
            known_at=np.array([at], dtype=np.int64),
        ),
        day.day,
    )


def runner_of(
    book: Book,
    *,
    owner: str = "tester",
    lease_seconds: float = 60.0,
    compute: Callable[[PeriodInputs], PeriodResult] | None = None,
    now: datetime = NOW,
) -> Runner:
    """Give a runner over a book; by default it counts rows instead of computing."""
    return Runner(
        book=book,
        site=SITE,
        owner=owner,
        actor="test",
        clock=lambda: now,
        lease_seconds=lease_seconds,
        compute=compute or counted,
    )


def counted(inputs: PeriodInputs) -> PeriodResult:
    """A result that can be told from any other inputs', without a fit: twenty cells of counts."""
    return PeriodResult(
        measurements=(),
        estimates=(),
        offsets=(),
        findings=(),
        figures=(),
        cells=tuple(
            Cell(
                table="count",
                period=inputs.through.isoformat(),
                row=f"row {n:02}",
                column="records",
                value=float(len(inputs.records) + n),
                unit="-",
                basis="computed",
            )
            for n in range(20)
        ),
        closing=(),
        leaves=(),
        summary=(("count", f"{len(inputs.records)} records"),),
        method=(("engine", "counting"),),
    )
