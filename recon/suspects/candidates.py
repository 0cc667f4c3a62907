"""What could be wrong: readings, shared sources and sample takers, each with plausible sizes."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from recon.flowsheet.balances import Amount, Linear, Stock, Unknown
from recon.flowsheet.network import MASS
from recon.reconcile.figures import REDUNDANT

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from recon.reconcile.problem import Measurement
    from recon.reconcile.state import State

    Vector = NDArray[np.float64]

SLABS = (0.2, 1.0)
"""Plausible sizes of a reading's fault, small and large, as shares of its reference."""
OWN_SLABS = (3.0, 10.0)
"""The same for stocks and shared sources, in units of their own standard uncertainty."""
COPPER = "Cu"


@dataclass(frozen=True, kw_only=True)
class Column:
    """
    One direction in which the data can be wrong, of amplitude one.

    Attributes
    ----------
    shift : tuple of (int, float)
        Standardised data it moves, and by how much; empty for a leak, which moves balances.
    slabs : tuple of float
        Plausible amplitudes, small and large.
    scale : float
        Printed size per amplitude [unit], and ``unit``.
    copper : float or None
        Copper per amplitude [t]; None where the fault moves no copper that can be stated.
    value, low, high : float
        Reading and its range in amplitudes; a fault of amplitude b leaves ``value - b``.
    """

    shift: tuple[tuple[int, float], ...]
    slabs: tuple[float, float]
    scale: float
    unit: str
    copper: float | None = None
    value: float = 0.0
    low: float = -np.inf
    high: float = np.inf


@dataclass(frozen=True, kw_only=True)
class Candidate:
    """
    One suspect.

    Attributes
    ----------
    kind : str
        meter, assay, sampler, stock, source, leak.
    name : str
        Measurement, sample taker, source, or node.
    period : int or None
        Its period or a draw's first period; None for a fault that lasts through all periods.
    columns : tuple of int
        Directions it is free in: one, or one for each assay of a sample taker.
    """

    kind: str
    name: str
    period: int | None
    columns: tuple[int, ...]


def reading_columns(state: State, x: Vector, freed: Vector, checked: Vector) -> list[Column | None]:
    """
    Give the column of each reading and draw; None where nothing checks it.

    Parameters
    ----------
    state : State
        Of the tests.
    x : ndarray
        The point, shape (n,).
    freed : ndarray
        Bias of each datum alone, in its own standard uncertainties, shape (m + g,); 0 where it is
        too weakly checked to be known.
    checked : ndarray
        Share of each datum's variance left in its residual, shape (m + g,).
    """
    columns: list[Column | None] = []
    amounts: dict[Unknown, float] = {
        c: float(v) for c, v in zip(state.columns, x, strict=True) if isinstance(c, Amount | Stock)
    }
    for i, m in enumerate(state.fit.measurements):
        columns.append(_of_reading(m, i, amounts, freed[i]) if checked[i] > REDUNDANT else None)
    first = len(columns)
    for k, draw in enumerate(state.problem.draws):
        row = first + k
        columns.append(
            Column(shift=((row, -1.0),), slabs=OWN_SLABS, scale=draw.u, unit="")
            if checked[row] > REDUNDANT
            else None
        )
    return columns


def reference(m: Measurement, freed: float) -> float:
    """Give the scale of a reading's plausible faults [t or 1]: a dead meter reads 0 but is big."""
    fitted = m.value - freed * (m.u or 0.0)
    return max(abs(m.value), abs(fitted), abs(m.typical or 0.0))


def _of_reading(m: Measurement, row: int, amounts: Mapping[Unknown, float], freed: float) -> Column:
    u = m.u or 0.0
    ratio = any(part.over is not None for part in m.parts)
    if m.kind.value == "stock":
        slabs = OWN_SLABS
    else:
        size = max(reference(m, freed) / u, 1.0)
        slabs = (SLABS[0] * size, SLABS[1] * size)
    return Column(
        shift=((row, 1.0),),
        slabs=slabs,
        scale=u / m.unit_factor,
        unit=m.unit,
        copper=None if (c := copper_of(m, amounts)) is None else c * u,
        value=m.value / u,
        low=0.0 if _never_negative(m) else -np.inf,
        high=1.0 / u if ratio else np.inf,
    )


def _never_negative(m: Measurement) -> bool:
    return all(coefficient > 0 for part in m.parts for _, coefficient in part.of)


def copper_of(m: Measurement, amounts: Mapping[Unknown, float]) -> float | None:
    """Copper [t] that goes with one unit of a reading [t or 1], at the fitted grade and mass."""
    if len(m.parts) != 1:
        return None
    part = m.parts[0]
    quantities = {u.quantity for u, _ in part.of}
    if part.over is not None:
        return sum(c * amounts[u] for u, c in part.over) if quantities == {COPPER} else None
    if quantities == {COPPER}:
        return 1.0
    if quantities != {MASS}:
        return None
    copper = [(u._replace(quantity=COPPER), c) for u, c in part.of]
    if any(u not in amounts for u, _ in copper):
        return None
    mass = sum(c * amounts[u] for u, c in part.of)
    return sum(c * amounts[u] for u, c in copper) / mass if mass else None


def sampler_groups(measurements: Sequence[Measurement]) -> list[tuple[str, int, tuple[int, ...]]]:
    """
    Group assays by sample taker and period: name, period, rows.

    Without a declared sample taker, the assays of one stream or stock are taken to come from one.
    """
    groups: dict[tuple[str, int], list[int]] = {}
    for i, m in enumerate(measurements):
        if m.kind.value != "assay" and not any(p.over is not None for p in m.parts):
            continue
        name = m.sampler or place_of(m.parts[0].of)
        groups.setdefault((name, m.period), []).append(i)
    return [(n, p, tuple(rows)) for (n, p), rows in groups.items() if len(rows) > 1]


def place_of(form: Linear) -> str:
    """Name the streams or stocks a form is about."""
    return " + ".join(dict.fromkeys(u.stream if isinstance(u, Amount) else u.node for u, _ in form))
