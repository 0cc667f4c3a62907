"""What the laboratory reports: shift, day and lot samples, stage by stage, hours to weeks later."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from datetime import timedelta

import numpy as np

from recon.declare.site import Instrument
from recon.demo.clock import Floats, chance, instant
from recon.demo.meters import Errors, Span
from recon.demo.serving import LOT_DAYS, served
from recon.demo.shapes import MASS, QUANTITIES
from recon.demo.sizes import Sizes
from recon.demo.truth import Truth
from recon.ingest.rows import Record, RowKind
from recon.units import unit

SHIFT_POINTS = ("mill feed", "final concentrate", "plant tails")
"""Sample points with a sample each shift; the others have one a plant day or a lot."""
DELAY: dict[str, tuple[float, float]] = {
    # stage: shortest and longest time from the sample's end to its report [h]
    "": (18.0, 110.0),
    "rapid": (3.0, 10.0),
    "final": (70.0, 190.0),
    "provisional": (20.0, 50.0),
    "settled": (30.0 * 24, 55.0 * 24),
}
SLOW = {"slimes": 10.0, "flux": 4.0, "converter flux": 4.0, "custom A": 2.0, "custom B": 2.0}
"""Points whose results take so many times longer."""
METHOD = {
    "Cu": "titration",
    "Fe": "spectrometry",
    "S": "combustion",
    "SiO2": "gravimetry",
    "moisture": "oven",
}


@dataclass(frozen=True, kw_only=True)
class Sample:
    """Steps [begin, end) and days first to last that a sample speaks of; its shift, where one."""

    begin: int
    end: int
    first: int
    last: int
    shift: str = ""


class Laboratory:
    """
    Samples and results of the invented site.

    Parameters
    ----------
    truth : Truth
    sizes : Sizes
    serving : mapping
        True values of serving tags [canonical], shape (T,).
    """

    def __init__(self, truth: Truth, sizes: Sizes, serving: Mapping[str, Floats]) -> None:
        self._truth = truth
        self._sizes = sizes
        self._serving = serving
        self._serves = {i.tag for i in served(truth.site)}
        self._totals: dict[tuple[str, int, int], Floats | None] = {}

    def report(self, errors: Errors, span: Span) -> Iterator[Record]:
        """Give every result of samples that begin within a span, instrument by instrument."""
        for instrument in self._truth.site.instruments:
            if instrument.kind != "assay":
                continue
            if instrument.tag in self._serves:
                yield from self._second(instrument, errors, span)
            else:
                yield from self._grade(instrument, span)

    def _second(self, instrument: Instrument, errors: Errors, span: Span) -> Iterator[Record]:
        """Report moistures and strengths of a day or lot."""
        rng = chance(span.seed, "delay", instrument.tag)
        factor = unit(instrument.unit).factor
        point = instrument.point or ""
        relative = span.offsets.relative(instrument)
        absolute = span.offsets.absolute(instrument)
        for first, last in self._day_spans(point, span):
            true = self._serving[instrument.tag][self._truth.grid.first[first]] / factor
            error = errors.serving[instrument.tag][first - span.first] / factor
            value = true * (1.0 + relative[first]) + absolute[first] + error
            late = float(rng.uniform(10.0, 40.0))
            begin, end = self._truth.grid.span(first, last)
            sample = Sample(begin=begin, end=end, first=first, last=last)
            yield self._record(instrument, sample, value, "", late, decimals=3)

    def _grade(self, instrument: Instrument, span: Span) -> Iterator[Record]:
        """Report a grade: sampling error kept through the stages, the rest new in each."""
        rng = chance(span.seed, "assay", instrument.tag)
        point = instrument.point or ""
        typical = self._sizes.grade(instrument)
        relative = span.offsets.relative(instrument)
        absolute = span.offsets.absolute(instrument)
        stages = instrument.stages
        for sample in self._samples(point, span):
            normal = rng.standard_normal(1 + 2 * len(stages))
            lates = rng.uniform(size=len(stages))
            true = self._true(instrument, sample)
            if true is None:
                continue
            parts = self._sizes.of_assay(instrument, typical, self._ran(instrument, sample))
            day = sample.last
            expected = true * (1.0 + relative[day]) + absolute[day] + parts.sampling * normal[0]
            for k, stage in enumerate(stages):
                name = stage if len(stages) > 1 else ""
                value = expected + parts.preparation * normal[1 + 2 * k]
                value += parts.analysis * normal[2 + 2 * k]
                low, high = DELAY[name]
                late = low + (high - low) * float(lates[k])
                if name in ("", "final"):
                    late *= SLOW.get(point, 1.0)
                yield self._record(instrument, sample, max(value, 0.0), name, late, decimals=4)

    def _ran(self, instrument: Instrument, sample: Sample) -> float:
        """Give the running time that a sample speaks of [h]."""
        long = (sample.end - sample.begin) * self._truth.grid.hours
        hours = self._sizes.hours(instrument.stream or "")[sample.first : sample.last + 1]
        return min(long, sum(min(long, float(h)) for h in hours))

    def _samples(self, point: str, span: Span) -> list[Sample]:
        if point in SHIFT_POINTS:
            return list(self._shift_samples(span))
        return [
            Sample(begin=begin, end=end, first=first, last=last)
            for first, last in self._day_spans(point, span)
            for begin, end in (self._truth.grid.span(first, last),)
        ]

    def _true(self, instrument: Instrument, sample: Sample) -> float | None:
        """Give the true fraction of a stream over a sample; None where it hardly moved [unit]."""
        key = (instrument.stream or "", sample.begin, sample.end)
        if key not in self._totals:
            flow = self._truth.flow[key[0]][sample.begin : sample.end]
            least = 1 if key[0] in self._truth.lumps else self._truth.grid.lag(1.0)
            moved = np.count_nonzero(flow[:, MASS]) >= least
            self._totals[key] = flow.sum(axis=0) if moved else None
        total = self._totals[key]
        if total is None:
            return None
        q = QUANTITIES.index(instrument.quantity or "")
        return float(total[q] / total[MASS]) / unit(instrument.unit).factor

    def _day_spans(self, point: str, span: Span) -> Iterator[tuple[int, int]]:
        """Give first and last day of each sample: a day, or a lot's days with deliveries."""
        days = LOT_DAYS.get(point, 1)
        if days == 1:
            yield from ((d, d) for d in range(span.first, span.last + 1))
            return
        for lot in range(span.first // days, span.last // days + 1):
            inside = [
                d
                for d in range(lot * days, min((lot + 1) * days, len(self._truth.grid.days)))
                if self._sizes.amounts(point)[d, MASS] > 0
            ]
            if inside and span.first <= inside[-1] and inside[0] <= span.last:
                yield max(inside[0], span.first), min(inside[-1], span.last)

    def _shift_samples(self, span: Span) -> Iterator[Sample]:
        """Give every shift of a span, by the plant's clock."""
        grid = self._truth.grid
        for d in range(span.first, span.last + 1):
            begin, end = grid.span(d, d)
            start = grid.calendar.local(instant(int(grid.edges[begin])))
            starts = sorted(
                (
                    wall
                    if (wall := start.replace(hour=s.start.hour, minute=s.start.minute)) >= start
                    else wall + timedelta(days=1),
                    s.name,
                )
                for s in self._truth.site.shifts
            )
            edges = [begin, *(grid.step_of(at) for at, _ in starts[1:]), end]
            for (_, name), a, b in zip(starts, edges, edges[1:], strict=False):
                yield Sample(begin=a, end=b, first=d, last=d, shift=name)

    def _record(
        self,
        instrument: Instrument,
        sample: Sample,
        value: float,
        stage: str,
        late_hours: float,
        *,
        decimals: int,
    ) -> Record:
        grid, point = self._truth.grid, instrument.point or ""
        day = grid.days[sample.first]
        true_to = instant(int(grid.edges[sample.end]))
        return Record(
            kind=RowKind.ASSAY,
            document=f"S-{_short(point)}-{day:%y%m%d}"
            + (f"-{sample.shift[0].upper()}" if sample.shift else ""),
            subject=point,
            item=instrument.analyte or "",
            true_from=instant(int(grid.edges[sample.begin])),
            true_to=true_to,
            known_at=true_to + timedelta(seconds=round(late_hours * 3600)),
            value=round(float(value), decimals),
            unit=instrument.unit,
            stage=stage,
            lot=lot_of(point, day.toordinal(), sample.first),
            extra=(("method", METHOD.get(instrument.analyte or "", "")), ("laboratory", "site")),
        )


def lot_of(point: str, ordinal: int, day: int) -> str:
    """Name the lot of a supplier that a day belongs to; "" for what has no lots."""
    if point not in LOT_DAYS:
        return ""
    return f"{point[-1]}-{ordinal - day % LOT_DAYS[point] - 730_000}"


def _short(point: str) -> str:
    return point.replace(" ", ".").upper()
