"""Bring a survey from its own time to a day cut, with what flowed between as measured."""

from __future__ import annotations

from dataclasses import replace
from datetime import timedelta
from typing import TYPE_CHECKING

import numpy as np

from recon.flowsheet.network import MASS
from recon.ingest.reading import Pull, together

if TYPE_CHECKING:
    from datetime import datetime

    from recon.declare.site import Instrument
    from recon.ingest.context import Context
    from recon.ingest.flows import Flows
    from recon.ingest.reading import Reading
    from recon.ingest.surveys import Surveyed

UNROLLED = 0.05
"""Relative standard uncertainty, a day of roll, of a stock some of whose flows nothing measures."""


def rolled(context: Context, flows: Flows, survey: Surveyed, cut: datetime) -> tuple[Reading, ...]:
    """
    Roll every reading of a survey to a cut.

    ``stock(cut) = stock(survey) + in - out`` over the span between, with its sign. The flows'
    independent errors add in squares to ``roll_u``; their shared errors become pulls of the stock.
    A grade is rolled as metal over mass; what leaves has the stock's own grade where nothing
    assays it.

    Parameters
    ----------
    context : Context
    flows : Flows
    survey : Surveyed
    cut : datetime
        Aware UTC.

    Returns
    -------
    tuple of Reading
        ``rolled_hours`` is cut less survey time [h]; 0 leaves the reading as it is.
    """
    hours = (cut - survey.at).total_seconds() / 3600
    if hours == 0.0:
        return survey.readings
    instruments = context.version(context.day_of(survey.at)).instrument
    mass = next(
        (
            r.value
            for r in survey.readings
            if instruments[r.tag].quantity == MASS and not r.set_aside
        ),
        None,
    )
    return tuple(
        _grade(context, flows, survey, instruments[r.tag], r, mass, hours)
        if instruments[r.tag].basis == "fraction"
        else _amount(context, flows, survey, instruments[r.tag], r, hours)
        for r in survey.readings
    )


def _amount(
    context: Context,
    flows: Flows,
    survey: Surveyed,
    instrument: Instrument,
    reading: Reading,
    hours: float,
) -> Reading:
    moved, variance, pulls, unknown = _net(
        context, flows, survey, str(instrument.quantity), hours, None
    )
    if unknown:
        _say_unknown(context, survey, instrument, unknown, hours)
        variance += (UNROLLED * abs(hours) / 24 * reading.value) ** 2
    return replace(
        reading,
        value=reading.value + moved,
        pulls=together((*reading.pulls, *pulls)),
        rolled_hours=hours,
        roll_u=float(np.sqrt(variance)),
    )


def _grade(
    context: Context,
    flows: Flows,
    survey: Surveyed,
    instrument: Instrument,
    reading: Reading,
    mass: float | None,
    hours: float,
) -> Reading:
    if mass is None:
        return replace(reading, rolled_hours=hours, roll_u=0.0)
    quantity = str(instrument.quantity)
    moved, _, _, _ = _net(context, flows, survey, MASS, hours, None)
    metal, _, _, _ = _net(context, flows, survey, quantity, hours, reading.value)
    after = mass + moved
    value = (mass * reading.value + metal) / after if after > 0 else reading.value
    return replace(reading, value=value, rolled_hours=hours, roll_u=abs(value - reading.value))


def _net(
    context: Context,
    flows: Flows,
    survey: Surveyed,
    quantity: str,
    hours: float,
    own_grade: float | None,
) -> tuple[float, float, list[Pull], list[str]]:
    """Net amount into the place between survey and cut, signed by the roll's direction."""
    cut = survey.at + timedelta(hours=hours)
    first, last = min(survey.at, cut), max(survey.at, cut)
    direction = 1.0 if hours > 0 else -1.0
    value, variance = 0.0, 0.0
    pulls: list[Pull] = []
    unknown: list[str] = []
    day = context.day_of(first)
    for stream in context.version(day).site.streams:
        sign = (stream.target == survey.place) - (stream.source == survey.place)
        if not sign or quantity not in stream.carries:
            continue
        flowed = flows.within(stream.name, quantity, first, last)
        scale = 1.0
        if flowed is None and own_grade is not None and sign < 0:
            flowed, scale = flows.within(stream.name, MASS, first, last), own_grade
        if flowed is None:
            unknown.append(stream.name)
            continue
        weight = direction * sign * scale
        value += weight * flowed.value
        variance += (weight * flowed.u) ** 2
        pulls += [replace(p, factor=weight * p.factor) for p in flowed.pulls]
    return value, variance, pulls, unknown


def _say_unknown(
    context: Context, survey: Surveyed, instrument: Instrument, unknown: list[str], hours: float
) -> None:
    context.find(
        "roll-incomplete",
        instrument.tag,
        f"{instrument.tag}, survey {survey.document}: rolled {hours:+.1f} h to the cut without "
        f"{', '.join(unknown)}, whose {instrument.quantity} nothing measures; its uncertainty is "
        "raised. Survey at the cut, or measure them.",
        day=context.day_of(survey.at),
    )
