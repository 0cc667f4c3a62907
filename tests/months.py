"""Synthetic months whose truth is known and closes: days coupled by stocks and shared errors."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from recon.flowsheet.balances import Amount, Stock
from recon.flowsheet.network import MASS, Flowsheet, Node, Stream
from recon.reconcile.problem import (
    Draw,
    Effect,
    Figure,
    Measurement,
    MeasurementKind,
    Part,
    Problem,
)

if TYPE_CHECKING:
    from recon.flowsheet.balances import Linear, Unknown

    Random = np.random.Generator


@dataclass(frozen=True, kw_only=True)
class Recipe:
    """
    What a synthetic month is made of.

    Parameters
    ----------
    days, nodes, streams : int
        At least 1, 3 and ``2 * nodes``.
    components : int
        Quantities beside dry mass.
    stocks : int
        Nodes that hold a stock, the last ones.
    alike : int
        Nodes without stock whose leaving streams share one composition.
    metered, assayed, surveyed : float
        Shares of masses, of streams' fractions and of inner stock boundaries that are measured.
    redraw : int
        Days that one draw of a meter's calibration lasts.
    standing : int
        Streams to the boundary that stand every third day.
    composites : int
        Streams assayed by one sample a week; every second one weighted by declared increments.
    held : bool
        Whether the first feed is a custody figure with an uncertainty.
    """

    days: int = 4
    nodes: int = 5
    streams: int = 12
    components: int = 2
    stocks: int = 1
    alike: int = 0
    metered: float = 0.85
    assayed: float = 0.8
    surveyed: float = 0.3
    redraw: int = 10
    standing: int = 0
    composites: int = 0
    held: bool = False


MONTH = Recipe(
    days=31,
    nodes=15,
    streams=40,
    components=4,
    stocks=4,
    alike=1,
    surveyed=0.2,
    standing=2,
    composites=3,
    held=True,
)
"""A month of a whole site: about seven thousand unknowns."""


@dataclass(frozen=True, kw_only=True)
class Month:
    """A problem whose readings are all true, the truth, and the sources' draws, all zero."""

    problem: Problem
    truth: dict[Unknown, float]

    def value(self, of: Linear, over: Linear | None = None) -> float:
        """Give the true value of a sum or ratio [t or 1]."""
        top = sum(c * self.truth[u] for u, c in of)
        return top / (sum(c * self.truth[u] for u, c in over) if over else 1.0)


def synthetic_month(random: Random, recipe: Recipe) -> Month:
    """Make a connected site, let it run, and read it without any error."""
    sheet = _site(random, recipe)
    truth = _run(random, recipe, sheet)
    while not _components_within_mass(sheet, truth, recipe.days):
        truth = _run(random, recipe, sheet)
    measurements, draws = _read(random, recipe, sheet, truth)
    used = sorted({e.draw for m in measurements for e in m.effects})
    new = {old: i for i, old in enumerate(used)}
    measurements = [
        replace(m, effects=tuple(replace(e, draw=new[e.draw]) for e in m.effects))
        for m in measurements
    ]
    return Month(
        problem=Problem(
            flowsheets=(sheet,) * recipe.days,
            measurements=tuple(measurements),
            draws=tuple(draws[i] for i in used),
            figures=_figures(sheet, recipe.days),
        ),
        truth=truth,
    )


def with_errors(month: Month, random: Random) -> Problem:
    """Give every reading its own error and those of the draws that it shares."""
    problem = month.problem
    offsets = [random.normal() * d.u for d in problem.draws]
    measurements = []
    for m in problem.measurements:
        value = m.value
        for e in m.effects:
            value += e.factor * offsets[e.draw] * (m.value if e.relative else 1.0)
        own = random.normal() * (m.u or 0.0)
        measurements.append(replace(m, value=value + own))
    return replace(problem, measurements=tuple(measurements))


def _site(random: Random, recipe: Recipe) -> Flowsheet:
    quantities = (MASS, *(f"c{i + 1}" for i in range(recipe.components)))
    ends: list[tuple[int | None, int | None]] = [(None, 0)]
    ends += [(int(random.integers(max(0, n - 3), n)), n) for n in range(1, recipe.nodes)]
    ends += [(n, None) for n in range(recipe.nodes)]
    while len(ends) < recipe.streams:
        a, b = (int(v) for v in random.choice(recipe.nodes, size=2, replace=False))
        ends.append((a, b))
    stocked = range(recipe.nodes - recipe.stocks, recipe.nodes)
    return Flowsheet(
        quantities=quantities,
        nodes=tuple(
            Node(
                name=f"n{n}",
                conserves=quantities,
                stock=n in stocked,
                same_composition=n in range(1, 1 + recipe.alike),
            )
            for n in range(recipe.nodes)
        ),
        streams=tuple(
            Stream(
                name=f"s{i + 1}",
                source=None if a is None else f"n{a}",
                target=None if b is None else f"n{b}",
                carries=quantities,
            )
            for i, (a, b) in enumerate(ends)
        ),
    )


