"""Readings of one plant day become tag-days: time-weighted, over covered running time.

The order for one tag: which readings may be used (quality, range, time), over which spans each
value stands, cut to the time in which the stream ran, times the second signals of a product,
integrated. What is set aside or looks wrong comes back as findings and travels with the tag-day.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import UTC, date, datetime, timedelta
from typing import TYPE_CHECKING

import numpy as np

from recon.ingest.chain import step_factor
from recon.ingest.pieces import (
    HOLD_LEAST,
    HOUR,
    ON,
    Pieces,
    hold_of,
    pieces_of,
    times,
    usual_interval,
    where_on,
    within,
)
from recon.ingest.rows import Quality, TagDay
from recon.ingest.said import written
from recon.ingest.screens import find_all, find_resets
from recon.ingest.sight import Sight
from recon.ingest.totalisers import clipped, count
from recon.units import unit

if TYPE_CHECKING:
    from recon.declare.site import Instrument, Site, Step
    from recon.findings import Finding
    from recon.ingest.pieces import Flags, Instants
    from recon.ingest.rows import Series
    from recon.ingest.totalisers import Counted
    from recon.plant_time import Calendar

EPOCH = datetime(1970, 1, 1, tzinfo=UTC)


def integrate_day(
    site: Site,
    calendar: Calendar,
    day: date,
    series_by_tag: Mapping[str, Series],
    carried: Mapping[str, Series] | None = None,
    *,
    chunks: Mapping[str, str] | None = None,
) -> tuple[tuple[TagDay, ...], tuple[Finding, ...]]:
    """
    Integrate every rate and totaliser of a plant day.

    Parameters
    ----------
    site : Site
        Version in force on the day.
    calendar : Calendar
        The site's; the day has 23, 24 or 25 h by it.
    day : date
    series_by_tag : mapping of str to Series
        Readings by tag. They may reach beyond the day: the last one at or before its start is in
        force then; with the first one after its end a totaliser's days add up without remainder.
    carried : mapping of str to Series, optional
        Readings in force at the day's start, where the series do not hold them.
    chunks : mapping of str to str, optional
        Digest of each tag's readings, kept in the tag-day.

    Returns
    -------
    tag_days : tuple of TagDay
        One for each declared rate or totaliser that has any reading, in the site's order.
    findings : tuple of Finding
        Also written into the tag-days (``said``), so that a later run tells them again.
    """
    start, end = _micros(calendar.start(day)), _micros(calendar.end(day))
    signals = {s.run_signal for s in site.streams if s.run_signal}
    work = _Day(
        site=site, calendar=calendar, day=day, start=start, end=end, signals=frozenset(signals)
    )
    declared = {i.tag: i for i in site.instruments}
    usable = {}
    for instrument in site.instruments:
        if instrument.kind not in ("rate", "totaliser"):
            continue
        series = _joined(series_by_tag.get(instrument.tag), (carried or {}).get(instrument.tag))
        if series is not None and bool(np.any(series.at < end)):
            usable[instrument.tag] = _Usable(series=series, flags=_flags(instrument, series))
    running = {
        tag: where_on(_signal(work, declared[tag], usable[tag]))
        for tag in signals
        if tag in usable and tag in declared
    }
    signal_of = _run_signals(site)
    tag_days, findings = [], []
    for tag, readings in usable.items():
        instrument = declared[tag]
        ran = running.get(signal_of.get(tag) or "")
        made, found = _tag_day(work, instrument, readings, usable, declared, ran)
        said = find_all(made.sight)
        if found is not None:
            said += find_resets(made.sight, found)
        findings += said
        tag_days.append(
            TagDay(
                tag=tag,
                day=day,
                chunk=(chunks or {}).get(tag, ""),
                amount=made.amount if made.covered > 0 else None,
                covered_hours=made.covered,
                day_hours=(end - start) / HOUR,
                running_hours=made.sight.running.hours,
                mean=made.mean,
                readings=int(np.sum(made.sight.inside)),
                bad=int(np.sum(made.sight.inside & ~readings.flags)),
                last_known=EPOCH + timedelta(microseconds=int(readings.series.known_at.max())),
                said=written(said),
            )
        )
    return tuple(tag_days), tuple(findings)


@dataclass(frozen=True, kw_only=True)
class _Day:
    """The day being integrated."""

    site: Site
    calendar: Calendar
    day: date
    start: int
    end: int
    signals: frozenset[str]


@dataclass(frozen=True, kw_only=True)
class _Usable:
    """A tag's readings and which of them may be used."""

    series: Series
    flags: Flags


@dataclass(frozen=True, kw_only=True)
class _Made:
    """Integral, covered time and mean of one tag, with what the screens look at."""

    amount: float
    covered: float
    mean: float | None
    sight: Sight


def _flags(instrument: Instrument, series: Series) -> Flags:
    """Say which readings may be used: neither bad, missing, out of range nor from the future."""
    low = -np.inf if instrument.low is None else instrument.low
    high = np.inf if instrument.high is None else instrument.high
    value = series.value
    return np.asarray(
        (series.quality != Quality.BAD)
        & np.isfinite(value)
        & (value >= low)
        & (value <= high)
        & (series.at <= series.known_at)
    )


