"""Small networks that several tests share, and random ones that close."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from recon.flowsheet.balances import Amount, balance_rows
from recon.flowsheet.network import MASS, Flowsheet, Node, Stream
from recon.reconcile.problem import Measurement, MeasurementKind, Part, Problem

if TYPE_CHECKING:
    from numpy.typing import NDArray

EXCHANGER_ENDS = {
    "1": (None, "splitter"),
    "2": ("splitter", "exchanger"),
    "3": ("splitter", "bypass valve"),
    "4": ("exchanger", "mixer"),
    "5": ("bypass valve", "mixer"),
    "6": ("mixer", None),
}


def network(
    ends: Mapping[str, tuple[str | None, str | None]], quantities: Sequence[str] = (MASS,)
) -> Flowsheet:
    """Draw a flowsheet in which every stream carries and every node conserves everything."""
    names = dict.fromkeys(n for pair in ends.values() for n in pair if n is not None)
    return Flowsheet(
        quantities=tuple(quantities),
        nodes=tuple(Node(name=n, conserves=tuple(quantities)) for n in names),
        streams=tuple(
            Stream(name=s, source=a, target=b, carries=tuple(quantities))
            for s, (a, b) in ends.items()
        ),
    )


def metered(
    sheet: Flowsheet, readings: Mapping[str, float], u: float | Mapping[str, float] = 1.0
) -> Problem:
    """State one period in which some streams' dry mass is metered."""
    return Problem(
        flowsheets=(sheet,),
        measurements=tuple(
            Measurement(
                name=f"F{stream}",
                period=1,
                kind=MeasurementKind.METER,
                parts=(Part(of=((Amount(1, stream, MASS), 1.0),)),),
                value=value,
                u=u if isinstance(u, float) else u[stream],
            )
            for stream, value in readings.items()
        ),
    )


@dataclass(frozen=True, kw_only=True)
class Truth:
    """A random network whose amounts close, with every reading true."""

    problem: Problem
    amounts: dict[Amount, float]


def random_network(
    random: np.random.Generator,
    *,
    nodes: int,
    components: int = 0,
    metered_share: float = 0.8,
    worst: float = 0.1,
) -> Truth:
    """
    Make a connected network with recycles, positive amounts that close, and readings.

    Parameters
    ----------
    random : Generator
    nodes : int
        At least 2.
    components : int
        Number of components beside dry mass; their fractions add to less than one.
    metered_share : float
        Share of masses, and of fractions, that is measured.
    worst : float
        Largest relative standard uncertainty; the smallest is about a thirtieth of it.
    """
    quantities = (MASS, *(f"c{i + 1}" for i in range(components)))
    ends: dict[str, tuple[str | None, str | None]] = {}

    def add(source: int | None, target: int | None) -> None:
        ends[f"s{len(ends) + 1}"] = (
            None if source is None else f"n{source}",
            None if target is None else f"n{target}",
        )

    add(None, 0)
    for node in range(1, nodes):
        add(int(random.integers(node)), node)
    for node in range(nodes):
        add(node, None)
    for _ in range(nodes // 2):
        a, b = random.choice(nodes, size=2, replace=False)
        add(int(a), int(b))
    sheet = network(ends, quantities)
    amounts = _closing_amounts(sheet, random)
    while not _possible(sheet, amounts):
        amounts = _closing_amounts(sheet, random)
    measurements = []
    for stream in sheet.streams:
        mass = amounts[Amount(1, stream.name, MASS)]
        for quantity in quantities:
            if random.random() > metered_share:
                continue
            unknown = Amount(1, stream.name, quantity)
            below = None if quantity == MASS else ((unknown._replace(quantity=MASS), 1.0),)
            true = amounts[unknown] / (1.0 if below is None else mass)
            measurements.append(
                Measurement(
                    name=f"{stream.name} {quantity}",
                    period=1,
                    kind=MeasurementKind.METER if below is None else MeasurementKind.ASSAY,
                    parts=(Part(of=((unknown, 1.0),), over=below),),
                    value=true,
                    u=true * worst * float(10 ** random.uniform(-1.5, 0.0)),
                )
            )
    return Truth(
        problem=Problem(flowsheets=(sheet,), measurements=tuple(measurements)), amounts=amounts
    )


def _possible(sheet: Flowsheet, amounts: dict[Amount, float]) -> bool:
    """Whether components stay well within dry mass in every stream."""
    return (
        all(
            sum(amounts[Amount(1, s.name, q)] for q in sheet.components)
            <= 0.95 * amounts[Amount(1, s.name, MASS)]
            for s in sheet.streams
        )
        or MASS not in sheet.quantities
    )


def _closing_amounts(sheet: Flowsheet, random: np.random.Generator) -> dict[Amount, float]:
    """Split what enters each node over what leaves it, quantity by quantity, until it closes."""
    result: dict[Amount, float] = {}
    streams = [s.name for s in sheet.streams]
    base = random.dirichlet(np.full(len(sheet.quantities), 2.0)) * 0.8
    common = {
        n.name: random.dirichlet(np.full(len(sheet.leaving(n.name)), 8.0)) for n in sheet.nodes
    }
    for i, quantity in enumerate(sheet.quantities):
        total = 1000.0 if quantity == MASS else 1000.0 * float(base[i])
        split = {}
        for node in sheet.nodes:
            leaving = [s.name for s in sheet.leaving(node.name)]
            tilt = random.dirichlet(60.0 * common[node.name] + 0.5)
            split.update(dict(zip(leaving, tilt, strict=True)))
        matrix = np.eye(len(streams))
        right = np.zeros(len(streams))
        for row, stream in enumerate(sheet.streams):
            if stream.source is None:
                right[row] = total
                continue
            for feeder in sheet.entering(stream.source):
                matrix[row, streams.index(feeder.name)] -= split[stream.name]
        flows = np.linalg.solve(matrix, right)
        result.update(
            {Amount(1, s, quantity): float(f) for s, f in zip(streams, flows, strict=True)}
        )
    return result


def with_noise(problem: Problem, random: np.random.Generator) -> Problem:
    """Add independent normal errors of the stated uncertainties to every reading."""
    from dataclasses import replace

    return replace(
        problem,
        measurements=tuple(
            replace(m, value=m.value + (m.u or 0.0) * float(random.standard_normal()))
            for m in problem.measurements
        ),
    )


def linear_closed_form(problem: Problem) -> dict[Amount, float]:
    """
    Solve a fully metered linear problem by the textbook formula ``x = y - V A' (A V A')^-1 A y``.

    Independent of the project's own arrays: used as the outside judge of its engines.
    """
    order = [m.parts[0].of[0][0] for m in problem.measurements]
    y = np.array([m.value for m in problem.measurements])
    variance = np.diag([float(m.u or 0.0) ** 2 for m in problem.measurements])
    rows: list[NDArray[np.float64]] = []
    for balance in balance_rows(problem.flowsheets):
        row = np.zeros(len(order))
        for unknown, coefficient in balance.form:
            row[order.index(unknown)] = coefficient
        rows.append(row)
    a = np.array(rows)
    gain = variance @ a.T @ np.linalg.inv(a @ variance @ a.T)
    x = y - gain @ (a @ y)
    return {u: float(v) for u, v in zip(order, x, strict=True) if isinstance(u, Amount)}
