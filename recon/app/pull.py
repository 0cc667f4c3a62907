"""Bring what the plant's sources say into the book, before anything is computed from it.

Readings come a plant day at a time and are integrated as they pass; documents come a month at a
time. Each is read when it is first needed, again when the day has settled, and again once a day
while its month is open or ended recently: a value that changed or vanished at the source is a
finding of the book.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Collection, Iterator, Sequence
from dataclasses import dataclass
from datetime import UTC, date, datetime, timedelta
from typing import TYPE_CHECKING

import structlog

from recon.app.book_types import Pulled, Reread, Watermark
from recon.app.reading_chunks import chunk_of, joined, no_readings
from recon.ingest.context import HISTORY_DAYS
from recon.ingest.integrate import integrate_day
from recon.ingest.rows import RowKind
from recon.plant_time import Calendar, month_days

if TYPE_CHECKING:
    from recon.app.book_types import Chunk, Kept
    from recon.app.ports import Book, Plant
    from recon.declare.site import Site
    from recon.ingest.rows import Record

DOCUMENTS = (RowKind.ASSAY, RowKind.TICKET, RowKind.SURVEY, RowKind.EVENT)
READ_TAGS = frozenset({"rate", "totaliser"})
NOTHING = ":nothing"
"""Ends the fingerprint of a day without any reading."""
log = structlog.get_logger()


@dataclass(frozen=True, kw_only=True)
class Brought:
    """What one pull added to the book."""

    days: int
    rows: int
    documents: int
    findings: int


@dataclass(frozen=True, kw_only=True)
class Sources:
    """
    Where to pull from and to, and how far back.

    Attributes
    ----------
    site : str
        Its name in the book.
    sites : tuple of Site
        Versions, rising by ``valid_from``.
    look_back : timedelta
        Months that ended at most so long ago are read again and compared.
    again : timedelta
        Readings of an open or recent day are read again so often.
    """

    book: Book
    plant: Plant
    site: str
    sites: tuple[Site, ...]
    look_back: timedelta
    again: timedelta = timedelta(hours=24)

    @property
    def calendar(self) -> Calendar:
        """The latest version's calendar."""
        return Calendar(zone=self.sites[-1].zone, day_cut=self.sites[-1].day_cut)

    @property
    def first_day(self) -> date:
        """First plant day the site accounts for."""
        return self.sites[0].valid_from

    def on(self, day: date) -> Site:
        """Give the version in force on a day; before the first, the first."""
        reached = [s for s in self.sites if s.valid_from <= day]
        return reached[-1] if reached else self.sites[0]


def pull(
    sources: Sources,
    *,
    now: datetime,
    through: date | None = None,
    closed: Collection[date] = (),
    stopping: Callable[[], bool] = lambda: False,
    progress: Callable[[str, int, int], None] = lambda *_: None,
) -> Brought:
    """
    Bring the book up to date with the plant.

    Parameters
    ----------
    sources : Sources
    now : datetime
        Aware UTC.
    through : date, optional
        Last plant day to read; by default every day that has ended.
    closed : collection of date
        Closed months; they are re-read only while they ended recently.
    stopping : callable
        Asked between days; True ends the pull early, what is kept stays kept.
    progress : callable
        Told in words what is being read, and how many of how many steps are done.

    Raises
    ------
    DataError
        A source cannot be read, or a row breaks the column contract; what was kept stays kept.
    """
    marks = sources.book.watermarks(sources.site)
    last = min(filter(None, (through, sources.calendar.day_of(now) - timedelta(days=1))))
    days = [d for d in _days(sources, last) if _wanted(sources, d, marks, now, closed)]
    months = [m for m in _months(sources, last) if _recent(sources, m, now, closed, marks)]
    steps = len(days) + len(months) * len(DOCUMENTS)
    brought = [Brought(days=0, rows=0, documents=0, findings=0)]
    brought += _history(sources, marks, now, stopping)
    for done, day in enumerate(days):
        if stopping():
            return _sum(brought)
        progress(f"readings of {day.isoformat()}", done, steps)
        brought.append(_readings(sources, day, marks, now))
    for done, (month, kind) in enumerate(((m, k) for m in months for k in DOCUMENTS), len(days)):
        if stopping():
            return _sum(brought)
        progress(f"{kind.value}s of {month:%Y-%m}", done, steps)
        brought.append(_documents(sources, month, kind, marks, now))
    total = _sum(brought)
    for finding in sources.plant.noted():
        log.warning("noted at the source", code=finding.code, subject=finding.subject)
    if total.rows or total.documents or total.findings:
        log.info(
            "pulled",
            days=total.days,
            rows=total.rows,
            documents=total.documents,
            findings=total.findings,
        )
    return total


