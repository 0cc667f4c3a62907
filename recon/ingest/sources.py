"""Which draw of a shared error source a reading of a day carries."""

from __future__ import annotations

from datetime import date, timedelta
from typing import TYPE_CHECKING

from recon.ingest.reading import Error, Pull
from recon.ingest.rows import RowKind

if TYPE_CHECKING:
    from recon.declare.site import ErrorSource, Instrument
    from recon.ingest.context import Context

CALIBRATIONS = ("calibration", "range change")


def shared_pulls(
    context: Context, instrument: Instrument, day: date, *, per_unit: float
) -> tuple[Pull, ...]:
    """
    Give the declared sources of an instrument on a day.

    Parameters
    ----------
    context : Context
    instrument : Instrument
    day : date
    per_unit : float
        Canonical value per unit of the instrument, through its chain; an absolute source's offset
        is in the instrument's unit times this.

    Returns
    -------
    tuple of Pull
    """
    declared = context.version(day).source
    return tuple(
        Pull(
            error=draw(context, declared[shared.source], day),
            factor=shared.factor * (1.0 if declared[shared.source].relative else per_unit),
            relative=declared[shared.source].relative,
        )
        for shared in instrument.shared
    )


def draw(context: Context, source: ErrorSource, day: date) -> Error:
    """
    Give the draw of a source that is in force on a day.

    A draw that began before the month is the month's first: months are fitted independently.
    """
    begin = context.days[0]
    if source.lasts == "day":
        first = max(day, begin)
    elif source.lasts == "calibration":
        first = max([begin, *(d for d in renewals(context, source) if d <= day)])
    else:
        first = begin
    return Error(name=source.name, first=first, u=source.u)


def renewals(context: Context, source: ErrorSource) -> list[date]:
    """
    List the days on which a logged calibration began a new draw.

    A calibration before a plant day's middle counts for that day, one after it for the next: the
    day's amount is mostly read by the instrument as it was then.
    """
    found = []
    for record in context.records[RowKind.EVENT]:
        if record.subject == source.calibrated_by and record.item in CALIBRATIONS:
            day = context.day_of(record.true_to)
            middle = context.start(day) + timedelta(hours=context.hours(day) / 2)
            found.append(day if record.true_to <= middle else day + timedelta(days=1))
    return sorted(found)
