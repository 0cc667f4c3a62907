"""What every rule of one month looks things up in: days, versions, rows by name, decisions."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from datetime import date, datetime, timedelta
from functools import cached_property
from typing import TYPE_CHECKING

from recon.findings import Finding, Severity
from recon.ingest.rows import Record, RowKind, TagDay
from recon.plant_time import Calendar

if TYPE_CHECKING:
    from recon.declare.site import ErrorSource, Instrument, Site, SiteStream
    from recon.ingest.given import Decision, SiteVersion

HISTORY_DAYS = 30
"""Days before the month that references and estimate rules may look at."""
FULL = 0.5
"""A day covered less than this share of its running time is unmeasured."""


@dataclass(frozen=True, kw_only=True)
class Version:
    """A site version with its calendar and its things by name."""

    site: Site
    calendar: Calendar

    @cached_property
    def instrument(self) -> dict[str, Instrument]:
        """Instruments by tag."""
        return {i.tag: i for i in self.site.instruments}

    @cached_property
    def stream(self) -> dict[str, SiteStream]:
        """Streams by name."""
        return {s.name: s for s in self.site.streams}

    @cached_property
    def source(self) -> dict[str, ErrorSource]:
        """Shared error sources by name."""
        return {s.name: s for s in self.site.sources}


@dataclass(frozen=True, kw_only=True)
class Context:
    """
    The material of one month to date.

    Attributes
    ----------
    versions : tuple of Version
        Rising by ``valid_from``.
    days : tuple of date
        The month to date; period p is ``days[p - 1]``.
    history : tuple of date
        Days before the month that have rows, at most 30.
    tag_days : dict
        By tag and day.
    records : dict
        By kind, in natural-key order.
    decisions : tuple of Decision
    findings : dict
        In the order found, each once; grows while rules run. Only those on days of the month.
    """

    versions: tuple[Version, ...]
    days: tuple[date, ...]
    history: tuple[date, ...]
    tag_days: dict[tuple[str, date], TagDay]
    records: dict[RowKind, tuple[Record, ...]]
    decisions: tuple[Decision, ...]
    findings: dict[Finding, None] = field(default_factory=dict)

    @cached_property
    def all_days(self) -> tuple[date, ...]:
        """History, then the month."""
        return (*self.history, *self.days)

    @cached_property
    def _in_force(self) -> dict[date, Version]:
        return {}

    @cached_property
    def _place(self) -> dict[date, int]:
        return {day: p for p, day in enumerate(self.days, start=1)}

    def period(self, day: date) -> int | None:
        """Give the day's place in the month, 1-based; None for a day outside it."""
        return self._place.get(day)

    def version(self, day: date) -> Version:
        """Give the site version in force on a day: the last whose ``valid_from`` is reached."""
        if day not in self._in_force:
            reached = [v for v in self.versions if v.site.valid_from <= day]
            self._in_force[day] = reached[-1] if reached else self.versions[0]
        return self._in_force[day]

    def hours(self, day: date) -> float:
        """Length of a plant day [h]."""
        return self.version(day).calendar.hours(day)

    def start(self, day: date) -> datetime:
        """Give the instant a plant day begins."""
        return self.version(day).calendar.start(day)

    def end(self, day: date) -> datetime:
        """Give the instant a plant day ends, the start of the next under its own version."""
        return self.start(day + timedelta(days=1))

    def day_of(self, instant: datetime) -> date:
        """Give the plant day an instant lies in."""
        guess = self.versions[0].calendar.day_of(instant)
        return self.version(guess).calendar.day_of(instant)

    def overlap(self, first: datetime, last: datetime) -> dict[date, float]:
        """
        Split a span over the days it touches.

        Returns
        -------
        dict
            Plant day to hours of the span in it [h]; an instant gives its day with the day's
            whole length. Days outside history and month are included.
        """
        day = self.day_of(first)
        if last <= first:
            return {day: self.hours(day)}
        shares: dict[date, float] = {}
        while self.start(day) < last:
            hours = (min(last, self.end(day)) - max(first, self.start(day))).total_seconds() / 3600
            if hours > 0:
                shares[day] = hours
            day += timedelta(days=1)
        return shares

    def find(
        self,
        code: str,
        subject: str,
        text: str,
        *,
        day: date | None = None,
        severity: Severity = Severity.WARNING,
        evidence: tuple[tuple[str, str], ...] = (),
    ) -> None:
        """Note a finding; one about a day before the month belongs to an earlier run."""
        if day is not None and self.period(day) is None:
            return
        finding = Finding(
            code=code,
            subject=subject,
            text=text,
            severity=severity,
            period=None if day is None else self.period(day),
            evidence=evidence,
        )
        self.findings.setdefault(finding)

    def decided(self, tag: str, day: date) -> tuple[Decision, ...]:
        """Approved decisions on a tag that cover a day, in the order given."""
        return tuple(d for d in self.decisions if d.tag == tag and d.first <= day <= d.last)

    def instrument_days(self, kind: str) -> Iterable[tuple[date, Version, Instrument]]:
        """List the instruments of one kind, day by day through history and month."""
        for day in self.all_days:
            version = self.version(day)
            for instrument in version.site.instruments:
                if instrument.kind == kind:
                    yield day, version, instrument


def context_of(
    versions: Sequence[SiteVersion],
    days: Sequence[date],
    tag_days: Iterable[TagDay],
    records: Iterable[Record],
    decisions: Sequence[Decision] = (),
) -> Context:
    """
    Index one month's material.

    Parameters
    ----------
    versions : sequence of SiteVersion
        The first is in force on the month's first day; sorted here.
    days : sequence of date
        The month's plant days to date, rising.
    tag_days, records : iterable
        The month's, and up to 30 days before it.

    Raises
    ------
    ValueError
        No version or no day was given.
    """
    if not versions or not days:
        raise ValueError("A month needs at least one site version and one day.")
    known = tuple(
        Version(
            site=v.site,
            calendar=Calendar(zone=v.site.zone, day_cut=v.site.day_cut),
        )
        for v in sorted(versions, key=lambda v: v.site.valid_from)
    )
    by_tag = {(t.tag, t.day): t for t in tag_days}
    by_kind: dict[RowKind, list[Record]] = {kind: [] for kind in RowKind}
    for record in records:
        by_kind[record.kind].append(record)
    first = days[0]
    begins = known[0].calendar
    seen = {day for _, day in by_tag if day < first}
    seen |= {
        day
        for rows in by_kind.values()
        for r in rows
        if (day := begins.day_of(r.true_from)) < first
    }
    earliest = first - timedelta(days=HISTORY_DAYS)
    back = min((d for d in seen if d >= earliest), default=first)
    return Context(
        versions=known,
        days=tuple(days),
        history=tuple(back + timedelta(days=i) for i in range((first - back).days)),
        tag_days=by_tag,
        records={
            kind: tuple(sorted(rows, key=lambda r: (r.natural_key, r.known_at)))
            for kind, rows in by_kind.items()
        },
        decisions=tuple(decisions),
    )