def _run(random: Random, recipe: Recipe, sheet: Flowsheet) -> dict[Unknown, float]:
    """Split what enters each node; a stock gives what it likes, and takes up the difference."""
    names = [s.name for s in sheet.streams]
    exits = [s.name for s in sheet.streams if s.target is None][: recipe.standing]
    base = dict.fromkeys(sheet.quantities, 1.0)
    base.update(
        zip(
            sheet.components,
            random.dirichlet(np.full(len(sheet.components) + 1, 2.0))[:-1] * 0.8,
            strict=True,
        )
    )
    common = {
        n.name: random.dirichlet(np.full(len(sheet.leaving(n.name)), 8.0)) for n in sheet.nodes
    }
    steady = {q: _flows(random, sheet, common, 1000.0 * base[q], {}, set()) for q in base}
    truth: dict[Unknown, float] = {}
    for n in sheet.nodes:
        for q in sheet.quantities:
            if n.stock:
                truth[Stock(0, n.name, q)] = 8.0 * sum(
                    steady[q][names.index(s.name)] for s in sheet.entering(n.name)
                )
    for day in range(1, recipe.days + 1):
        level = float(random.uniform(0.85, 1.15))
        tilt = {n: random.dirichlet(80.0 * share) for n, share in common.items()}
        still = {s for s in exits if day % 3 == 0}
        given = {n.name: float(random.uniform(0.9, 1.1)) for n in sheet.nodes if n.stock}
        for q in sheet.quantities:
            drawn = {
                s.name: steady[q][names.index(s.name)] * given[s.source]
                for s in sheet.streams
                if s.source in given
            }
            flows = _flows(random, sheet, tilt, 1000.0 * level * base[q], drawn, still)
            truth.update({Amount(day, s, q): float(f) for s, f in zip(names, flows, strict=True)})
            for place in given:
                truth[Stock(day, place, q)] = (
                    truth[Stock(day - 1, place, q)]
                    + sum(truth[Amount(day, s.name, q)] for s in sheet.entering(place))
                    - sum(truth[Amount(day, s.name, q)] for s in sheet.leaving(place))
                )
    return truth


def _flows(
    random: Random,
    sheet: Flowsheet,
    shares: dict[str, np.ndarray],
    feed: float,
    drawn: dict[str, float],
    still: set[str],
) -> np.ndarray:
    """Solve for one quantity's flows; each node's split differs a little by quantity."""
    split: dict[str, float] = {}
    for node in sheet.nodes:
        leaving = [s.name for s in sheet.leaving(node.name)]
        own = shares[node.name]
        if not node.same_composition:
            own = random.dirichlet(200.0 * own)
        open_ = np.array([s not in still for s in leaving])
        own = np.where(open_, own, 0.0)
        split.update(zip(leaving, own / own.sum(), strict=True))
    matrix, right = np.eye(len(sheet.streams)), np.zeros(len(sheet.streams))
    for row, stream in enumerate(sheet.streams):
        if stream.source is None:
            right[row] = feed
        elif stream.name in drawn:
            right[row] = 0.0 if stream.name in still else drawn[stream.name]
        else:
            for column, other in enumerate(sheet.streams):
                if other.target == stream.source:
                    matrix[row, column] -= split[stream.name]
    return np.linalg.solve(matrix, right)


def _components_within_mass(sheet: Flowsheet, truth: dict[Unknown, float], days: int) -> bool:
    places: list[Unknown] = [
        Amount(d, s.name, MASS) for d in range(1, days + 1) for s in sheet.streams
    ]
    places += [Stock(d, n.name, MASS) for d in range(days + 1) for n in sheet.nodes if n.stock]
    return all(
        sum(truth[u._replace(quantity=q)] for q in sheet.components) <= 0.97 * truth[u]
        and min(truth[u._replace(quantity=q)] for q in sheet.quantities) >= 0
        for u in places
    )


