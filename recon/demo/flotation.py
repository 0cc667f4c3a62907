"""What truly flows in the concentrator: ore pile, flotation, thickener and filters."""

from __future__ import annotations

import numpy as np

from recon.demo.clock import Floats, Grid, instant
from recon.demo.plant import Plant
from recon.demo.shapes import (
    CU,
    MASS,
    composed,
    hourly,
    lagged,
    stops,
    wander,
    well_mixed,
)

ORE_A_DAY = 24_000.0
PILE = np.array([62_000.0, 570.4, 2_356.0, 1_426.0, 38_440.0])
THICKENER = np.array([420.0, 110.0, 121.8, 138.6, 27.3])


def run_concentrator(plant: Plant) -> None:
    """Fill in the concentrator's streams and stocks."""
    grid, seed = plant.grid, plant.seed
    mill = stops(
        seed, "mill", grid, a_month=4.0, hours=(0.5, 5.0), planned=_every(grid, 12.3, 14.0, 10.0)
    )
    plant.running["XS-210"] = mill
    wanted = grid.per_step(ORE_A_DAY) * wander(seed, "mill rate", grid, sd=0.02, hours=12) * mill
    ore = _mined_ore(plant, wanted)
    plant.move("mined ore", ore)
    drawn = well_mixed(ore, start=PILE, blocks=hourly(grid), controlled=wanted)
    feed = drawn.composition * wanted[:, None]
    plant.move("mill feed", feed)
    _float(plant, feed)
    _filter(plant)
    plant.hold("ore pile", PILE)
    plant.hold("thickener", THICKENER)


def _mined_ore(plant: Plant, milled: Floats) -> Floats:
    """Crush by day and evening, none before dawn, as much as the mill took of late."""
    grid, seed = plant.grid, plant.seed
    noon = grid.edges[:-1] + (grid.edges[1] - grid.edges[0]) // 2
    hour = np.array([grid.calendar.local(instant(int(at))).hour for at in noon])
    crusher = stops(seed, "crusher", grid, a_month=5.0, hours=(1.0, 8.0)) & (hour >= 6)
    mass = lagged(milled[:, None], grid=grid, hours=72.0)[:, 0] / crusher.mean() * crusher
    mass *= wander(seed, "crusher rate", grid, sd=0.06, hours=6)
    return composed(
        mass,
        0.0092 * wander(seed, "ore Cu", grid, sd=0.06, hours=60),
        0.038 * wander(seed, "ore Fe", grid, sd=0.03, hours=60),
        0.023 * wander(seed, "ore S", grid, sd=0.06, hours=60),
        0.62 * wander(seed, "ore SiO2", grid, sd=0.01, hours=60),
    )


def _float(plant: Plant, feed: Floats) -> None:
    grid, seed = plant.grid, plant.seed
    recovery = 0.885 * wander(seed, "recovery", grid, sd=0.006, hours=110)
    grade = 0.262 * wander(seed, "grade", grid, sd=0.012, hours=110)
    final = composed(
        recovery * feed[:, CU] / grade,
        grade,
        0.290 * wander(seed, "concentrate Fe", grid, sd=0.012, hours=110),
        0.330 * wander(seed, "concentrate S", grid, sd=0.010, hours=110),
        0.065 * wander(seed, "concentrate SiO2", grid, sd=0.03, hours=110),
    )
    discarded = composed(
        feed[:, MASS] * 0.052 * wander(seed, "scavenger tails", grid, sd=0.03, hours=10),
        0.0040 * wander(seed, "scavenger tails Cu", grid, sd=0.06, hours=15),
        0.095 * wander(seed, "scavenger tails Fe", grid, sd=0.03, hours=15),
        0.070 * wander(seed, "scavenger tails S", grid, sd=0.04, hours=15),
        0.54 * wander(seed, "scavenger tails SiO2", grid, sd=0.02, hours=15),
    )
    returned = composed(
        feed[:, MASS] * 0.0158 * wander(seed, "scavenger concentrate", grid, sd=0.04, hours=10),
        0.068 * wander(seed, "scavenger concentrate Cu", grid, sd=0.04, hours=15),
        0.21 * wander(seed, "scavenger concentrate Fe", grid, sd=0.02, hours=15),
        0.20 * wander(seed, "scavenger concentrate S", grid, sd=0.03, hours=15),
        0.29 * wander(seed, "scavenger concentrate SiO2", grid, sd=0.03, hours=15),
    )
    rougher = final + discarded
    if "cleaners" in plant.lost:
        plant.lost["cleaners"] *= plant.running["XS-210"][:, None]
        rougher = rougher + plant.lost["cleaners"]
    plant.move("final concentrate", final)
    plant.move("scavenger tails", discarded)
    plant.move("scavenger concentrate", returned)
    plant.move("rougher concentrate", rougher)
    plant.move("cleaner tails", discarded + returned)
    plant.move("rougher tails", feed - rougher)
    plant.move("plant tails", feed - rougher + discarded)


def _filter(plant: Plant) -> None:
    grid, seed = plant.grid, plant.seed
    entering = plant.flow["final concentrate"]
    filters = stops(seed, "filters", grid, a_month=24.0, hours=(1.0, 5.0))
    plant.running["XS-230"] = filters
    wanted = np.full(grid.steps, entering[:, MASS].mean() / filters.mean()) * filters
    wanted *= wander(seed, "filter rate", grid, sd=0.03, hours=6)
    drawn = well_mixed(entering, start=THICKENER, blocks=hourly(grid), controlled=wanted, gain=1.5)
    plant.move("filter cake", drawn.composition * (wanted * drawn.control)[:, None])


def _every(grid: Grid, first: float, days: float, hours: float) -> tuple[tuple[float, float], ...]:
    """Plan a stop every so many days."""
    last = grid.steps * grid.hours / 24.0
    return tuple((float(day), hours) for day in np.arange(first, last, days))
