"""What rate tags and totalisers read: truth, shared errors, a day's own error, and flicker."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from recon.declare.site import Instrument
from recon.demo.clock import Floats, Steps, chance
from recon.demo.offsets import Offsets
from recon.demo.serving import LOT_DAYS, flicker, multiplier, served, slope
from recon.demo.shapes import QUANTITIES
from recon.demo.sizes import Sizes
from recon.demo.truth import Truth
from recon.ingest.rows import Series
from recon.units import unit

SERVING_SHARE = 0.3
"""Part of the variance of an amount that comes from the reading that serves its chain."""
MOISTURE_SHARE = 0.05
"""The same for a moisture, which is surer than the mass it dries; a lot's is shared by its days."""
FAST = 0.004
"""Standard deviation of a transmitter's flicker, relative to its reading; nothing over a day."""
SERVING_FAST = 0.0008
DELAY = 5_000_000
"""A reading is stored five seconds after it was true [us]."""
DECIMALS = {"t/h": 2, "m3/h": 2, "t/m3": 4, "%": 3, "kNm3/h": 3, "mg/Nm3": 1, "kg/h": 3}
FINE = {"t": 2, "m3": 3}
STARTS_AT = 0.95
"""Where totalisers stand at the beginning, relative to where they roll over."""


@dataclass(frozen=True, kw_only=True)
class Span:
    """
    Days that are observed with one set of draws.

    Attributes
    ----------
    first, last : int
        Indices of days, both included; n days.
    seed : int
        Of every independent error.
    offsets : Offsets
    """

    first: int
    last: int
    seed: int
    offsets: Offsets

    @property
    def days(self) -> slice:
        """Slice of arrays by day."""
        return slice(self.first, self.last + 1)

    @property
    def size(self) -> int:
        """Number of days n."""
        return self.last + 1 - self.first


@dataclass(frozen=True, kw_only=True)
class Errors:
    """
    Independent errors of meters, tickets and what serves them.

    Attributes
    ----------
    own : dict
        Error of a day's amount beyond that of its serving readings, by tag, shape (n,) [t].
    serving : dict
        Error of a serving reading, by tag, shape (n,) [canonical unit].
    """

    own: dict[str, Floats]
    serving: dict[str, Floats]