def _read(
    random: Random, recipe: Recipe, sheet: Flowsheet, truth: dict[Unknown, float]
) -> tuple[list[Measurement], list[Draw]]:
    draws: list[Draw] = []
    measurements: list[Measurement] = []
    labs = {q: len(draws) + i for i, q in enumerate(sheet.components)}
    draws += [Draw(source=f"laboratory {q}", first=1, u=0.002) for q in sheet.components]
    survey = len(draws)
    draws.append(Draw(source="survey density", first=1, u=0.01))

    def typical(unknown: Unknown) -> float:
        same = [v for u, v in truth.items() if v > 0 and u[1:] == unknown[1:]]
        return float(np.median(same)) if same else 1.0

    def amount(
        unknown: Unknown, name: str, u: float, *, held: bool, effects: tuple[Effect, ...]
    ) -> None:
        period = unknown.period if isinstance(unknown, Amount) else max(unknown.boundary, 1)
        measurements.append(
            Measurement(
                name=name,
                period=period,
                kind=MeasurementKind.METER
                if isinstance(unknown, Amount)
                else MeasurementKind.STOCK,
                parts=(Part(of=((unknown, 1.0),)),),
                value=truth[unknown],
                u=u,
                held=held,
                effects=effects,
            )
        )

    weekly = {s.name for s in sheet.streams[1 : 1 + recipe.composites]}
    for number, stream in enumerate(sheet.streams):
        if random.random() > recipe.metered and number > 0:
            continue
        size = typical(Amount(1, stream.name, MASS))
        for day in range(1, recipe.days + 1):
            if (day - 1) % recipe.redraw == 0:
                draws.append(Draw(source=f"scale {stream.name}", first=day, u=0.008))
            amount(
                Amount(day, stream.name, MASS),
                f"{stream.name} mass",
                0.01 * size,
                held=recipe.held and number == 0,
                effects=(Effect(draw=len(draws) - 1, factor=1.0, relative=True),),
            )
    for number, stream in enumerate(sheet.streams):
        for q in sheet.components:
            if random.random() > recipe.assayed and stream.name not in weekly:
                continue
            spans = (
                [tuple(range(d, min(d + 7, recipe.days + 1))) for d in range(1, recipe.days + 1, 7)]
                if stream.name in weekly
                else [(d,) for d in range(1, recipe.days + 1)]
            )
            for span in spans:
                masses = [truth[Amount(d, stream.name, MASS)] for d in span]
                if sum(masses) <= 0:
                    continue
                if len(span) > 1 and number % 2:
                    parts = tuple(
                        Part(
                            of=((Amount(d, stream.name, q), 1.0),),
                            over=((Amount(d, stream.name, MASS), 1.0),),
                            share=1.0 / len(span),
                        )
                        for d in span
                    )
                else:
                    parts = (
                        Part(
                            of=tuple((Amount(d, stream.name, q), 1.0) for d in span),
                            over=tuple((Amount(d, stream.name, MASS), 1.0) for d in span),
                        ),
                    )
                value = sum(
                    p.share
                    * sum(truth[u] for u, _ in p.of)
                    / sum(truth[u] for u, _ in p.over or ())
                    for p in parts
                )
                measurements.append(
                    Measurement(
                        name=f"{stream.name} {q}",
                        period=span[-1],
                        kind=MeasurementKind.ASSAY,
                        parts=parts,
                        value=value,
                        u=0.02 * value,
                        effects=(Effect(draw=labs[q], factor=1.0, relative=True),),
                    )
                )
    for node in sheet.nodes:
        if not node.stock:
            continue
        for boundary in range(recipe.days + 1):
            if 0 < boundary < recipe.days and random.random() > recipe.surveyed:
                continue
            at = "opening" if boundary == 0 else "closing"
            for q in sheet.quantities:
                unknown = Stock(boundary, node.name, q)
                amount(
                    unknown,
                    f"{node.name} {q} {at}",
                    0.02 * truth[unknown],
                    held=False,
                    effects=(Effect(draw=survey, factor=1.0, relative=True),),
                )
    return measurements, draws


def _figures(sheet: Flowsheet, days: int) -> tuple[Figure, ...]:
    """Recovery of each component to the last boundary stream, by day and over all of them."""
    feed = next(s.name for s in sheet.streams if s.source is None)
    product = [s.name for s in sheet.streams if s.target is None][-1]

    def ratio(q: str, span: range, period: int | None) -> Figure:
        return Figure(
            name=f"{q} recovery",
            period=period,
            of=tuple((Amount(d, product, q), 1.0) for d in span),
            over=tuple((Amount(d, feed, q), 1.0) for d in span),
        )

    return tuple(
        figure
        for q in sheet.components
        for figure in (
            *(ratio(q, range(d, d + 1), d) for d in range(1, days + 1)),
            ratio(q, range(1, days + 1), None),
        )
    )
