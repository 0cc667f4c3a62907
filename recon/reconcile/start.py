"""Where the search begins: values and sizes from the data alone.

Ratios make the problem non-convex. The start solves a convex relative of it, in which an assay's
misfit is ``(A - value * M) / (u * M_ref)`` with a reference mass that is refreshed a few times.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from scipy import sparse

from recon.flowsheet.balances import Amount, Stock
from recon.flowsheet.network import MASS
from recon.reconcile.linearise import Local, Point, local
from recon.reconcile.state import Common, Share, carries_mass

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from recon.reconcile.solver import Step
    from recon.reconcile.state import Readings, State

    Vector = NDArray[np.float64]

PULL = 1.0
"""Weight of the pull towards the first guess in the convex start, per typical size: as if every
unknown were read once, to 100 %. Errors of assays would otherwise draw small unmeasured flows to
nothing."""
SMALLEST = 1e-2
"""Smallest size of an unknown, as a share of the typical size of its quantity."""
PASSES = 3
LOWEST = 0.1
"""A reference mass is not refreshed below this share of the first guess of it: an unmeasured small
flow would otherwise draw its own weight, and itself, to nothing."""
AWAY = 0.02
"""Denominators of assays start at least this share of their first guess away from zero."""


def first_guess(state: State) -> tuple[Vector, Vector]:
    """
    Guess every unknown and its size: from readings of it, of its place on other days, of others.

    A stream or stock that is not read on one day is likely of the size it is read at on others;
    only a place that is never read gets the median of its quantity.

    Returns
    -------
    x, size : ndarray
        Shape (n,) [t or -]; sizes are positive.
    """
    x = np.full(len(state.columns), np.nan)
    fractions: dict[int, list[float]] = {}
    amounts: dict[int, list[float]] = {}
    for readings in (state.fit, state.held):
        _collect(readings, amounts, fractions)
    for column, values in amounts.items():
        x[column] = float(np.mean(values))
    typical = _typical_sizes(state, x, fractions)
    own, grade = _by_place(state, amounts), _by_place(state, fractions)
    sizes = np.array([_size_of(c, typical, own, grade) for c in state.columns])
    mass_first = sorted(
        range(len(x)), key=lambda i: getattr(state.columns[i], "quantity", MASS) != MASS
    )
    for i in mass_first:
        if np.isnan(x[i]):
            x[i] = _fill(state, i, x, fractions, grade, sizes[i])
    _fill_compositions(state, x)
    return x, np.maximum(np.abs(x), SMALLEST * sizes)


Place = tuple[type, str, str]
"""Stream or stock, its name, and the quantity: the same on every day."""


def _place(column: Amount | Stock) -> Place:
    name = column.stream if isinstance(column, Amount) else column.node
    return type(column), name, column.quantity


def _by_place(state: State, read: dict[int, list[float]]) -> dict[Place, float]:
    """Median size of what is read at each place over all periods, zeros left out."""
    found: dict[Place, list[float]] = {}
    for i, values in read.items():
        column = state.columns[i]
        if isinstance(column, Amount | Stock):
            found.setdefault(_place(column), []).extend(abs(v) for v in values if v)
    return {place: float(np.median(values)) for place, values in found.items() if values}


def _collect(
    readings: Readings, amounts: dict[int, list[float]], fractions: dict[int, list[float]]
) -> None:
    """Sort the readings by column: amounts of one single unknown, fractions of one or several."""
    per_reading = np.diff(readings.gather.indptr)
    per_part = np.diff(readings.of.indptr)
    first = readings.gather.indptr[:-1]
    for i in np.flatnonzero(per_reading == 1):
        k = int(readings.gather.indices[first[i]])
        row = slice(readings.of.indptr[k], readings.of.indptr[k + 1])
        if readings.ratio[k]:
            for column in readings.of.indices[row]:
                fractions.setdefault(int(column), []).append(float(readings.value[i]))
        elif per_part[k] == 1:
            column, factor = int(readings.of.indices[row][0]), float(readings.of.data[row][0])
            amounts.setdefault(column, []).append(float(readings.value[i]) / factor)


def _typical_sizes(
    state: State, x: Vector, fractions: dict[int, list[float]]
) -> dict[tuple[type, str], float]:
    """Median size of each quantity among streams and among stocks, from whatever is read."""
    quantities = state.problem.flowsheets[0].quantities
    kinds = (Amount, Stock)
    found: dict[tuple[type, str], list[float]] = {(k, q): [] for k in kinds for q in quantities}
    grades: dict[str, list[float]] = {q: [] for q in quantities}
    for i, column in enumerate(state.columns):
        if isinstance(column, Amount | Stock):
            if not np.isnan(x[i]) and x[i] != 0:
                found[type(column), column.quantity].append(abs(x[i]))
            grades[column.quantity] += [abs(v) for v in fractions.get(i, []) if v]
    everything = [v for values in found.values() for v in values]
    overall = float(np.median(everything)) if everything else 1.0
    result: dict[tuple[type, str], float] = {}
    for kind in kinds:
        masses = found.get((kind, MASS)) or found.get((Amount, MASS)) or []
        mass = float(np.median(masses)) if masses else overall
        for quantity in quantities:
            own = found[kind, quantity]
            if quantity == MASS or MASS not in quantities:
                result[kind, quantity] = float(np.median(own)) if own else mass
            elif grades[quantity]:
                result[kind, quantity] = mass * float(np.median(grades[quantity]))
            else:
                result[kind, quantity] = float(np.median(own)) if own else 0.1 * mass
    return result


def _size_of(
    column: object,
    typical: dict[tuple[type, str], float],
    own: dict[Place, float],
    grade: dict[Place, float],
) -> float:
    if isinstance(column, Share):
        return 1.0
    if isinstance(column, Common):
        return typical[Amount, column.quantity]
    assert isinstance(column, Amount | Stock)
    place = _place(column)
    kind, name, quantity = place
    if place in own:
        return own[place]
    mass = own.get((kind, name, MASS), typical.get((kind, MASS), 0.0))
    if place in grade and mass > 0:
        return mass * grade[place]
    known_mass = (kind, name, MASS) in own
    return min(typical[kind, quantity], 0.5 * mass) if known_mass else typical[kind, quantity]


def _fill(
    state: State,
    i: int,
    x: Vector,
    fractions: dict[int, list[float]],
    grade: dict[Place, float],
    size: float,
) -> float:
    column = state.columns[i]
    if isinstance(column, Share | Common):
        return size
    if carries_mass(state, column):
        mass = float(x[state.index[column._replace(quantity=MASS)]])
        if i in fractions:
            return mass * float(np.mean(fractions[i]))
        if _place(column) in grade:
            return mass * grade[_place(column)]
        return min(size, 0.5 * mass)
    return size


def _fill_compositions(state: State, x: Vector) -> None:
    """Shares in proportion to what leaves, common vectors as its sum."""
    if not len(state.alike):
        return
    amount, share, common = state.alike.T
    x[np.unique(common)] = 0.0
    np.add.at(x, common, np.abs(x[amount]))
    whole = np.zeros_like(x)
    np.add.at(whole, share, np.abs(x[amount]))
    nodes: dict[tuple[int, str], list[int]] = {}
    for i in np.unique(share):
        column = state.columns[i]
        assert isinstance(column, Share)
        nodes.setdefault((column.period, column.node), []).append(int(i))
    for members in nodes.values():
        total = whole[members].sum()
        x[members] = whole[members] / total if total > 0 else 1 / len(members)


def convex_start(state: State, solve: Callable[[Local], Step]) -> tuple[Point, Vector]:
    """
    Solve the convex relative of the problem.

    Parameters
    ----------
    state : State
    solve : callable
        Solves one local problem; it may raise what an engine raises.

    Returns
    -------
    point : Point
        Meets balances and bounds.
    size : ndarray
        Typical size of each unknown at it, shape (n,), all positive.
    """
    x, size = first_guess(state)
    least = np.where(state.fit.ratio, abs(state.fit.over) @ size, 1.0)
    reference = np.maximum(np.abs(state.fit.denominators(x)), least)
    beta = np.zeros(state.draws)
    floor = SMALLEST * size
    guess = x
    for _ in range(PASSES if state.fit.ratio.any() else 1):
        around = _convex_local(state, Point(x=x, beta=beta), guess, size, reference)
        move = solve(around).move
        x = x + size * move[: len(x)]
        beta = beta + move[len(x) :]
        below = state.fit.denominators(x)
        reference = np.maximum(np.abs(below), LOWEST * least)
    x = _away_from_zero(state, x, size)
    _fill_compositions(state, x)
    if len(state.alike):
        amount, share, common = state.alike.T
        x[amount] = x[share] * x[common]
    return Point(x=x, beta=beta), np.maximum(np.abs(x), floor)


def _away_from_zero(state: State, x: Vector, size: Vector) -> Vector:
    """Lift the masses under assays off zero, so that each ratio has a value to start from."""
    masses = np.unique(state.fit.over.indices)
    lifted = x.copy()
    lifted[masses] = np.maximum(x[masses], AWAY * size[masses])
    for column, value in state.pinned.items():
        lifted[column] = value
    return lifted


def _convex_local(
    state: State, point: Point, guess: Vector, size: Vector, reference: Vector
) -> Local:
    fit, x, beta = state.fit, point.x, point.beta
    n, g = len(x), state.draws
    exact = local(state, point, size, alike=False)
    shares = np.maximum(np.asarray(fit.gather.sum(axis=1)).ravel(), 1e-12)
    target = np.where(fit.ratio, (fit.gather.T @ (fit.value / shares)), 0.0)
    of = sparse.diags_array(1 / reference) @ (fit.of - sparse.diags_array(target) @ fit.over)
    slope = sparse.csr_array(fit.gather @ of)
    is_ratio = np.asarray((fit.gather @ fit.ratio.astype(np.float64)) > 0)
    aim = np.where(is_ratio, 0.0, fit.value)
    drift = sparse.diags_array(fit.value) @ fit.relative + fit.absolute
    weight = sparse.diags_array(1 / fit.u)
    pull = sparse.hstack([PULL * sparse.eye_array(n), sparse.csr_array((n, g))])
    prior = sparse.hstack([sparse.csr_array((g, n)), sparse.eye_array(g)])
    rows = sparse.hstack([weight @ slope @ sparse.diags_array(size), weight @ drift])
    return Local(
        data=sparse.csr_array(sparse.vstack([rows, pull, prior])),
        misfit=np.concatenate(
            [(aim - slope @ x - drift @ beta) / fit.u, PULL * (guess - x) / size, -beta]
        ),
        equal=exact.equal,
        gap=exact.gap,
        bound=exact.bound,
        room=exact.room,
        equal_names=exact.equal_names,
        bound_names=exact.bound_names,
        scale=exact.scale,
        held_rows=exact.held_rows,
        held_pull=exact.held_pull,
        standing=exact.standing,
    )
