"""How flows move in time: they wander, lag, stop, come in lumps and leave well-mixed stocks."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.signal import lfilter

from recon.demo.clock import Floats, Grid, Steps, chance

MASS, CU, FE, S, SIO2 = range(5)
"""Columns of every amount."""

QUANTITIES = ("mass", "Cu", "Fe", "S", "SiO2")
Flags = NDArray[np.bool_]


@dataclass(frozen=True, kw_only=True)
class Lumps:
    """
    Truckloads, ladles, casts: amounts that move at once.

    Attributes
    ----------
    step : ndarray
        Step in which each moves, rising, shape (n,).
    amount : ndarray
        What each holds [t], shape (n, 5).
    """

    step: Steps
    amount: Floats

    def flow(self, steps: int) -> Floats:
        """Sum lumps into steps [t a step], shape (steps, 5)."""
        total = np.zeros((steps, 5))
        np.add.at(total, self.step, self.amount)
        return total


def wander(seed: int, name: str, grid: Grid, *, sd: float, hours: float) -> Floats:
    """
    Make a factor about 1 that wanders, normal with memory of ``hours``, shape (T,).

    Parameters
    ----------
    seed, name
        Of the generator.
    grid : Grid
    sd : float
        Standard deviation [-].
    hours : float
        Time in which memory falls to 1/e [h].
    """
    noise = chance(seed, "wander", name).standard_normal(grid.steps)
    keep = float(np.exp(-grid.hours / hours))
    scale = float(np.sqrt(1.0 - keep * keep))
    path, _ = lfilter([scale], [1.0, -keep], noise, zi=[keep * noise[0]])
    return np.asarray(1.0 + sd * np.clip(path, -3.5, 3.5), dtype=np.float64)


def lagged(flow: Floats, *, grid: Grid, hours: float) -> Floats:
    """
    Smooth a flow by a first-order lag, so that what is held back is at most a stock.

    Parameters
    ----------
    flow : ndarray
        Amounts a step, shape (T, k) [t].
    hours : float
        Time constant [h]. The lag begins at the mean of the first ten days.
    """
    keep = float(np.exp(-grid.hours / hours))
    start = flow[: grid.lag(240.0)].mean(axis=0)
    smooth, _ = lfilter([1.0 - keep], [1.0, -keep], flow, axis=0, zi=(keep * start)[None, :])
    return np.asarray(smooth, dtype=np.float64)


def composed(mass: Floats, *fractions: Floats | float) -> Floats:
    """Give amounts from a mass [t] and the fractions of Cu, Fe, S and SiO2 [-], shape (T, 5)."""
    columns = [mass, *(mass * f for f in fractions)]
    columns += [np.zeros_like(mass)] * (5 - len(columns))
    return np.stack(columns, axis=1)


def in_lumps(flow: Floats, sizes: Floats) -> Lumps:
    """
    Gather a steady flow into lumps of given dry masses, each full before it moves.

    Parameters
    ----------
    flow : ndarray
        Shape (T, 5) [t a step].
    sizes : ndarray
        Masses of successive lumps [t], more of them than fit.
    """
    total = np.concatenate([np.zeros((1, 5)), np.cumsum(flow, axis=0)])
    full = np.cumsum(sizes)
    full = full[full < total[-1, MASS]]
    step = np.searchsorted(total[:, MASS], full, side="left")
    at = np.column_stack(
        [np.interp(full, total[:, MASS], total[:, q]) for q in range(total.shape[1])]
    )
    amount = np.diff(np.concatenate([np.zeros((1, 5)), at]), axis=0)
    return Lumps(step=np.minimum(step, len(flow) - 1).astype(np.int64), amount=amount)


def stops(
    seed: int,
    name: str,
    grid: Grid,
    *,
    a_month: float,
    hours: tuple[float, float],
    planned: tuple[tuple[float, float], ...] = (),
) -> Flags:
    """
    Say in which steps a plant part runs, shape (T,).

    Parameters
    ----------
    a_month : float
        Trips in 30 days.
    hours : (float, float)
        Shortest and longest trip [h].
    planned : tuple of (float, float)
        Stops known beforehand: day of the simulation and length [h].
    """
    rng = chance(seed, "stops", name)
    days = grid.steps * grid.hours / 24.0
    running = np.ones(grid.steps, dtype=np.bool_)
    trips = [
        (rng.uniform(0.0, days) * 24.0, rng.uniform(*hours))
        for _ in range(rng.poisson(a_month * days / 30.0))
    ]
    trips += [(day * 24.0, length) for day, length in planned]
    for start, length in trips:
        first = round(start / grid.hours)
        running[first : first + grid.lag(length)] = False
    return running


@dataclass(frozen=True, kw_only=True)
class Drawn:
    """
    What is drawn from a well-mixed stock.

    Attributes
    ----------
    composition : ndarray
        Fractions of what leaves in each step, shape (T, 5); the first column is 1.
    control : ndarray
        Factor by which the plant follows the stock's level, shape (T,).
    """

    composition: Floats
    control: Floats


def well_mixed(
    entering: Floats,
    *,
    start: Floats,
    blocks: Steps,
    controlled: Floats,
    fixed: Floats | None = None,
    gain: float = 0.0,
) -> Drawn:
    """
    Draw from a stock what it holds at the start of each block, faster when it is full.

    Parameters
    ----------
    entering : ndarray
        Shape (T, 5) [t a step].
    start : ndarray
        Stock at the beginning, also its target, shape (5,) [t].
    blocks : ndarray
        Steps at which composition and control are set anew, 0 first and T last.
    controlled, fixed : ndarray
        Dry mass wanted in each step, followed with ``gain`` or as it is, shape (T,) [t].
    gain : float
        Part of the level's relative deviation that the controlled flow takes up [-].
    """
    steps = len(entering)
    into = np.add.reduceat(entering, blocks[:-1], axis=0)
    followed = np.add.reduceat(controlled, blocks[:-1])
    taken = np.zeros(len(blocks) - 1) if fixed is None else np.add.reduceat(fixed, blocks[:-1])
    stock = start.copy()
    composition = np.empty((len(into), 5))
    control = np.empty(len(into))
    for k in range(len(into)):
        part = stock / stock[MASS]
        factor = min(max(1.0 + gain * (stock[MASS] / start[MASS] - 1.0), 0.0), 2.0)
        composition[k], control[k] = part, factor
        stock = stock + into[k] - part * (followed[k] * factor + taken[k])
    length = np.diff(blocks)
    assert length.sum() == steps
    return Drawn(
        composition=np.repeat(composition, length, axis=0), control=np.repeat(control, length)
    )


def hourly(grid: Grid) -> Steps:
    """Give the blocks of an hour each."""
    step = grid.lag(1.0)
    return np.append(np.arange(0, grid.steps, step, dtype=np.int64), grid.steps)
