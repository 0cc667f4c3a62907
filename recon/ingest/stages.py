"""Which stage of a value counts: the highest known; stages are never averaged."""

from __future__ import annotations

from typing import TYPE_CHECKING

from recon.errors import UnknownUnitError
from recon.units import unit

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from recon.declare.site import Instrument
    from recon.ingest.context import Context
    from recon.ingest.rows import Record


def rank(stages: Sequence[str], stage: str) -> int | None:
    """Give the place of a stage, lowest first; a row without stage is the only one."""
    if stage == "":
        return 0
    return stages.index(stage) if stage in stages else None


def highest(
    context: Context, instrument: Instrument, rows: Iterable[Record]
) -> tuple[Record | None, dict[str, float]]:
    """
    Choose among the rows of one document and item.

    Rows that cannot be used (no value yet, unknown stage, another kind of unit, outside the
    instrument's range) are left out, each with a finding but for a value not yet known.

    Returns
    -------
    Record or None
        Highest stage; of equal ones the latest known.
    dict
        Usable value of each stage in the instrument's unit.
    """
    best: Record | None = None
    values: dict[str, float] = {}
    for row in sorted(rows, key=lambda r: (rank(instrument.stages, r.stage) or 0, r.known_at)):
        value = _usable(context, instrument, row)
        if value is not None:
            best = row
            values[row.stage] = value
    return best, values


def in_instrument_unit(instrument: Instrument, row: Record) -> float | None:
    """Convert a row's value to the instrument's unit; None where the kinds of unit differ."""
    if row.value is None:
        return None
    try:
        given, wanted = unit(row.unit), unit(instrument.unit)
    except UnknownUnitError:
        return None
    if given.kind is not wanted.kind:
        return None
    return row.value if given.name == wanted.name else row.value * given.factor / wanted.factor


def _usable(context: Context, instrument: Instrument, row: Record) -> float | None:
    if row.value is None:
        return None
    day = context.day_of(row.true_from)
    who = f"{instrument.tag}, document {row.document}"
    evidence = (("document", row.document), ("value", f"{row.value:g} {row.unit}"))
    if rank(instrument.stages, row.stage) is None:
        context.find(
            "unknown-stage",
            instrument.tag,
            f"{who}: stage {row.stage!r} is not one of {', '.join(instrument.stages)}; the row is "
            "set aside. Declare the stage or correct the row.",
            day=day,
            evidence=evidence,
        )
        return None
    value = in_instrument_unit(instrument, row)
    if value is None:
        context.find(
            "wrong-unit",
            instrument.tag,
            f"{who}: unit {row.unit!r} cannot be read as {instrument.unit!r}; the row is set "
            "aside. Correct the query or the instrument's unit.",
            day=day,
            evidence=evidence,
        )
        return None
    low = -float("inf") if instrument.low is None else instrument.low
    high = float("inf") if instrument.high is None else instrument.high
    if not low <= value <= high:
        context.find(
            "out-of-range",
            instrument.tag,
            f"{who}: {value:g} {instrument.unit} lies outside {low:g} to {high:g} "
            f"{instrument.unit}; the row is set aside. Check for a slip of the decimal or unit.",
            day=day,
            evidence=evidence,
        )
        return None
    return value