def draw_errors(truth: Truth, sizes: Sizes, serving: Mapping[str, Floats], span: Span) -> Errors:
    """
    Draw a day's own error of every amount; a serving reading carries a share of its variance.

    Together they have the standard uncertainty that the site file declares for the amount.
    """
    serves = {i.tag: i for i in served(truth.site)}
    own: dict[str, Floats] = {}
    second: dict[str, Floats] = {}
    for instrument in truth.site.instruments:
        if instrument.stream is None or instrument.kind == "assay":
            continue
        amount = sizes.amounts(instrument.stream)[:, QUANTITIES.index(instrument.quantity or "")]
        u = sizes.of_amount(instrument)
        relative = sizes.usual_relative(instrument)
        taken = np.zeros(len(amount))
        for step in instrument.chain:
            if step.tag is None:
                continue
            share = MOISTURE_SHARE if step.by == "moisture" else SERVING_SHARE
            taken = share * (relative * amount) ** 2
            usual = float(serving[step.tag][truth.grid.first[:-1]].mean())
            drawn = chance(span.seed, "serving error", step.tag).standard_normal(len(amount))
            days = LOT_DAYS.get(serves[step.tag].point or "", 1)
            drawn = drawn[np.arange(len(amount)) // days * days]
            second[step.tag] = (np.sqrt(share) * relative / slope(step, usual) * drawn)[span.days]
        rest = np.sqrt(np.maximum(u**2 - taken, 0.0))[span.days]
        own[instrument.tag] = rest * chance(span.seed, "own error", instrument.tag).standard_normal(
            span.size
        )
    return Errors(own=own, serving=second)


class Meters:
    """
    The transmitters and totalisers of the invented site.

    Parameters
    ----------
    truth : Truth
    serving : mapping
        True values of serving tags [canonical], shape (T,).
    """

    def __init__(self, truth: Truth, serving: Mapping[str, Floats]) -> None:
        self._truth = truth
        self._serving = serving
        self._raw: dict[str, Floats] = {}

    def read(self, errors: Errors, span: Span) -> Iterator[Series]:
        """Give the readings of every rate tag and totaliser over a span, in the file's order."""
        serves = {i.tag for i in served(self._truth.site)}
        for instrument in self._truth.site.instruments:
            if instrument.tag in self._truth.running:
                yield self._signal(instrument, span)
            elif instrument.kind == "rate" and instrument.tag in serves:
                yield self._second(instrument, errors, span)
            elif instrument.kind == "rate":
                yield self._rate(instrument, errors, span)
            elif instrument.kind == "totaliser":
                yield self._totaliser(instrument, errors, span)

    def _signal(self, instrument: Instrument, span: Span) -> Series:
        first, last = self._truth.grid.span(span.first, span.last)
        on = self._truth.running[instrument.tag][first:last].astype(np.float64)
        return self._series(instrument, on, first)

    def _second(self, instrument: Instrument, errors: Errors, span: Span) -> Series:
        """Read a density or strength: truth, its gauge's offset, the day's error, flicker."""
        grid = self._truth.grid
        first, last = grid.span(span.first, span.last)
        factor = unit(instrument.unit).factor
        true = self._serving[instrument.tag][first:last] / factor
        offset = span.offsets.absolute(instrument)[span.days]
        relative = span.offsets.relative(instrument)[span.days]
        error = errors.serving[instrument.tag] / factor
        noise = self._settled(
            true * flicker(span.seed, instrument.tag, last - first, SERVING_FAST), span
        )
        read = true * (1.0 + self._each(relative, span)) + self._each(offset + error, span) + noise
        return self._series(instrument, rounded(read, DECIMALS[instrument.unit]), first)

    def _rate(self, instrument: Instrument, errors: Errors, span: Span) -> Series:
        first, last = self._truth.grid.span(span.first, span.last)
        raw = self._read_raw(instrument, errors, span) / self._truth.grid.hours
        noise = self._settled(raw * flicker(span.seed, instrument.tag, last - first, FAST), span)
        return self._series(
            instrument, rounded(np.maximum(raw + noise, 0.0), DECIMALS[instrument.unit]), first
        )

    def _totaliser(self, instrument: Instrument, errors: Errors, span: Span) -> Series:
        """Count up from near the modulus, so that it rolls over within the first month."""
        assert instrument.modulus is not None
        first, last = self._truth.grid.span(span.first, span.last)
        raw = self._read_raw(instrument, errors, span)
        total = instrument.modulus * STARTS_AT + np.concatenate([[0.0], np.cumsum(raw)])
        read = rounded(np.mod(total, instrument.modulus), FINE[instrument.unit])
        return self._series(instrument, read, first, at=self._truth.grid.edges[first : last + 1])

    def _read_raw(self, instrument: Instrument, errors: Errors, span: Span) -> Floats:
        """Give raw amounts a step [unit x h, or unit], with every error but flicker."""
        grid = self._truth.grid
        first, last = grid.span(span.first, span.last)
        if instrument.tag not in self._raw:
            assert instrument.stream is not None
            q = QUANTITIES.index(instrument.quantity or "")
            self._raw[instrument.tag] = self._truth.flow[instrument.stream][:, q] / multiplier(
                instrument, self._serving
            )
        raw = self._raw[instrument.tag][first:last]
        starts = grid.first[span.days] - first
        assert instrument.stream is not None
        q = QUANTITIES.index(instrument.quantity or "")
        amount = np.add.reduceat(self._truth.flow[instrument.stream][first:last, q], starts)
        own = np.divide(
            errors.own[instrument.tag], amount, out=np.zeros(span.size), where=amount > 0
        )
        offset = span.offsets.relative(instrument)[span.days]
        return raw * (1.0 + self._each(offset + own, span))

    def _each(self, by_day: Floats, span: Span) -> Floats:
        """Repeat a value of each day over its steps."""
        first = self._truth.grid.first
        return np.repeat(by_day, np.diff(first[span.first : span.last + 2]))

    def _settled(self, noise: Floats, span: Span) -> Floats:
        """Take each day's mean out of flicker where there is any, so that a day's sum is exact."""
        starts = self._truth.grid.first[span.days] - self._truth.grid.first[span.first]
        moving = (noise != 0.0).astype(np.float64)
        count = np.maximum(np.add.reduceat(moving, starts), 1.0)
        mean = np.add.reduceat(noise, starts) / count
        return np.asarray(noise - moving * self._each(mean, span), dtype=np.float64)

    def _series(
        self, instrument: Instrument, value: Floats, first: int, at: Steps | None = None
    ) -> Series:
        if at is None:
            at = self._truth.grid.edges[first : first + len(value)]
        return Series(
            tag=instrument.tag,
            at=at,
            value=value,
            quality=np.zeros(len(value), dtype=np.int8),
            known_at=at + DELAY,
        )


def rounded(values: Floats, decimals: int) -> Floats:
    """Round as a transmitter's display does."""
    return np.asarray(np.round(values, decimals), dtype=np.float64)
