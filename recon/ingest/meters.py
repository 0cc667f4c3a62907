"""Amounts of rates and totalisers: mean over covered running time times running time."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from recon.ingest.chain import convert
from recon.ingest.context import FULL
from recon.ingest.decided import decide, in_canonical
from recon.ingest.reading import Reading, together
from recon.ingest.sources import shared_pulls

if TYPE_CHECKING:
    from datetime import date

    from recon.declare.site import Instrument
    from recon.ingest.context import Context
    from recon.ingest.inputs import Inputs
    from recon.ingest.rows import TagDay

LEAST_SPREAD = 0.10
"""Smallest relative spread assumed for the rate in a gap (planning value)."""


@dataclass(frozen=True, kw_only=True)
class Running:
    """
    How long a stream ran.

    Attributes
    ----------
    hours : float
        Running time of the day [h].
    stands : bool
        Its signal was off all day.
    """

    hours: float
    stands: bool


def running(context: Context, stream: str | None, day: date) -> Running:
    """
    Say how long a stream ran on a day.

    A stream without a run signal runs all day. Where the signal itself is not covered for half of
    the day the stream is taken to run, with a finding.
    """
    length = context.hours(day)
    declared = context.version(day).stream.get(stream or "")
    if declared is None or declared.run_signal is None:
        return Running(hours=length, stands=False)
    signal = context.tag_days.get((declared.run_signal, day))
    if signal is None or signal.amount is None or signal.covered_hours < FULL * length:
        covered = 0.0 if signal is None else signal.covered_hours
        context.find(
            "run-signal-missing",
            declared.run_signal,
            f"{declared.run_signal}, {day}: covered {covered:.1f} of {length:g} h; the streams it "
            "speaks for are taken to run all day. Restore the signal.",
            day=day,
        )
        return Running(hours=length, stands=False)
    ran = length * signal.amount / signal.covered_hours
    return Running(hours=ran, stands=ran == 0.0)


def metered(context: Context, inputs: Inputs, instrument: Instrument, day: date) -> Reading | None:
    """
    Give a rate's or totaliser's amount of a day.

    Returns
    -------
    Reading or None
        None where the stream stands, the day is covered less than half (a finding), or the chain
        lacks a value.
    """
    ran = running(context, instrument.stream, day)
    if ran.stands:
        return None
    tag_day = context.tag_days.get((instrument.tag, day))
    read = _mean(context, instrument, tag_day, ran.hours, day)
    hours = ran.hours if instrument.kind == "rate" else 1.0
    decided = decide(context, instrument.tag, day, read if read is None else read / hours)
    if decided.raw is None:
        return None
    raw = decided.raw * hours
    converted = convert(context, instrument, day, raw, lambda tag: inputs.on(tag, day))
    if converted is None:
        return None
    usable = tag_day is not None and not decided.overridden
    coverage = _coverage(tag_day, ran.hours) if usable and tag_day is not None else 1.0
    gap = max(0.0, 1.0 - coverage) * abs(converted.value) * _spread(context, instrument, day)
    per_offset = converted.per_unit * (ran.hours if instrument.kind == "rate" else 1.0)
    return Reading(
        tag=instrument.tag,
        day=day,
        raw=raw,
        value=converted.value,
        days=((day, ran.hours),),
        pulls=together(
            (*shared_pulls(context, instrument, day, per_unit=per_offset), *converted.pulls)
        ),
        coverage=coverage,
        gap=gap,
        moisture=converted.moisture,
        estimated=converted.estimated,
        evidence=(*((tag_day.chunk,) if tag_day else ()), *converted.evidence),
        corrections=(
            *in_canonical(decided.corrections, converted.per_unit * hours),
            *converted.corrections,
        ),
        set_aside=decided.set_aside,
        held=decided.held,
    )


def _coverage(tag_day: TagDay, hours: float) -> float:
    return min(1.0, tag_day.covered_hours / hours) if hours else 1.0


def _mean(
    context: Context, instrument: Instrument, tag_day: TagDay | None, hours: float, day: date
) -> float | None:
    """Amount of the day [unit x h, or unit]: mean over covered running time x running time."""
    covered = 0.0 if tag_day is None else tag_day.covered_hours
    if tag_day is None or tag_day.amount is None or covered < FULL * hours or covered == 0.0:
        context.find(
            "unmeasured",
            instrument.tag,
            f"{instrument.tag}, {day}: covered {covered:.1f} h of {hours:.1f} h running, less than "
            "half; the day is unmeasured. Check the tag and its source.",
            day=day,
        )
        return None
    if covered < 0.995 * hours:
        context.find(
            "partly-covered",
            instrument.tag,
            f"{instrument.tag}, {day}: covered {covered:.1f} h of {hours:.1f} h running; the rest "
            "is filled with the covered mean and its uncertainty is raised.",
            day=day,
        )
    return tag_day.amount / covered * hours


def _spread(context: Context, instrument: Instrument, day: date) -> float:
    """Relative spread of the tag's daily means, robust, at least a planning value."""
    means = [
        t.mean
        for d in context.all_days
        if d <= day and (t := context.tag_days.get((instrument.tag, d))) is not None and t.mean
    ]
    if len(means) < 3:
        return LEAST_SPREAD
    middle = float(np.median(means))
    off = float(np.median(np.abs(np.array(means) - middle)))
    # 1.4826: median absolute deviation to standard deviation of a normal law
    return max(LEAST_SPREAD, 1.4826 * off / abs(middle)) if middle else LEAST_SPREAD
