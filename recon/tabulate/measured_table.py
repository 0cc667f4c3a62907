"""Table 5: what each instrument said, what the fit made of it, and by how much it was moved."""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass
from math import sqrt
from typing import TYPE_CHECKING

from recon.tabulate.as_measured import MOVES
from recon.tabulate.derived import Derived, combined

if TYPE_CHECKING:
    from collections.abc import Sequence

    from recon.ingest.measured import Measured
    from recon.tabulate.cells import BasisOf
    from recon.tabulate.fitted import Fit
    from recon.tabulate.month import Month, Sheet, Span

TABLE = "measured-reconciled"
REDUNDANT = 1e-6
"""An adjustment that keeps no more than this share of its reading's variance tests nothing."""


@dataclass(frozen=True, kw_only=True)
class Line:
    """An instrument over a span: weights of its readings, and their places in the month."""

    tag: str
    span: Span
    places: tuple[int, ...]
    weight: float


def write_measured(sheet: Sheet) -> None:
    """Write each instrument for each day and for the month; readings set aside are not totalled."""
    month = sheet.month
    lines = _lines(month)
    measured = month.ingested.measured
    groups = [[(line.weight, measured[i].measurement) for i in line.places] for line in lines]
    known = [month.fitted.of_one(group) for group in groups]
    rest = iter(
        month.fitted.means([g for g, fit in zip(groups, known, strict=True) if fit is None])
    )
    for line, fit in zip(lines, known, strict=True):
        _write(sheet, line, [measured[i] for i in line.places], fit or next(rest))


def _lines(month: Month) -> list[Line]:
    """Group readings: amounts add up, fractions are averaged, stocks are of the month's cuts."""
    by_day: dict[tuple[str, int], list[int]] = defaultdict(list)
    whole: dict[str, list[int]] = defaultdict(list)
    aside: dict[str, list[int]] = defaultdict(list)
    for i, m in enumerate(month.ingested.measured):
        by_day[_row(m), m.measurement.period].append(i)
        if m.boundary != "closing" or m.measurement.period == len(month.days):
            (aside if m.set_aside else whole)[_row(m)].append(i)
    whole = {tag: whole.get(tag) or aside[tag] for tag in dict.fromkeys((*whole, *aside))}
    lines = [
        Line(tag=tag, span=month.spans[p - 1], places=tuple(places), weight=_weight(month, places))
        for (tag, p), places in by_day.items()
    ]
    lines += [
        Line(tag=tag, span=month.whole, places=tuple(places), weight=_weight(month, places))
        for tag, places in whole.items()
    ]
    return lines


def _row(m: Measured) -> str:
    """Stocks have a row for each boundary: the opening and the closing are not one figure."""
    return f"{m.tag} opening" if m.boundary == "opening" else m.tag


def _weight(month: Month, places: Sequence[int]) -> float:
    one = month.ingested.measured[places[0]]
    adds = one.stream is not None and one.basis == "amount"
    return 1.0 if adds else 1.0 / len(places)


def _write(sheet: Sheet, line: Line, readings: Sequence[Measured], fit: Fit) -> None:
    month, m = sheet.month, readings[0].measurement
    by, period = m.unit_factor, line.span.name
    number = combined(
        (line.weight, Derived(r.measurement.value, {i: 1.0}))
        for i, r in zip(line.places, readings, strict=True)
    )
    u = month.measured.readings.uncertainty(number)
    estimated = any(r.estimated for r in readings)
    settled = all(r.use == "held" for r in readings)
    corrected = any(c.kind in MOVES for r in readings for c in r.corrections)
    word: BasisOf = "corrected" if corrected else "read"
    sheet.number(
        TABLE,
        period,
        line.tag,
        "measured",
        number.value / by,
        u=u / by,
        unit=m.unit,
        basis="estimated" if estimated else "settled" if settled else word,
    )
    sheet.number(
        TABLE,
        period,
        line.tag,
        "reconciled",
        None if fit.value is None else fit.value / by,
        u=None if fit.u is None else fit.u / by,
        unit=m.unit,
        basis="fitted",
        reason=fit.reason,
    )
    _write_adjustment(sheet, line, number, u, fit, m.unit, by)
    found = month.fitted.reconciled.get((m.name, m.period))
    if line.span.day and len(readings) == 1:
        t = found.standardised if found else None
        sheet.number(
            TABLE,
            period,
            line.tag,
            "standardised",
            t,
            basis="computed",
            reason="" if t is not None else "nothing checks it",
        )
    if not line.span.day or any(r.set_aside for r in readings):
        sheet.number(TABLE, period, line.tag, "readings", len(readings), basis="computed")
        sheet.words(TABLE, period, line.tag, "word", _word(month, readings))


def _write_adjustment(
    sheet: Sheet, line: Line, number: Derived, u: float, fit: Fit, unit: str, by: float
) -> None:
    period, moved, share, z = line.span.name, None, None, None
    if fit.value is not None:
        moved = fit.value - number.value
        share = 100.0 * moved / number.value if number.value else None
        left = u**2 - (fit.u or 0.0) ** 2
        z = moved / sqrt(left) if left > REDUNDANT * u**2 else None
    sheet.number(
        TABLE,
        period,
        line.tag,
        "adjustment",
        None if moved is None else moved / by,
        unit=unit,
        basis="computed",
        reason=fit.reason,
    )
    for column, value, why in (
        ("adjustment_share", share, "measured is zero"),
        ("adjustment_z", z, "nothing checks it"),
    ):
        sheet.number(
            TABLE,
            period,
            line.tag,
            column,
            value,
            basis="computed",
            reason="" if value is not None else fit.reason or why,
        )


def _word(month: Month, readings: Sequence[Measured]) -> str:
    if all(r.set_aside for r in readings):
        return "set aside by decision"
    if all(r.use == "compare" for r in readings):
        return "compared only"
    held = "held; " if any(r.use == "held" for r in readings) else ""
    found = [
        month.fitted.reconciled.get((r.measurement.name, r.measurement.period)) for r in readings
    ]
    checked = sum(1 for f in found if f is not None and f.redundant)
    if checked == len(readings):
        return held + "can be checked"
    if checked == 0:
        return held + "cannot be checked"
    return f"{held}can be checked on {checked} of {len(readings)} readings"
