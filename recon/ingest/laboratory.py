"""Samples: one document is one sample, with the span it speaks of and the stage that counts."""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass
from datetime import date, datetime
from typing import TYPE_CHECKING

from recon.findings import Severity
from recon.ingest.rows import RowKind
from recon.ingest.stages import highest
from recon.units import unit

if TYPE_CHECKING:
    from recon.declare.site import Instrument
    from recon.ingest.context import Context
    from recon.ingest.rows import Record

LATE_DAYS = 7.0
"""A result known later than this after its sample's end is said to be late."""


@dataclass(frozen=True, kw_only=True)
class Sample:
    """
    One analyte of one sample.

    Attributes
    ----------
    document, lot : str
    first, last : datetime
        Span it speaks of.
    hours : tuple of (date, float)
        Hours of the span in each plant day.
    value : float
        Value that counts [instrument's unit].
    stage : str
    by_stage : dict
        Every known stage's value.
    evidence : str
        Natural key of the row that counts.
    increments : tuple of float
        Sampler increments day by day, where the laboratory gives them.
    """

    document: str
    lot: str
    first: datetime
    last: datetime
    hours: tuple[tuple[date, float], ...]
    value: float
    stage: str
    by_stage: tuple[tuple[str, float], ...]
    evidence: str
    increments: tuple[float, ...] = ()

    @property
    def day(self) -> date:
        """Last plant day of the span."""
        return self.hours[-1][0]


class Laboratory:
    """
    The samples of a month and its history, by instrument.

    Parameters
    ----------
    context : Context
        Its assay rows are read once; what cannot be used becomes a finding.
    """

    def __init__(self, context: Context) -> None:
        self._samples: dict[str, list[Sample]] = defaultdict(list)
        self._daily: dict[str, dict[date, float]] = {}
        groups: dict[tuple[str, str, str], list[Record]] = defaultdict(list)
        for row in context.records[RowKind.ASSAY]:
            groups[row.subject, row.item, row.document].append(row)
        for (point, analyte, _), rows in sorted(groups.items()):
            day = context.day_of(rows[0].true_to)
            declared = [
                i
                for i in context.version(day).site.instruments
                if i.kind == "assay" and (i.point, i.analyte) == (point, analyte)
            ]
            for instrument in declared:
                sample = _sample(context, instrument, rows)
                if sample is not None:
                    self._samples[instrument.tag].append(sample)
        for found in self._samples.values():
            found.sort(key=lambda s: (s.first, s.document))

    def samples(self, tag: str) -> tuple[Sample, ...]:
        """List an instrument's samples in time order."""
        return tuple(self._samples.get(tag, ()))

    def on(self, tag: str, day: date, lot: str = "") -> tuple[tuple[Sample, float], ...]:
        """
        List the samples that speak of a day, with their weight.

        Where a lot is named and a sample carries it, that sample alone speaks; else those whose
        span touches the day, weighted by hours.
        """
        samples = self.samples(tag)
        if lot:
            named = [s for s in samples if lot in (s.lot, s.document)]
            if named:
                return tuple((s, 1.0 / len(named)) for s in named)
        touching = [(s, dict(s.hours)[day]) for s in samples if day in dict(s.hours)]
        whole = sum(h for _, h in touching)
        return tuple((s, h / whole) for s, h in touching)

    def daily(self, tag: str) -> dict[date, float]:
        """Give the known value of each day [instrument's unit], weighted by hours."""
        if tag not in self._daily:
            days = sorted({d for s in self.samples(tag) for d, _ in s.hours})
            self._daily[tag] = {d: sum(s.value * w for s, w in self.on(tag, d)) for d in days}
        return self._daily[tag]


def _sample(context: Context, instrument: Instrument, rows: list[Record]) -> Sample | None:
    best, values = highest(context, instrument, rows)
    if best is None:
        return None
    hours = context.overlap(best.true_from, best.true_to)
    if not hours:
        return None
    last = max(hours)
    _say_stage_and_delay(context, instrument, best, rows, last)
    words = dict(best.extra).get("increments", "").replace(";", " ").split()
    try:
        increments = tuple(float(w) for w in words)
    except ValueError:
        increments = ()
    if words and (len(increments) != len(hours) or min(increments, default=0.0) < 0):
        context.find(
            "unusable-increments",
            instrument.tag,
            f"{instrument.tag}, sample {best.document}: {len(words)} increments "
            f"({' '.join(words)}) for {len(hours)} plant days; the days are weighted by dry mass. "
            "State one count a plant day.",
            day=last,
        )
        increments = ()
    return Sample(
        document=best.document,
        lot=best.lot,
        first=best.true_from,
        last=best.true_to,
        hours=tuple(sorted(hours.items())),
        value=values[best.stage],
        stage=best.stage,
        by_stage=tuple(values.items()),
        evidence=best.natural_key,
        increments=increments,
    )


def _say_stage_and_delay(
    context: Context, instrument: Instrument, best: Record, rows: list[Record], last: date
) -> None:
    value = f"{best.value:g} {best.unit}"
    if best.stage and best.stage != instrument.stages[-1]:
        context.find(
            "provisional",
            instrument.tag,
            f"{instrument.tag}, sample {best.document}: {value} is {best.stage}; "
            f"{instrument.stages[-1]} is still open.",
            day=last,
            severity=Severity.NOTE,
            evidence=(("document", best.document), ("stage", best.stage)),
        )
    first = min(row.known_at for row in rows if row.value is not None)
    late = (first - best.true_to).total_seconds() / 86400
    if late > LATE_DAYS:
        context.find(
            "late",
            instrument.tag,
            f"{instrument.tag}, sample {best.document}: first known {late:.1f} d after "
            f"the sample's end (limit {LATE_DAYS:g} d).",
            day=last,
            severity=Severity.NOTE,
            evidence=(("document", best.document), ("known at", first.isoformat())),
        )


def canonical(instrument: Instrument) -> float:
    """Canonical value of one unit of an instrument."""
    return unit(instrument.unit).factor
