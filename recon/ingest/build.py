"""From rows to a month that can be reconciled: the order of the work, start reading here.

Tag-days, tickets and samples become *readings* (a value, its shared errors, its evidence), surveys
are combined and rolled to the day cuts with them, and every reading of the month becomes a
*measurement* with a frozen uncertainty. Streams that stood are tied to zero. What was left out,
filled in or looks wrong is a finding.
"""

from __future__ import annotations

from collections import defaultdict
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from recon.findings import Severity
from recon.flowsheet.network import MASS
from recon.ingest.assays import assayed
from recon.ingest.boundaries import at_boundaries
from recon.ingest.context import context_of
from recon.ingest.estimates import stand_in
from recon.ingest.flows import Flows
from recon.ingest.inputs import Inputs, say_estimate
from recon.ingest.laboratory import Laboratory
from recon.ingest.measured import IngestedMonth
from recon.ingest.measurements import Candidate, in_problem, renewed, state_measurements
from recon.ingest.meters import metered, running
from recon.ingest.ratios import find_wrong_ratios
from recon.ingest.reading import Reading
from recon.ingest.said import read_back
from recon.ingest.statement import one_day, state_month
from recon.ingest.surveys import surveyed
from recon.ingest.tickets import Weighbridge, ticketed
from recon.ingest.windows import find_implausible

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping, Sequence
    from datetime import date

    from recon.declare.site import Instrument
    from recon.ingest.context import Context
    from recon.ingest.given import Decision, SiteVersion
    from recon.ingest.rows import Record, TagDay
    from recon.reconcile.problem import Problem


def ingest_month(
    versions: Sequence[SiteVersion],
    days: Sequence[date],
    tag_days: Iterable[TagDay],
    records: Iterable[Record],
    decisions: Sequence[Decision] = (),
) -> IngestedMonth:
    """
    State a month to date from its rows.

    Parameters
    ----------
    versions : sequence of SiteVersion
        Each day uses the last version whose ``valid_from`` it has reached, else the first.
    days : sequence of date
        Plant days of the month to date, rising; period p is ``days[p - 1]``.
    tag_days : iterable of TagDay
        The month's, and up to 30 days before it for references and estimate rules; a few days
        after it let surveys be rolled back to its end.
    records : iterable of Record
        In force at the knowledge cut, the same span.
    decisions : sequence of Decision
        Approved ones.

    Returns
    -------
    IngestedMonth

    Raises
    ------
    ValueError
        No version or no day was given.
    """
    context = context_of(versions, days, tag_days, records, decisions)
    laboratory, weighbridge = Laboratory(context), Weighbridge(context)
    inputs = Inputs(context, laboratory)
    _tell_again(context)
    not_running = _not_running(context, weighbridge)
    readings = [
        *_amounts(context, inputs, weighbridge, not_running),
        *_grades(context, inputs, laboratory),
    ]
    flows = Flows(context, readings, weighbridge)
    stocks = at_boundaries(context, flows, surveyed(context))
    known: dict[str, list[Reading]] = defaultdict(list)
    for instrument, reading in readings:
        known[instrument.tag].append(reading)
    for reading in stocks.known:
        known[reading.tag].append(reading)
    find_wrong_ratios(context, readings, known)
    find_implausible(context, flows)
    candidates = [
        Candidate(instrument=i, reading=r)
        for i, r in readings
        if any(context.period(d) is not None for d, _ in r.days)
    ]
    stated = state_measurements(context, [*candidates, *stocks.candidates], known)
    return IngestedMonth(
        days=tuple(days),
        problem=state_month(context, stated.measured, stated.draws, not_running),
        measured=stated.measured,
        findings=tuple(context.findings),
        not_running=tuple(not_running),
        recipes=stated.recipes,
        draws=stated.draws,
    )


def day_problem(month: IngestedMonth, p: int) -> Problem:
    """
    State the one-day problem of a month's day, for its tests and charts.

    Parameters
    ----------
    month : IngestedMonth
    p : int
        The day's place in the month, 1-based.
    """
    return one_day(month.problem, p)


def with_references(
    month: IngestedMonth, fitted: Mapping[tuple[str, int], float | None]
) -> IngestedMonth:
    """
    Freeze once the uncertainties that had too few known days for a median.

    Parameters
    ----------
    month : IngestedMonth
    fitted : mapping
        Fitted value without offsets of each measurement of a first pass, by (name, period) [t or
        1]; None where a ratio stood.

    Returns
    -------
    IngestedMonth
        The same month; an instrument's reference is the median of its fitted values, scaled to a
        day of running.
    """
    sizes: dict[str, list[float]] = defaultdict(list)
    for recipe in month.recipes:
        value = fitted.get((recipe.name, recipe.period))
        if recipe.provisional and value is not None:
            sizes[recipe.tag].append(abs(value) / recipe.size)
    reference = {tag: float(np.median(found)) for tag, found in sizes.items()}
    measured = tuple(
        renewed(m, float(np.hypot(r.fixed, r.slope * reference[r.tag])), r.size * reference[r.tag])
        if r.provisional and r.tag in reference
        else m
        for m, r in zip(month.measured, month.recipes, strict=True)
    )
    renewed_ones = iter([m.measurement for m in measured if in_problem(m)])
    problem = replace(
        month.problem,
        measurements=tuple(
            replace(old, u=new.u, typical=new.typical)
            for old, new in zip(month.problem.measurements, renewed_ones, strict=True)
        ),
    )
    return replace(
        month,
        measured=measured,
        problem=problem,
        recipes=tuple(
            replace(r, provisional=False) if r.tag in reference else r for r in month.recipes
        ),
    )


