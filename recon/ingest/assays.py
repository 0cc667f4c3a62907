"""Grades of streams: a sample is one value over the days it covers; rules stand in for the rest."""

from __future__ import annotations

from typing import TYPE_CHECKING

from recon.ingest.chain import convert
from recon.ingest.decided import decide, in_canonical
from recon.ingest.estimates import stand_in
from recon.ingest.inputs import say_estimate
from recon.ingest.meters import running
from recon.ingest.reading import Reading, together
from recon.ingest.sources import shared_pulls

if TYPE_CHECKING:
    from datetime import date

    from recon.declare.site import Instrument
    from recon.ingest.context import Context
    from recon.ingest.inputs import Inputs
    from recon.ingest.laboratory import Laboratory, Sample


def assayed(context: Context, inputs: Inputs, laboratory: Laboratory, tag: str) -> list[Reading]:
    """
    Give the grades one instrument knows, sample by sample, then those that stand in by its rule.

    A sample of days on which the stream stood speaks of the others only; where it stood on all of
    them the sample is set aside with a finding.
    """
    found = []
    told: set[date] = set()
    for sample in laboratory.samples(tag):
        instrument = context.version(sample.day).instrument.get(tag)
        if instrument is None or instrument.quantity is None:
            continue
        reading = _of_sample(context, inputs, instrument, sample)
        if reading is not None:
            told.update(day for day, _ in reading.days)
            found.append(reading)
    for day in context.days:
        instrument = context.version(day).instrument.get(tag)
        if instrument is None or instrument.quantity is None or day in told:
            continue
        reading = _standing_in(context, inputs, laboratory, instrument, day)
        if reading is not None:
            found.append(reading)
    return found


def _of_sample(
    context: Context, inputs: Inputs, instrument: Instrument, sample: Sample
) -> Reading | None:
    runs = {d: running(context, instrument.stream, d) for d, _ in sample.hours}
    days = tuple(
        (d, runs[d].hours * min(1.0, h / context.hours(d)))
        for d, h in sample.hours
        if not runs[d].stands
    )
    if not days:
        context.find(
            "assay-while-standing",
            instrument.tag,
            f"{instrument.tag}, sample {sample.document}: {sample.value:g} {instrument.unit} for "
            f"{sample.day}, but stream {instrument.stream} stood all of that time; the sample is "
            "set aside. Check the sample's label or the run signal.",
            day=sample.day,
            evidence=(("document", sample.document),),
        )
        return None
    day = days[-1][0]
    decided = decide(context, instrument.tag, day, sample.value)
    if decided.raw is None:
        return None
    converted = convert(context, instrument, day, decided.raw, lambda t: inputs.on(t, day))
    if converted is None:
        return None
    kept = dict(days)
    increments = tuple(
        n for n, (d, _) in zip(sample.increments, sample.hours, strict=False) if d in kept
    )
    return Reading(
        tag=instrument.tag,
        day=day,
        document=sample.document,
        raw=decided.raw,
        value=converted.value,
        days=days,
        pulls=together(
            (
                *shared_pulls(context, instrument, day, per_unit=converted.per_unit),
                *converted.pulls,
            )
        ),
        estimated=converted.estimated,
        stage=sample.stage,
        shares=increments if sum(increments) > 0 else (),
        evidence=(sample.evidence, *converted.evidence),
        corrections=(
            *in_canonical(decided.corrections, converted.per_unit),
            *converted.corrections,
        ),
        set_aside=decided.set_aside,
        held=decided.held,
    )


def _standing_in(
    context: Context, inputs: Inputs, laboratory: Laboratory, instrument: Instrument, day: date
) -> Reading | None:
    """Give an override, else the estimate rule's value, for a day no sample speaks of."""
    ran = running(context, instrument.stream, day)
    if ran.stands:
        return None
    decided = decide(context, instrument.tag, day, None)
    raw, u = decided.raw, 0.0
    if raw is None:
        if instrument.estimate is None:
            context.find(
                "missing-assay",
                instrument.tag,
                f"{instrument.tag}, {day}: stream {instrument.stream} ran {ran.hours:.1f} h, no "
                "usable result is known, and no estimate rule is declared: no number.",
                day=day,
            )
            return None
        standin = stand_in(instrument.estimate, laboratory.daily(instrument.tag), day)
        if standin is None:
            return None
        raw, u = standin.value, standin.u
        say_estimate(context, instrument, day, raw, u, standin.revisions)
    converted = convert(context, instrument, day, raw, lambda t: inputs.on(t, day))
    if converted is None:
        return None
    return Reading(
        tag=instrument.tag,
        day=day,
        raw=raw,
        value=converted.value,
        days=((day, ran.hours),),
        pulls=together(
            (
                *shared_pulls(context, instrument, day, per_unit=converted.per_unit),
                *converted.pulls,
            )
        ),
        estimated=decided.raw is None,
        estimate_u=u * abs(converted.per_unit),
        evidence=converted.evidence,
        corrections=in_canonical(decided.corrections, converted.per_unit),
        set_aside=decided.set_aside,
        held=decided.held,
    )
