"""What each kind of planted fault does to readings, papers or the plant itself."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace
from datetime import timedelta

import numpy as np

from recon.declare.site import Site
from recon.demo.clock import Floats, Grid, instant
from recon.demo.faults import Fault
from recon.demo.laboratory import SHIFT_POINTS
from recon.ingest.rows import Quality, Record, RowKind, Series

LOST = {
    "cleaners": (1.0, 0.262, 0.290, 0.330, 0.065),
    "shed": (1.0, 0.270, 0.282, 0.322, 0.072),
}
"""What leaks hold: mass, then the fractions of Cu, Fe, S and SiO2."""
PLUGGED = {"Cu": 1.0, "S": 1.0, "Fe": 0.5, "SiO2": 0.0}
"""How a plugged sampler's error enters each analyte."""
AGAIN = timedelta(minutes=17)


def lost_by(faults: Sequence[Fault], grid: Grid) -> dict[str, Floats]:
    """Give what leaks take from nodes, shape (T, 5) [t a step]."""
    lost: dict[str, Floats] = {}
    for fault in faults:
        if fault.kind == "leak" and fault.day < len(grid.days):
            first, last = _window(fault, grid)
            here = (grid.edges[:-1] >= first) & (grid.edges[:-1] < last)
            flow = here[:, None] * fault.size * grid.hours * np.array(LOST[fault.tag])
            lost[fault.tag] = lost.get(fault.tag, np.zeros((grid.steps, 5))) + flow
    return lost


def spoil(
    faults: Sequence[Fault],
    *,
    site: Site,
    grid: Grid,
    series: tuple[Series, ...],
    records: tuple[Record, ...],
) -> tuple[tuple[Series, ...], tuple[Record, ...]]:
    """
    Apply faults to clean readings and papers.

    Returns
    -------
    tuple of Series, tuple of Record
        Everything that no fault touches is the very same object.
    """
    for fault in faults:
        if fault.day > len(grid.days):
            continue
        first, last = _window(fault, grid)
        if fault.kind in _ON_SERIES:
            change = _ON_SERIES[fault.kind]
            series = tuple(
                change(s, fault, first, last) if s.tag == fault.tag else s for s in series
            )
        elif fault.kind in _ON_RECORDS:
            alter = _ON_RECORDS[fault.kind]
            records = alter(records, fault, first, last)
    assert len({i.tag for i in site.instruments}) >= len(series)
    return series, records


def _window(fault: Fault, grid: Grid) -> tuple[int, int]:
    """Give when a fault acts, [from, to) in UTC microseconds."""
    cut = int(grid.edges[grid.first[min(fault.day, len(grid.days))]])
    first = cut + round(fault.hour * 3.6e9)
    if fault.hours is None:
        return first, int(grid.edges[-1]) + 1
    return first, first + round(fault.hours * 3.6e9)


def _span_step(s: Series, fault: Fault, first: int, last: int) -> Series:
    here = (s.at >= first) & (s.at < last)
    return replace(s, value=np.where(here, np.round(s.value * (1.0 + fault.size), 2), s.value))


def _drift(s: Series, fault: Fault, first: int, last: int) -> Series:
    days = np.clip(s.at - first, 0, last - first) / 8.64e10
    read = np.round(s.value * (1.0 + fault.size * days), 3)
    return replace(s, value=np.where(s.at >= first, read, s.value))


def _stuck(s: Series, _: Fault, first: int, last: int) -> Series:
    here = (s.at >= first) & (s.at < last)
    if not here.any():
        return s
    held = s.value[max(int(np.argmax(here)) - 1, 0)]
    return replace(s, value=np.where(here, held, s.value))


def _gauge(s: Series, fault: Fault, first: int, last: int) -> Series:
    here = (s.at >= first) & (s.at < last)
    return replace(s, value=np.where(here, np.round(s.value + fault.size, 4), s.value))


def _dropout(s: Series, _: Fault, first: int, last: int) -> Series:
    """Lose values: every third row is there, marked bad, and reads zero; the others are empty."""
    here = (s.at >= first) & (s.at < last)
    marked = here & (np.cumsum(here) % 3 == 0)
    return replace(
        s,
        value=np.where(marked, 0.0, np.where(here, np.nan, s.value)),
        quality=np.where(here, int(Quality.BAD), s.quality).astype(np.int8),
    )


