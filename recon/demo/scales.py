"""What weighbridges, cranes and platform scales print: one ticket a load."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from datetime import timedelta

import numpy as np

from recon.declare.site import Instrument
from recon.demo.clock import Floats, chance, instant
from recon.demo.laboratory import lot_of
from recon.demo.meters import Errors, Span
from recon.demo.serving import multiplier
from recon.demo.shapes import MASS
from recon.demo.truth import Truth
from recon.ingest.rows import Record, RowKind

CARRIERS = {"WB-01": 9, "WB-02": 7, "WB-03": 2}
"""Trucks that come to each weighbridge."""
TICKET_DECIMALS = {"WB-01": 2, "WB-02": 2, "WB-03": 2}


class Scales:
    """
    The tickets of the invented site.

    Parameters
    ----------
    truth : Truth
    serving : mapping
        True values of serving tags [canonical], shape (T,).
    """

    def __init__(self, truth: Truth, serving: Mapping[str, Floats]) -> None:
        self._truth = truth
        self._serving = serving
        self._per_unit: dict[str, Floats | float] = {}

    def print_tickets(self, errors: Errors, span: Span, *, counted: bool) -> Iterator[Record]:
        """
        Give every ticket of a span.

        Parameters
        ----------
        errors : Errors
        span : Span
        counted : bool
            True: a counted load is 1, and the truth holds the errors of the count. False: with
            fresh errors for a given truth a load counts as much as those errors say.
        """
        for instrument in self._truth.site.instruments:
            if instrument.kind == "tickets":
                yield from self._tickets(instrument, errors, span, counted=counted)

    def _tickets(
        self, instrument: Instrument, errors: Errors, span: Span, *, counted: bool
    ) -> Iterator[Record]:
        grid, tag = self._truth.grid, instrument.tag
        lumps = self._truth.lumps[instrument.stream or ""]
        rng = chance(span.seed, "tickets", tag)
        offset = span.offsets.relative(instrument)
        per_unit = self._multiplier(instrument)
        for d in range(span.first, span.last + 1):
            here = slice(*np.searchsorted(lumps.step, grid.span(d, d)))
            mass = lumps.amount[here, MASS]
            if not len(mass):
                continue
            error = _shared_out(
                float(errors.own[tag][d - span.first]), mass, chance(span.seed, "load", tag, str(d))
            )
            step = lumps.step[here]
            factor = per_unit[step] if isinstance(per_unit, np.ndarray) else per_unit
            read = (mass * (1.0 + offset[d]) + error) / factor
            if instrument.unit == "pieces":
                read = np.ones(len(mass)) if counted else read
            else:
                read = np.round(read, TICKET_DECIMALS.get(tag, 3))
            for k, value in enumerate(read):
                at = instant(int(grid.edges[step[k]])) + timedelta(
                    seconds=round(grid.hours * 3600 * (k + 1) / (len(mass) + 2))
                )
                entered = at + timedelta(minutes=float(rng.integers(2, 240)))
                yield Record(
                    kind=RowKind.TICKET,
                    document=f"{tag}/{grid.days[d]:%y%m%d}-{k + 1:02d}",
                    subject=tag,
                    item="pieces" if instrument.unit == "pieces" else "net",
                    true_from=at,
                    true_to=at,
                    known_at=entered,
                    value=float(value),
                    unit=instrument.unit,
                    lot=lot_of(instrument.stream or "", grid.days[d].toordinal(), d),
                    extra=(("carrier", self._carrier(tag, rng)),),
                )

    def _multiplier(self, instrument: Instrument) -> Floats | float:
        if instrument.tag not in self._per_unit:
            self._per_unit[instrument.tag] = multiplier(instrument, self._serving)
        return self._per_unit[instrument.tag]

    def _carrier(self, tag: str, rng: np.random.Generator) -> str:
        return f"T{int(rng.integers(1, CARRIERS[tag] + 1)):02d}" if tag in CARRIERS else ""


def _shared_out(total: float, mass: Floats, rng: np.random.Generator) -> Floats:
    """Give each load an error of its own whose sum is the day's, shape (n,) [t]."""
    share = mass / mass.sum()
    spread = abs(total) * np.sqrt(share) * rng.standard_normal(len(mass))
    return np.asarray(total * share + spread - share * spread.sum(), dtype=np.float64)
