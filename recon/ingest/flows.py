"""How much of a quantity flowed in part of a day, as measured: what surveys are rolled with."""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from recon.flowsheet.network import MASS
from recon.ingest.meters import running
from recon.ingest.reading import Pull, together
from recon.ingest.stages import in_instrument_unit

if TYPE_CHECKING:
    from collections.abc import Iterable
    from datetime import date, datetime

    from recon.declare.site import Instrument
    from recon.ingest.context import Context
    from recon.ingest.reading import Reading
    from recon.ingest.tickets import Weighbridge

WITHIN_DAY = 0.20
"""Relative spread of a rate within its day, for parts of a day (planning value)."""
ELSEWHERE = 0.25
"""Relative standard uncertainty of a day's flow taken from another day (planning value)."""


@dataclass(frozen=True, kw_only=True)
class Flowed:
    """
    An amount that flowed in a span.

    Attributes
    ----------
    value, u : float
        Measured amount and the independent part of its uncertainty [t].
    pulls : tuple of Pull
        Its shared errors, absolute [t per unit of the error].
    """

    value: float
    u: float
    pulls: tuple[Pull, ...] = ()


class Flows:
    """
    Measured amounts and grades of streams by day.

    Parameters
    ----------
    context : Context
    readings : iterable of (Instrument, Reading)
        Of streams; set-aside and compared ones are not used.
    weighbridge : Weighbridge
        Tickets have their own times, so parts of a ticketed day are exact.
    """

    def __init__(
        self,
        context: Context,
        readings: Iterable[tuple[Instrument, Reading]],
        weighbridge: Weighbridge,
    ) -> None:
        self._context = context
        self._weighbridge = weighbridge
        self._amounts: dict[tuple[str, str], dict[date, tuple[Instrument, Reading]]] = defaultdict(
            dict
        )
        self._grades: dict[tuple[str, str], dict[date, float]] = defaultdict(dict)
        for instrument, reading in readings:
            if reading.set_aside or instrument.use == "compare" or instrument.stream is None:
                continue
            key = (instrument.stream, str(instrument.quantity))
            for day, _ in reading.days:
                if instrument.basis == "fraction":
                    self._grades[key][day] = reading.value
                else:
                    self._amounts[key].setdefault(day, (instrument, reading))

    def within(self, stream: str, quantity: str, first: datetime, last: datetime) -> Flowed | None:
        """
        Give what flowed between two instants, or None where nothing measures it.

        A day's amount is spread evenly over the day, tickets fall where they were weighed. A day
        that is not measured takes the nearest earlier measured day's, with its own uncertainty.
        """
        value, variance = 0.0, 0.0
        pulls: list[Pull] = []
        for day, hours in self._context.overlap(first, last).items():
            part = self._part(stream, quantity, day, hours, first, last)
            if part is None:
                return None
            value += part.value
            variance += part.u**2
            pulls += part.pulls
        return Flowed(value=value, u=float(np.sqrt(variance)), pulls=together(pulls))

    def on(self, stream: str, quantity: str, day: date) -> float | None:
        """Amount of a day as measured [t]; metal as mass times grade where only those are."""
        direct = self._amounts.get((stream, quantity), {}).get(day)
        if direct is not None:
            return direct[1].value
        mass = self._amounts.get((stream, MASS), {}).get(day)
        grade = self.grade_on(stream, quantity, day)
        return None if mass is None or grade is None else mass[1].value * grade

    def grade_on(self, stream: str, quantity: str, day: date) -> float | None:
        """Grade of a day as measured [1]."""
        return self._grades.get((stream, quantity), {}).get(day)

    def grade(self, stream: str, quantity: str, day: date) -> float | None:
        """Latest known grade of a stream up to a day [1]."""
        known = self._grades.get((stream, quantity), {})
        days = [d for d in known if d <= day]
        return known[max(days)] if days else None

    def _part(
        self,
        stream: str,
        quantity: str,
        day: date,
        hours: float,
        first: datetime,
        last: datetime,
    ) -> Flowed | None:
        if running(self._context, stream, day).stands:
            return Flowed(value=0.0, u=0.0)
        factor = 1.0
        days = self._amounts.get((stream, quantity), {})
        if not days and quantity != MASS:
            days = self._amounts.get((stream, MASS), {})
            grade = self.grade(stream, quantity, day)
            if grade is None:
                return None
            factor = grade
        found = day if day in days else max((d for d in days if d < day), default=None)
        if found is None:
            return None
        instrument, reading = days[found]
        share = self._share(instrument, found, hours, first, last)
        amount = reading.value * factor
        spread = WITHIN_DAY * share * (1 - share) if instrument.kind != "tickets" else 0.0
        relative = instrument.uncertainty.relative if instrument.uncertainty else 0.0
        parts = [relative * share, spread, ELSEWHERE * share if found != day else 0.0]
        return Flowed(
            value=amount * share,
            u=abs(amount) * float(np.linalg.norm(parts)),
            pulls=tuple(
                Pull(
                    error=p.error,
                    factor=p.factor * share * (amount if p.relative else factor),
                    relative=False,
                )
                for p in reading.pulls
            ),
        )

    def _share(
        self, instrument: Instrument, day: date, hours: float, first: datetime, last: datetime
    ) -> float:
        """Share of a day's amount in the span."""
        even = min(1.0, hours / self._context.hours(day))
        if instrument.kind != "tickets":
            return even
        rows = self._weighbridge.on(instrument.tag, day)
        weights = [in_instrument_unit(instrument, r) or 0.0 for r in rows]
        whole = sum(weights)
        if not whole or last <= self._context.start(day) or first >= self._context.end(day):
            return even
        inside = [w for r, w in zip(rows, weights, strict=True) if first <= r.true_to < last]
        return sum(inside) / whole
