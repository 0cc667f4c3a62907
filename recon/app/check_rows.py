"""What the rows of one instrument look like: last value, coverage, stages, and what is missing."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from datetime import UTC, datetime, timedelta
from difflib import get_close_matches
from typing import TYPE_CHECKING

import numpy as np

from recon.ingest.rows import Quality, Record
from recon.units import UNITS

if TYPE_CHECKING:
    from recon.declare.site import Instrument
    from recon.ingest.rows import Series

DAY = timedelta(days=1)
LOOK_BACK = timedelta(days=35)
"""Records are looked for so far back: a month and its late results."""

LOW_COVERAGE = 0.5
"""Below this a day counts as unmeasured (recon.ingest)."""

HOLD = 10
"""A reading speaks until the next, but no longer than so many usual spacings, at least an hour."""


@dataclass(frozen=True, kw_only=True)
class TagCheck:
    """
    What one instrument's rows look like.

    Attributes
    ----------
    tag, kind, unit, use : str
        As declared; ``use`` is "serves" for one that only serves others.
    value : float or None
        Last one [``unit_found``].
    unit_found : str
    at : datetime or None
        When the last value was true, aware UTC.
    coverage : float or None
        Of the last 24 hours, for readings [-].
    rows : int
        Rows looked at: the last day's readings, the last 35 days' records.
    stages : tuple of (str, int)
        Stages seen and how often.
    faults, warnings : tuple of str
        What is missing or wrong.
    """

    tag: str
    kind: str
    unit: str
    use: str
    value: float | None = None
    unit_found: str = ""
    at: datetime | None = None
    coverage: float | None = None
    rows: int = 0
    stages: tuple[tuple[str, int], ...] = ()
    faults: tuple[str, ...] = ()
    warnings: tuple[str, ...] = ()


def check_readings(instrument: Instrument, pieces: Sequence[Series], at: datetime) -> TagCheck:
    """Judge the last day of a tag from its pieces, in time order, the one in force first."""
    times = np.concatenate([p.at for p in pieces])
    values = np.concatenate([p.value for p in pieces])
    quality = np.concatenate([p.quality for p in pieces])
    if not len(times):
        return replace(blank(instrument), warnings=("no reading in the last five weeks.",))
    start, end = _microseconds(at - DAY), _microseconds(at)
    usable = np.isfinite(values) & (quality != Quality.BAD)
    outside = np.zeros(len(values), dtype=bool)
    if instrument.low is not None:
        outside |= values < instrument.low
    if instrument.high is not None:
        outside |= values > instrument.high
    spacing = np.median(np.diff(times)) if len(times) > 1 else 0.0
    longest = max(HOLD * float(spacing), 3600e6)
    ends = np.minimum(np.append(times[1:], end), times + longest)
    spans = np.clip(ends - np.maximum(times, start), 0, None)
    coverage = float(spans[usable & ~outside].sum()) / (end - start)
    warnings = []
    inside = times >= start
    if not inside.any():
        warnings.append("no reading in the last day.")
    elif coverage < LOW_COVERAGE:
        warnings.append(
            f"covers {coverage:.0%} of the last day; below {LOW_COVERAGE:.0%} it is unmeasured."
        )
    if (bad := int((inside & ~usable).sum())) > 0:
        warnings.append(f"{bad:,} of {int(inside.sum()):,} readings of the last day are bad.")
    if (beyond := int((inside & outside).sum())) > 0:
        worst = values[inside & outside][-1]
        warnings.append(
            f"{beyond:,} readings of the last day lie outside {_range(instrument)}, {worst:g} last."
        )
    last = values[-1]
    return replace(
        blank(instrument),
        value=float(last) if np.isfinite(last) else None,
        unit_found=instrument.unit,
        at=_datetime(times[-1]),
        coverage=coverage,
        rows=int(inside.sum()),
        warnings=tuple(warnings),
    )


def reads(instrument: Instrument, record: Record) -> bool:
    """Whether a record is one of an instrument's own."""
    if instrument.kind == "assay":
        return (record.subject, record.item) == (instrument.point, instrument.analyte)
    if instrument.kind == "tickets":
        return record.subject == instrument.tag
    place = instrument.point or instrument.node
    return record.item == instrument.analyte and place in (None, record.subject)


def check_records(instrument: Instrument, records: Sequence[Record]) -> TagCheck:
    """Judge an instrument by its own records of the time looked back."""
    if not records:
        days = LOOK_BACK.days
        rule = "" if instrument.estimate is None else " Its estimate rule would stand in."
        return replace(blank(instrument), warnings=(f"no row in the last {days} days.{rule}",))
    counts: dict[str, int] = {}
    for record in records:
        counts[record.stage] = counts.get(record.stage, 0) + 1
    faults, warnings = list(_wrong_units(instrument, records)), []
    unknown = sorted(set(counts) - set(instrument.stages) - {""})
    for stage in unknown:
        faults.append(
            f'stage "{stage}" is not declared; its {counts[stage]:,} rows would not count. '
            f"Declared: {', '.join(instrument.stages)}."
        )
    valued = [r for r in records if r.value is not None]
    if (empty := len(records) - len(valued)) > 0:
        warnings.append(f"{empty:,} of {len(records):,} rows hold no value.")
    last = max(valued or records, key=lambda r: (r.true_to, r.known_at))
    if last.unit == instrument.unit and _outside(instrument, last.value):
        warnings.append(f"the last value, {last.value:g}, lies outside {_range(instrument)}.")
    return replace(
        blank(instrument),
        value=last.value,
        unit_found=last.unit,
        at=last.true_to,
        rows=len(records),
        stages=tuple(sorted(counts.items())),
        faults=tuple(faults),
        warnings=tuple(warnings),
    )


def _wrong_units(instrument: Instrument, records: Sequence[Record]) -> Iterator[str]:
    for name in sorted({r.unit for r in records if r.value is not None}):
        if name not in UNITS:
            close = get_close_matches(name, UNITS, n=1)
            hint = f' Did you mean "{close[0]}"?' if close else ""
            yield f'rows come in the unknown unit "{name}".{hint}'
        elif UNITS[name].kind is not UNITS[instrument.unit].kind:
            yield (
                f'rows come in "{name}", a unit of {UNITS[name].kind}; '
                f'"{instrument.unit}", a unit of {UNITS[instrument.unit].kind}, is declared.'
            )


def blank(instrument: Instrument) -> TagCheck:
    """Give the check of an instrument of which nothing is known yet."""
    attached = instrument.stream is not None or instrument.node is not None
    return TagCheck(
        tag=instrument.tag,
        kind=instrument.kind,
        unit=instrument.unit,
        use=instrument.use if attached else "serves",
    )


def _outside(instrument: Instrument, value: float | None) -> bool:
    low, high = instrument.low, instrument.high
    if value is None:
        return False
    return (low is not None and value < low) or (high is not None and value > high)


def _range(instrument: Instrument) -> str:
    low = "" if instrument.low is None else f"{instrument.low:g}"
    high = "" if instrument.high is None else f"{instrument.high:g}"
    return f"{low}..{high} {instrument.unit}"


def _microseconds(when: datetime) -> int:
    return round(when.timestamp() * 1e6)


def _datetime(microseconds: np.int64) -> datetime:
    return datetime.fromtimestamp(int(microseconds) / 1e6, tz=UTC)
