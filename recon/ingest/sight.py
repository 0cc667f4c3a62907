"""One tag's day as the screens see it: its readings, where they are known, when the stream ran."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import UTC, date, datetime, timedelta
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

from recon.findings import Finding, Severity
from recon.ingest.pieces import usual_interval

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from recon.declare.site import Instrument
    from recon.ingest.pieces import Flags, Instants, Pieces, Values
    from recon.plant_time import Calendar


@dataclass(frozen=True, kw_only=True)
class Sight:
    """
    One tag's day, as the screens see it.

    Attributes
    ----------
    start, end : int
        The day [UTC microseconds].
    at, value, quality, known_at : ndarray
        Its readings with those carried in, shape (n,).
    usable : ndarray
        Which of them count, shape (n,).
    known, running : Pieces
        Where a value is known, and where the stream ran.
    has_signal, is_signal : bool
        The stream has a run signal; the tag is one.
    """

    instrument: Instrument
    calendar: Calendar
    day: date
    start: int
    end: int
    at: Instants
    value: Values
    quality: NDArray[np.int8]
    known_at: Instants
    usable: Flags
    known: Pieces
    running: Pieces
    has_signal: bool
    is_signal: bool

    @cached_property
    def inside(self) -> Flags:
        """Readings of the day itself, shape (n,)."""
        return np.asarray((self.at >= self.start) & (self.at < self.end))

    @cached_property
    def ran(self) -> Flags:
        """Readings at which the stream ran, shape (n,)."""
        spans = self.running
        if len(spans.begin) == 1 and (spans.begin[0], spans.end[0]) == (self.start, self.end):
            return self.inside
        if not len(spans.begin):
            return np.zeros(len(self.at), dtype=np.bool_)
        place = np.searchsorted(spans.begin, self.at, side="right") - 1
        return np.asarray((place >= 0) & (self.at < spans.end[np.maximum(place, 0)]))

    @cached_property
    def runs(self) -> tuple[Instants, Values]:
        """Instants and usable values up to the day's end while the stream ran."""
        mine = self.usable & self.ran & (self.at < self.end)
        return self.at[mine], self.value[mine]

    @cached_property
    def interval(self) -> int:
        """Usual time between readings [microseconds]."""
        return usual_interval(self.at)

    def clock(self, micros: int) -> str:
        """Give an instant in plant time, for sentences."""
        instant = datetime(1970, 1, 1, tzinfo=UTC) + timedelta(microseconds=micros)
        return f"{self.calendar.local(instant):%F %H:%M}"

    def say(
        self,
        code: str,
        text: str,
        *evidence: tuple[str, str],
        severity: Severity = Severity.WARNING,
    ) -> list[Finding]:
        """Make one finding about this tag and day."""
        return [
            Finding(
                code=code,
                subject=self.instrument.tag,
                text=f"{self.instrument.tag}, {self.day}: {text}",
                severity=severity,
                evidence=evidence,
            )
        ]