def _reset(s: Series, _: Fault, first: int, last: int) -> Series:
    """Begin again at zero, counting as before; the roll-over before it is in the past."""
    here = (s.at >= first) & (s.at < last)
    if not here.any():
        return s
    start = s.value[int(np.argmax(here))]
    return replace(s, value=np.where(here, np.round(s.value - start, 3), s.value))


def _of(record: Record, kind: RowKind, subject: str, first: int, last: int) -> bool:
    """Whether a record's span lies in a window."""
    return (
        record.kind is kind
        and record.subject == subject
        and instant(first) <= record.true_from
        and record.true_to <= instant(last)
    )


def _scaled_assay(
    records: tuple[Record, ...], fault: Fault, first: int, last: int
) -> tuple[Record, ...]:
    def touched(r: Record) -> bool:
        middle = r.true_from + (r.true_to - r.true_from) / 2
        return (
            r.kind is RowKind.ASSAY
            and r.subject == fault.tag
            and r.item == fault.other
            and instant(first) <= middle < instant(last)
        )

    return tuple(
        replace(r, value=round(r.value * fault.size, 5)) if touched(r) and r.value else r
        for r in records
    )


def _swapped(
    records: tuple[Record, ...], fault: Fault, first: int, last: int
) -> tuple[Record, ...]:
    """Exchange the values of two points, result by result, where both have one."""
    pair = (fault.tag, fault.other)
    value = {
        (r.subject, r.item, r.stage): r.value
        for r in records
        if any(_of(r, RowKind.ASSAY, point, first, last) for point in pair)
    }
    result = []
    for r in records:
        if any(_of(r, RowKind.ASSAY, point, first, last) for point in pair):
            partner = pair[1] if r.subject == pair[0] else pair[0]
            r = replace(r, value=value.get((partner, r.item, r.stage), r.value))
        result.append(r)
    return tuple(result)


def _twice(records: tuple[Record, ...], fault: Fault, first: int, last: int) -> tuple[Record, ...]:
    result = list(records)
    there = [n for n, r in enumerate(records) if _of(r, RowKind.TICKET, fault.tag, first, last)]
    if there:
        n = there[len(there) // 2]
        again = records[n]
        result.insert(
            n + 1,
            replace(
                again,
                document=f"{again.document[:-2]}91",
                true_from=again.true_from + AGAIN,
                true_to=again.true_to + AGAIN,
                known_at=again.known_at + timedelta(hours=3),
            ),
        )
    return tuple(result)


def _survey(records: tuple[Record, ...], fault: Fault, first: int, last: int) -> tuple[Record, ...]:
    return tuple(
        replace(r, value=round(r.value * (1.0 + fault.size), 4))
        if _of(r, RowKind.SURVEY, fault.tag, first, last) and r.item == fault.other and r.value
        else r
        for r in records
    )


def _plugged(
    records: tuple[Record, ...], fault: Fault, first: int, last: int
) -> tuple[Record, ...]:
    """Starve night samples of heavy minerals; iron half as much, silica hardly."""
    assert fault.tag in SHIFT_POINTS

    def touched(r: Record) -> bool:
        return _of(r, RowKind.ASSAY, fault.tag, first, last) and r.document.endswith("-N")

    return tuple(
        replace(r, value=round(r.value * (1.0 + fault.size * PLUGGED[r.item]), 5))
        if touched(r) and r.value
        else r
        for r in records
    )


_ON_SERIES: dict[str, Callable[[Series, Fault, int, int], Series]] = {
    "span step": _span_step,
    "drift": _drift,
    "stuck": _stuck,
    "gauge error": _gauge,
    "dropout": _dropout,
    "totaliser reset": _reset,
}
_ON_RECORDS: dict[str, Callable[[tuple[Record, ...], Fault, int, int], tuple[Record, ...]]] = {
    "swapped samples": _swapped,
    "decimal slip": _scaled_assay,
    "wrong basis": _scaled_assay,
    "duplicate ticket": _twice,
    "survey error": _survey,
    "sampler plugged": _plugged,
}
