"""Readings in time order, one an instant: revisions resolved, repetitions refused."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import timedelta

import numpy as np

from recon.findings import Finding, Severity
from recon.plant.contract import Columns, Faults
from recon.plant.instants import EPOCH


def joined(parts: Sequence[Columns]) -> Columns:
    """Put pieces of one tag together, in the order given; none gives none."""
    if len(parts) == 1:
        return parts[0]
    empty = Columns(
        at=np.empty(0, dtype=np.int64),
        value=np.empty(0),
        quality=np.empty(0, dtype=np.int8),
        known_at=np.empty(0, dtype=np.int64),
    )
    every = parts or [empty]
    return Columns(
        at=np.concatenate([p.at for p in every]),
        value=np.concatenate([p.value for p in every]),
        quality=np.concatenate([p.quality for p in every]),
        known_at=np.concatenate([p.known_at for p in every]),
    )


def in_time_order(columns: Columns, tag: str, faults: Faults, noted: list[Finding]) -> Columns:
    """
    Sort readings by time and keep, of each instant, the row known last.

    Parameters
    ----------
    columns : Columns
        Of one tag, in any order.
    tag : str
    faults : Faults
        Told of two rows of one instant that were known at the same time: which of them counts
        cannot be said.
    noted : list of Finding
        Told how many rows a later one replaced, and how many gave no value.
    """
    order = np.lexsort((columns.known_at, columns.at))
    at, known_at = columns.at[order], columns.known_at[order]
    value, quality = columns.value[order], columns.quality[order]
    same = at[1:] == at[:-1]
    for n in np.flatnonzero(same & (known_at[1:] == known_at[:-1])).tolist():
        faults.add(
            "tag, at, known_at",
            "two rows of one instant, known at the same time",
            None,
            f"{_time(int(at[n]))}: {value[n]:g} and {value[n + 1]:g}",
        )
    last = np.append(~same, True) if len(at) else np.empty(0, dtype=bool)
    replaced = int(len(at) - last.sum())
    missing = np.isnan(value[last])
    if replaced:
        n = int(np.flatnonzero(~last)[0])
        noted.append(
            Finding(
                code="revised-reading",
                subject=tag,
                severity=Severity.NOTE,
                text=(
                    f"{tag}: {replaced:,} reading{'s were' if replaced > 1 else ' was'} revised "
                    f"at the source; the value known last counts. First at {_time(int(at[n]))}: "
                    f"{value[n]:g} became {value[n + 1]:g}."
                ),
            )
        )
    if missing.any():
        first = int(at[last][missing][0])
        noted.append(
            Finding(
                code="missing-value",
                subject=tag,
                severity=Severity.NOTE,
                text=(
                    f"{tag}: {int(missing.sum()):,} of {int(last.sum()):,} readings hold no "
                    f"number, first at {_time(first)}; they count as not covered."
                ),
            )
        )
    return Columns(at=at[last], value=value[last], quality=quality[last], known_at=known_at[last])


def _time(microseconds: int) -> str:
    return (EPOCH + timedelta(microseconds=microseconds)).isoformat(sep=" ")
