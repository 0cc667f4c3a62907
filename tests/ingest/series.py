"""Readings for tests: a tag at even intervals, with exceptions."""

from __future__ import annotations

from datetime import UTC, date, datetime, timedelta
from typing import TYPE_CHECKING

import numpy as np

from recon.declare.site import Instrument, SiteStream, Step
from recon.ingest.integrate import integrate_day
from recon.ingest.rows import Quality, Series
from recon.plant_time import Calendar
from tests.fakes.five_nodes import five_node_site

if TYPE_CHECKING:
    from collections.abc import Sequence

    from recon.declare.site import Site
    from recon.findings import Finding
    from recon.ingest.rows import TagDay

DAY = date(2026, 1, 14)
MINUTE = 60_000_000
HOUR = 60 * MINUTE


def micros(instant: datetime) -> int:
    return round(instant.timestamp()) * 1_000_000


def calendar() -> Calendar:
    site = five_node_site()
    return Calendar(zone=site.zone, day_cut=site.day_cut)


def start_of(day: date = DAY) -> int:
    return micros(calendar().start(day))


def series(
    values: Sequence[float] | np.ndarray,
    *,
    tag: str = "FI-1",
    every: int = 5 * MINUTE,
    first: int | None = None,
    bad: Sequence[int] = (),
) -> Series:
    """Readings from the day's start on, known a minute after they were true."""
    begin = start_of() if first is None else first
    value = np.asarray(values, dtype=np.float64)
    at = begin + every * np.arange(len(value), dtype=np.int64)
    quality = np.zeros(len(value), dtype=np.int8)
    quality[list(bad)] = Quality.BAD
    return Series(tag=tag, at=at, value=value, quality=quality, known_at=at + MINUTE)


def at_hours(hours: Sequence[float], values: Sequence[float], tag: str = "FI-1") -> Series:
    """Readings at given hours after the day's start."""
    at = start_of() + np.array([round(h * HOUR) for h in hours], dtype=np.int64)
    value = np.asarray(values, dtype=np.float64)
    return Series(
        tag=tag,
        at=at,
        value=value,
        quality=np.zeros(len(at), dtype=np.int8),
        known_at=at + MINUTE,
    )


def rate(tag: str = "FI-1", **changed: object) -> Instrument:
    given: dict[str, object] = {"tag": tag, "kind": "rate", "unit": "t/h", **changed}
    return Instrument(**given)  # type: ignore[arg-type]


def site_of(*instruments: Instrument, streams: Sequence[SiteStream] = ()) -> Site:
    from dataclasses import replace

    return replace(five_node_site(), instruments=tuple(instruments), streams=tuple(streams))


def day_of(
    instruments: Sequence[Instrument],
    readings: Sequence[Series],
    *,
    streams: Sequence[SiteStream] = (),
    day: date = DAY,
) -> tuple[dict[str, TagDay], tuple[Finding, ...]]:
    made, findings = integrate_day(
        site_of(*instruments, streams=streams),
        calendar(),
        day,
        {s.tag: s for s in readings},
    )
    return {t.tag: t for t in made}, findings


RUNS = SiteStream(name="BELT", carries=("mass",), run_signal="RUN")
ON_BELT = rate(stream="BELT", quantity="mass")
SIGNAL = rate("RUN", unit="1")
TIMES = Step(by="times", tag="QI-1")
EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
HOURS = timedelta(hours=1)