def _days(sources: Sources, last: date) -> Iterator[date]:
    day = sources.first_day
    while day <= last:
        yield day
        day += timedelta(days=1)


def _history(
    sources: Sources, marks: dict[str, Watermark], now: datetime, stopping: Callable[[], bool]
) -> Iterator[Brought]:
    """Read days before the first one, backwards, as far as the source has readings; once."""
    for back in range(1, HISTORY_DAYS + 1):
        day = sources.first_day - timedelta(days=back)
        mark = marks.get(_readings_of(day))
        if stopping() or (mark is not None and mark.fingerprint.endswith(NOTHING)):
            return
        if mark is None:
            brought = _readings(sources, day, marks, now)
            yield brought
            if not brought.rows:
                return


def _months(sources: Sources, last: date) -> Iterator[date]:
    """Months of the history and later that have begun with the day after the last one."""
    month = (sources.first_day - timedelta(days=HISTORY_DAYS)).replace(day=1)
    while month <= last + timedelta(days=1):
        yield month
        month = month_days(month)[-1] + timedelta(days=1)


def _wanted(
    sources: Sources,
    day: date,
    marks: dict[str, Watermark],
    now: datetime,
    closed: Collection[date],
) -> bool:
    """Whether a day's readings are to be read (again) now."""
    mark = marks.get(_readings_of(day))
    if mark is None or mark.fingerprint.partition(":")[0] != _asked(sources.on(day)):
        return True
    settled = sources.calendar.end(day) + timedelta(hours=sources.on(day).settling_hours)
    if mark.read_at < settled <= now:
        return True
    return now - mark.read_at >= sources.again and _compared(
        sources, day.replace(day=1), now, closed
    )


def _recent(
    sources: Sources,
    month: date,
    now: datetime,
    closed: Collection[date],
    marks: dict[str, Watermark],
) -> bool:
    new = any(_documents_of(kind, month) not in marks for kind in DOCUMENTS)
    return new or _compared(sources, month, now, closed)


def _compared(sources: Sources, month: date, now: datetime, closed: Collection[date]) -> bool:
    """Whether a month is open and accounted for, or ended so recently that it is read again."""
    ended = sources.calendar.end(month_days(month)[-1])
    accounted = month_days(month)[-1] >= sources.first_day
    return (accounted and month not in closed) or now - ended <= sources.look_back


def _readings(sources: Sources, day: date, marks: dict[str, Watermark], now: datetime) -> Brought:
    site, calendar = sources.on(day), sources.calendar
    tags = tuple(sorted(i.tag for i in site.instruments if i.kind in READ_TAGS))
    series = joined(sources.plant.readings(tags, calendar.start(day), calendar.end(day)))
    chunks = tuple(chunk_of(series[tag], day) for tag in sorted(series) if len(series[tag].at))
    before = marks.get(_readings_of(day))
    mark = Watermark(
        source=_readings_of(day),
        known_through=_latest((int(series[c.subject].known_at.max()) for c in chunks), before, now),
        fingerprint=f"{_asked(site)}:{_print_of(chunks)}",
        read_at=now,
    )
    if before is not None and before.fingerprint == mark.fingerprint:
        return _kept(sources, Pulled(query="", watermark=mark), now, days=1)
    digests = {chunk.subject: chunk.digest for chunk in chunks}
    tag_days, _ = integrate_day(site, calendar, day, series, chunks=digests)
    return _kept(
        sources,
        Pulled(
            query=sources.plant.query(RowKind.READING),
            chunks=(*chunks, *_emptied(day, tags, digests, before)),
            tag_days=tag_days,
            watermark=mark,
        ),
        now,
        days=1,
    )