def _tag_day(
    work: _Day,
    instrument: Instrument,
    readings: _Usable,
    usable: Mapping[str, _Usable],
    declared: Mapping[str, Instrument],
    ran: Pieces | None,
) -> tuple[_Made, Counted | None]:
    series = readings.series
    whole = Pieces(
        begin=np.array([work.start]),
        end=np.array([work.end]),
        left=np.ones(1),
        right=np.ones(1),
    )
    running = whole if ran is None or instrument.tag in work.signals else ran
    counted = None
    if instrument.kind == "totaliser":
        counted = count(series.at[readings.flags], series.value[readings.flags], instrument.modulus)
        known = clipped(counted.rate, work.start, work.end, interval=usual_interval(series.at))
    else:
        known = _signal(work, instrument, readings)
        if instrument.tag in work.signals:
            on = (known.left > ON).astype(np.float64)
            known = Pieces(begin=known.begin, end=known.end, left=on, right=on)
    on_time = within(known, running)
    amount, covered = on_time.integral, on_time.hours
    for step in instrument.chain:
        second = declared.get(step.tag or "")
        if instrument.kind != "rate" or second is None or second.kind != "rate":
            continue
        if second.tag not in usable:
            amount, covered = 0.0, 0.0
            break
        on_time, amount, covered = _product(work, on_time, step, second, usable[second.tag])
    sight = Sight(
        instrument=instrument,
        calendar=work.calendar,
        day=work.day,
        start=work.start,
        end=work.end,
        at=series.at,
        value=series.value,
        quality=series.quality,
        known_at=series.known_at,
        usable=readings.flags,
        known=known,
        running=running,
        has_signal=ran is not None,
        is_signal=instrument.tag in work.signals,
    )
    mean = amount / covered if covered > 0 else None
    return _Made(amount=amount, covered=covered, mean=mean, sight=sight), counted


def _product(
    work: _Day, so_far: Pieces, step: Step, second: Instrument, readings: _Usable
) -> tuple[Pieces, float, float]:
    """Multiply a signal by a step's factor of another tag, where both are known."""
    signal = _signal(work, second, readings)
    scale = unit(second.unit).factor
    zero, one = step_factor(step, 0.0)[0], step_factor(step, 1.0)[0]
    factor = Pieces(
        begin=signal.begin,
        end=signal.end,
        left=zero + (one - zero) * scale * signal.left,  # every step is linear in its second value
        right=zero + (one - zero) * scale * signal.right,
    )
    cut, product = times(so_far, factor)
    amount = float(np.sum(product * (cut.end - cut.begin))) / HOUR
    # a further product continues from the mean of each piece: exact for steps, and where two
    # linear signals are followed by a third, to the second order of a reading interval
    return (
        Pieces(begin=cut.begin, end=cut.end, left=product, right=product),
        amount,
        cut.hours,
    )


def _signal(work: _Day, instrument: Instrument, readings: _Usable) -> Pieces:
    at: Instants = readings.series.at
    return pieces_of(
        at,
        readings.series.value,
        readings.flags,
        start=work.start,
        end=work.end,
        linear=instrument.interpolation == "linear" and instrument.tag not in work.signals,
        hold=_hold(work, instrument, at),
    )


def _hold(work: _Day, instrument: Instrument, at: Instants) -> int | None:
    """How long a reading stands: signals report changes only; a silent tag's last one, briefly."""
    if instrument.tag in work.signals:
        return None
    if not bool(np.any((at >= work.start) & (at < work.end))):
        return HOLD_LEAST
    return hold_of(at)


def _run_signals(site: Site) -> dict[str, str | None]:
    """Run signal of each tag's stream; of a serving tag, of the first instrument it serves."""
    by_stream = {s.name: s.run_signal for s in site.streams}
    found = {i.tag: by_stream.get(i.stream) for i in site.instruments if i.stream is not None}
    for host in site.instruments:
        for step in host.chain:
            if step.tag is not None and host.stream is not None:
                found.setdefault(step.tag, by_stream.get(host.stream))
    return found


def _joined(series: Series | None, carried: Series | None) -> Series | None:
    """Put the reading in force at the start before the others, where they do not hold it."""
    if carried is None or not len(carried.at):
        return series if series is not None and len(series.at) else None
    if series is None or not len(series.at):
        return carried
    before = carried.at < series.at[0]
    if not before.any():
        return series
    return type(series)(
        tag=series.tag,
        at=np.concatenate([carried.at[before], series.at]),
        value=np.concatenate([carried.value[before], series.value]),
        quality=np.concatenate([carried.quality[before], series.quality]),
        known_at=np.concatenate([carried.known_at[before], series.known_at]),
    )


def _micros(instant: datetime) -> int:
    return round((instant - EPOCH).total_seconds()) * 1_000_000