def _tell_again(context: Context) -> None:
    """Take up what integration found in the month's readings."""
    for (_, day), tag_day in sorted(context.tag_days.items()):
        period = context.period(day)
        if period is not None and tag_day.said:
            context.findings.update(dict.fromkeys(read_back(tag_day.said, period)))


def _not_running(context: Context, weighbridge: Weighbridge) -> list[tuple[date, str]]:
    """List streams that stood all day: signal off, or no load on a stream known by tickets."""
    found = []
    for day in context.days:
        version = context.version(day)
        for stream in version.site.streams:
            if running(context, stream.name, day).stands or _no_load(
                context, weighbridge, stream.name, day
            ):
                found.append((day, stream.name))
    return found


def _no_load(context: Context, weighbridge: Weighbridge, stream: str, day: date) -> bool:
    """Whether a stream without run signal is weighed by tickets only, and none came."""
    version = context.version(day)
    if version.stream[stream].run_signal is not None:
        return False
    weighed = [
        i
        for i in version.site.instruments
        if i.stream == stream and i.quantity == MASS and i.use != "compare"
    ]
    if not weighed or any(
        i.kind != "tickets" or i.estimate is not None or weighbridge.on(i.tag, day)
        or context.decided(i.tag, day)
        for i in weighed
    ):  # fmt: skip
        return False
    context.find(
        "no-tickets",
        stream,
        f"Stream {stream}, {day}: no ticket of {', '.join(i.tag for i in weighed)} is known; "
        "nothing is taken to have moved. Check that the day's tickets were handed in.",
        day=day,
        severity=Severity.NOTE,
    )
    return True


def _amounts(
    context: Context,
    inputs: Inputs,
    weighbridge: Weighbridge,
    not_running: Sequence[tuple[date, str]],
) -> list[tuple[Instrument, Reading]]:
    """Give the amounts of meters and tickets, history first; rules stand in where declared."""
    standing = set(not_running)
    found: list[tuple[Instrument, Reading]] = []
    known: dict[str, dict[date, float]] = defaultdict(dict)
    for day in context.all_days:
        for instrument in context.version(day).site.instruments:
            if instrument.kind not in ("rate", "totaliser", "tickets"):
                continue
            if instrument.quantity is None or (day, str(instrument.stream)) in standing:
                continue
            reading = (
                ticketed(context, inputs, weighbridge, instrument, day)
                if instrument.kind == "tickets"
                else metered(context, inputs, instrument, day)
            )
            if reading is not None and not reading.estimated:
                known[instrument.tag][day] = reading.value
            elif reading is None:
                reading = _by_rule(context, instrument, day, known[instrument.tag])
            if reading is not None:
                found.append((instrument, reading))
    return found


def _by_rule(
    context: Context, instrument: Instrument, day: date, known: Mapping[date, float]
) -> Reading | None:
    ran = running(context, instrument.stream, day)
    if context.period(day) is None or ran.stands:
        return None
    standin = stand_in(instrument.estimate, known, day) if instrument.estimate else None
    if standin is None:
        if instrument.kind == "tickets":
            context.find(
                "unmeasured",
                instrument.tag,
                f"{instrument.tag}, {day}: stream {instrument.stream} ran {ran.hours:.1f} h but no "
                "usable ticket is known; the day is unmeasured. Check the weighbridge.",
                day=day,
            )
        return None
    say_estimate(context, instrument, day, standin.value, standin.u, standin.revisions)
    return Reading(
        tag=instrument.tag,
        day=day,
        raw=standin.value,
        value=standin.value,
        days=((day, ran.hours),),
        estimated=True,
        estimate_u=standin.u,
    )


def _grades(
    context: Context, inputs: Inputs, laboratory: Laboratory
) -> list[tuple[Instrument, Reading]]:
    tags = dict.fromkeys(
        i.tag
        for v in context.versions
        for i in v.site.instruments
        if i.kind == "assay" and i.quantity is not None and i.stream is not None
    )
    return [
        (context.version(reading.day).instrument[tag], reading)
        for tag in tags
        for reading in assayed(context, inputs, laboratory, tag)
    ]
