"""What surveyors find in the stocks, at the cut or some hours off it, and what is logged."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from datetime import timedelta

import numpy as np

from recon.declare.site import Instrument, SiteNode
from recon.demo.clock import Floats, chance, instant
from recon.demo.meters import Span
from recon.demo.offsets import calibrated_tags, calibration_days
from recon.demo.serving import multiplier, served
from recon.demo.shapes import MASS, QUANTITIES
from recon.demo.sizes import Sizes
from recon.demo.truth import Truth
from recon.ingest.rows import Record, RowKind
from recon.units import unit

DAILY = ("flash furnace", "ladle aisle", "converters", "anode furnaces", "dust bins")
"""Dipped or counted at every cut."""
DAILY_ITEMS = {"thickener": ("mass",)}
"""Stocks of which only some items are found at every cut."""
WEEKLY = ("electrolyte",)
OFF_THE_CUT = ("ore pile", "shed", "reverts")
"""Flown over by daylight, up to five hours before or four after the cut."""


class Surveyors:
    """
    The surveys of the invented site.

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
        self._serves = {i.tag: i for i in served(truth.site)}

    def survey(self, span: Span) -> Iterator[Record]:
        """Give every item surveyed at the cuts of a span, both ends included."""
        for node in self._truth.site.nodes:
            if not node.stock:
                continue
            rng = chance(span.seed, "survey times", node.name)
            for cut in range(span.first, span.last + 2):
                off, late = rng.uniform(-5.0, 4.0), rng.uniform(3.0, 9.0)
                shift = float(np.copysign(max(abs(off), 1.0), off))
                items = self._items_due(node, cut)
                if items is None:
                    continue
                step = self._step(node, cut, shift)
                far = late if items or node.name in DAILY else late + 30.0
                yield from self._document(node, cut, step, items, far, span)

    def _items_due(self, node: SiteNode, cut: int) -> tuple[str, ...] | None:
        """Give the items found at a cut: () for all, None for no survey."""
        day = cut if cut < len(self._truth.grid.days) else None
        month = day is None or self._truth.grid.days[day].day == 1
        if month or cut == 0 or node.name in DAILY or (node.name in WEEKLY and cut % 7 == 0):
            return ()
        return DAILY_ITEMS.get(node.name)

    def _step(self, node: SiteNode, cut: int, shift: float) -> int:
        grid = self._truth.grid
        if node.name not in OFF_THE_CUT:
            return int(grid.first[cut])
        if cut == 0:
            shift = abs(shift)
        elif cut == len(grid.days):
            shift = -abs(shift)
        return int(grid.first[cut]) + round(shift / grid.hours)

    def _document(
        self,
        node: SiteNode,
        cut: int,
        step: int,
        items: tuple[str, ...],
        late_hours: float,
        span: Span,
    ) -> Iterator[Record]:
        grid = self._truth.grid
        at = instant(int(grid.edges[step]))
        day = min(
            max(int(np.searchsorted(grid.first, step, side="right")) - 1, 0), len(grid.days) - 1
        )
        rng = chance(span.seed, "survey", node.name, str(cut))
        number = f"V-{node.name.replace(' ', '.').upper()}-{at:%y%m%d}"
        for instrument in self._truth.site.instruments:
            if instrument.kind != "survey" or instrument.node != node.name:
                continue
            if items and instrument.analyte not in items:
                continue
            for item, unit_name, value in self._values(instrument, step, day, rng, span):
                yield Record(
                    kind=RowKind.SURVEY,
                    document=number,
                    subject=node.name,
                    item=item,
                    true_from=at,
                    true_to=at,
                    known_at=at + timedelta(minutes=round(late_hours * 60)),
                    value=round(value, 4),
                    unit=unit_name,
                    extra=(("surveyor", "survey crew"),),
                )

    def _values(
        self, instrument: Instrument, step: int, day: int, rng: np.random.Generator, span: Span
    ) -> Iterator[tuple[str, str, float]]:
        """Give item, unit and value of an instrument and of what serves its chain."""
        stock = self._truth.stock[instrument.node or ""][step]
        true = float(stock[QUANTITIES.index(instrument.quantity or "")])
        factor = unit(instrument.unit).factor
        if instrument.basis == "fraction":
            true = true / float(stock[MASS]) / factor
        u = self._sizes.of_stock(instrument, true)
        value = true * (1.0 + span.offsets.relative(instrument)[day])
        value += span.offsets.absolute(instrument)[day] + u * rng.standard_normal()
        for step_of in instrument.chain:
            if step_of.tag is None:
                continue
            other = self._serves[step_of.tag]
            second = float(self._serving[step_of.tag][min(step, self._truth.grid.steps - 1)])
            scale = unit(other.unit).factor
            read = second * (1.0 + span.offsets.relative(other)[day]) / scale
            yield other.analyte or "", other.unit, read + span.offsets.absolute(other)[day]
        if instrument.chain:
            at = {t: np.array([v[min(step, len(v) - 1)]]) for t, v in self._serving.items()}
            value /= float(np.ravel(multiplier(instrument, at))[0])
        yield instrument.analyte or "", instrument.unit, value


def log_events(truth: Truth, span: Span) -> Iterator[Record]:
    """Give logged calibrations: minutes after the cut, with what was found against the standard."""
    grid = truth.grid
    for tag in calibrated_tags(truth.site):
        source = next(s for s in truth.site.sources if s.calibrated_by == tag)
        rng = chance(span.seed, "calibration", tag)
        offset = span.offsets.by_day[source.name]
        for d in calibration_days(tag, grid):
            minutes = int(rng.integers(5, 50))
            if not span.first <= d <= span.last:
                continue
            at = instant(int(grid.edges[grid.first[d]])) + timedelta(minutes=minutes)
            found = float(offset[d - 1] - offset[d])
            yield Record(
                kind=RowKind.EVENT,
                document=f"C-{tag}-{grid.days[d]:%y%m%d}",
                subject=tag,
                item="calibration",
                true_from=at - timedelta(minutes=4),
                true_to=at,
                known_at=at + timedelta(hours=2),
                value=1.0,
                unit="1",
                extra=(
                    ("as_found", f"{found * 100:+.2f} %" if source.relative else f"{found:+.4f}"),
                    ("as_left", "0"),
                    ("remark", "against the standard kept for it"),
                ),
            )
