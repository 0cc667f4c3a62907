"""What truly flows in the slag yard and mill, which returns copper to the shed."""

from __future__ import annotations

import numpy as np

from recon.demo.clock import Floats
from recon.demo.plant import Plant
from recon.demo.shapes import (
    CU,
    MASS,
    composed,
    hourly,
    stops,
    wander,
    well_mixed,
)

YARD = np.array([9_500.0, 197.0, 3_930.0, 56.0, 2_860.0])
RECOVERY = 0.84


def first_guess(plant: Plant) -> Floats:
    """Give slag concentrate before slag is known: 48 t/d of it while the mill runs."""
    running = _running(plant)
    mass = np.full(plant.grid.steps, plant.grid.per_step(48.0) / running.mean()) * running
    return _concentrate(plant, mass)


def mill_slag(plant: Plant, returned: Floats) -> Floats:
    """
    Fill in slag tails for the slag concentrate that was returned.

    Returns
    -------
    ndarray
        Slag concentrate that this slag would give, for the next pass round the loop.
    """
    grid, seed = plant.grid, plant.seed
    running = _running(plant)
    entering = plant.flow["furnace slag"] + plant.flow["converter slag"]
    wanted = np.full(grid.steps, entering[:, MASS].mean() / running.mean()) * running
    wanted *= wander(seed, "slag mill rate", grid, sd=0.02, hours=10)
    drawn = well_mixed(entering, start=YARD, blocks=hourly(grid), controlled=wanted, gain=0.5)
    feed = drawn.composition * (wanted * drawn.control)[:, None]
    plant.running["XS-380"] = running
    plant.move("slag tails", feed - returned)
    plant.hold("slag mill", YARD)
    recovered = feed[:, CU] * RECOVERY
    return _concentrate(plant, recovered / _grade(plant))


def _running(plant: Plant) -> np.ndarray:
    """Stop for whole plant days each ten, and for trips."""
    grid = plant.grid
    running = stops(plant.seed, "slag mill", grid, a_month=4.0, hours=(1.0, 6.0))
    for d in range(6, len(grid.days), 10):
        running[slice(*grid.span(d, d))] = False
    return running


def _grade(plant: Plant) -> Floats:
    return 0.27 * wander(plant.seed, "slag concentrate Cu", plant.grid, sd=0.02, hours=20)


def _concentrate(plant: Plant, mass: Floats) -> Floats:
    grid, seed = plant.grid, plant.seed
    return composed(
        mass,
        _grade(plant),
        0.26 * wander(seed, "slag concentrate Fe", grid, sd=0.02, hours=20),
        0.050 * wander(seed, "slag concentrate S", grid, sd=0.04, hours=20),
        0.17 * wander(seed, "slag concentrate SiO2", grid, sd=0.03, hours=20),
    )