def _emptied(
    day: date,
    tags: Sequence[str],
    digests: dict[str, str],
    before: Watermark | None,
) -> tuple[Chunk, ...]:
    """Chunks without rows for tags that now have none, where the day was read before."""
    if before is None:
        return ()
    return tuple(chunk_of(no_readings(tag), day) for tag in tags if tag not in digests)


def _documents(
    sources: Sources, month: date, kind: RowKind, marks: dict[str, Watermark], now: datetime
) -> Brought:
    calendar = sources.calendar
    since, until = calendar.start(month), min(calendar.end(month_days(month)[-1]), now)
    records = tuple(sources.plant.records(kind, since, until))
    before = marks.get(_documents_of(kind, month))
    mark = Watermark(
        source=_documents_of(kind, month),
        known_through=_latest((_micros(r.known_at) for r in records), before, now),
        fingerprint=_record_print(records),
        read_at=now,
    )
    if before is not None and before.fingerprint == mark.fingerprint:
        return _kept(sources, Pulled(query="", watermark=mark), now, days=0)
    return _kept(
        sources,
        Pulled(
            query=sources.plant.query(kind),
            records=records,
            reread=Reread(kind=kind, since=since, until=until),
            watermark=mark,
        ),
        now,
        days=0,
    )


def _kept(sources: Sources, pulled: Pulled, now: datetime, *, days: int) -> Brought:
    kept: Kept = sources.book.keep(sources.site, pulled, seen_at=now)
    for finding in kept.findings:
        log.warning("source changed", code=finding.code, subject=finding.subject)
    return Brought(
        days=days,
        rows=sum(chunk.rows for chunk in pulled.chunks),
        documents=kept.records,
        findings=len(kept.findings),
    )


def _sum(brought: Sequence[Brought]) -> Brought:
    return Brought(
        days=sum(b.days for b in brought),
        rows=sum(b.rows for b in brought),
        documents=sum(b.documents for b in brought),
        findings=sum(b.findings for b in brought),
    )


def _readings_of(day: date) -> str:
    return f"readings {day.isoformat()}"


def _documents_of(kind: RowKind, month: date) -> str:
    return f"{kind.value}s {month:%Y-%m}"


def _asked(site: Site) -> str:
    """What decides how readings are read and integrated; a change of it reads the day again."""
    told = [repr(i) for i in site.instruments if i.kind in READ_TAGS]
    told += [f"{s.name} {s.run_signal}" for s in site.streams]
    return hashlib.sha256("\n".join((site.zone, repr(site.day_cut), *told)).encode()).hexdigest()


def _print_of(chunks: Sequence[Chunk]) -> str:
    if not chunks:
        return NOTHING.removeprefix(":")
    return hashlib.sha256("".join(chunk.digest for chunk in chunks).encode()).hexdigest()


def _record_print(records: Sequence[Record]) -> str:
    found = hashlib.sha256()
    for record in sorted(records, key=lambda r: (r.natural_key, r.known_at)):
        found.update(repr(record).encode())
    return found.hexdigest()


def _latest(known: Iterator[int], before: Watermark | None, now: datetime) -> datetime:
    """Latest time at which a row became known; without any row the mark before, or now."""
    latest = max(known, default=None)
    if latest is None:
        return before.known_through if before is not None else now
    return datetime.fromtimestamp(0, UTC) + timedelta(microseconds=latest)


def _micros(instant: datetime) -> int:
    return (instant - datetime.fromtimestamp(0, UTC)) // timedelta(microseconds=1)
