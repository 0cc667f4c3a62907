"""What truly flows from concentrate shed to ladle aisle: blend, flash furnace, dust, reverts."""

from __future__ import annotations

import numpy as np

from recon.demo.clock import Floats, Grid, chance
from recon.demo.plant import Plant
from recon.demo.shapes import (
    CU,
    FE,
    MASS,
    SIO2,
    Flags,
    Lumps,
    S,
    composed,
    hourly,
    in_lumps,
    stops,
    wander,
    well_mixed,
)

SHED = np.array([8_200.0, 2_214.0, 2_312.0, 2_640.0, 590.0])
BATH = np.array([290.0, 118.0, 68.0, 46.0, 34.0])
AISLE = np.array([64.0, 38.9, 9.3, 14.8, 0.0])
BINS = np.array([170.0, 44.0, 31.5, 20.3, 8.2])
REVERTS = np.array([1_750.0, 1_058.0, 254.0, 403.0, 0.0])
LOADS_A_DAY = {"LC-318": 22.0, "PC-338": 12.2}
"""Counted loads of a usual day."""
DUST_SHARE = 0.055
SKULL_SHARE = 0.015


def feed_furnace(plant: Plant) -> None:
    """Fill in purchases, furnace charge, dust and everything around the furnace and the aisle."""
    grid, seed = plant.grid, plant.seed
    planned = tuple((d, 9.0) for d in np.arange(22.1, grid.steps * grid.hours / 24, 28.0))
    on = stops(seed, "furnace", grid, a_month=5.0, hours=(0.5, 7.0), planned=planned)
    plant.running["XS-310"] = on
    plant.move_lumps("custom A", _trucks(plant, "custom A", a_day=7, lot_days=1))
    plant.move_lumps("custom B", _trucks(plant, "custom B", a_day=5, lot_days=3))
    entering = sum(
        plant.flow[s] for s in ("filter cake", "custom A", "custom B", "slag concentrate")
    )
    assert isinstance(entering, np.ndarray)
    wanted = np.full(grid.steps, entering[:, MASS].mean() / on.mean()) * on
    wanted *= wander(seed, "charge rate", grid, sd=0.02, hours=8)
    drawn = well_mixed(entering, start=SHED, blocks=hourly(grid), controlled=wanted, gain=0.8)
    charge = drawn.composition * (wanted * drawn.control)[:, None]
    plant.move("furnace charge", charge)
    _dust(plant, charge, on)
    _smelt(plant, on)
    plant.hold("shed", SHED)
    plant.hold("flash furnace", BATH)
    plant.hold("dust bins", BINS)


def carry_matte(plant: Plant) -> None:
    """Fill in ladles charged, skulls and the reverts."""
    grid, seed = plant.grid, plant.seed
    tapped = plant.lumps["tapped matte"]
    frozen = in_lumps(
        tapped.flow(grid.steps) * SKULL_SHARE,
        chance(seed, "skulls").normal(5.8, 0.4, size=4 * len(grid.days)),
    )
    plant.move_lumps("skulls", frozen)
    wait = chance(seed, "ladle waits").uniform(0.3, 1.4, size=len(tapped.step))
    step = tapped.step + np.maximum(1, np.round(wait / grid.hours)).astype(np.int64)
    order = np.argsort(step, kind="stable")
    there = step[order] < grid.steps
    plant.move_lumps(
        "charged matte",
        Lumps(step=step[order][there], amount=(tapped.amount * (1.0 - SKULL_SHARE))[order][there]),
    )
    _reverts(plant)
    plant.hold("ladle aisle", AISLE)


def _trucks(plant: Plant, supplier: str, *, a_day: int, lot_days: int) -> Lumps:
    """Deliver truckloads by day; supplier B stops for four days in fourteen."""
    grid, rng = plant.grid, chance(plant.seed, "trucks", supplier)
    grades = {"custom A": (0.305, 0.24, 0.31, 0.07), "custom B": (0.235, 0.28, 0.33, 0.09)}
    steps: list[int] = []
    amounts: list[Floats] = []
    grade = np.zeros(4)
    for d in range(len(grid.days)):
        if d % lot_days == 0:
            grade = np.array(grades[supplier]) * rng.normal(1.0, (0.03, 0.02, 0.015, 0.08))
        mass = rng.normal(23.8, 0.5, size=a_day)
        hours = np.sort(rng.uniform(1.5, 11.5, size=a_day))
        if supplier == "custom B" and d % 14 >= 10:
            continue
        steps.extend(int(grid.first[d] + h / grid.hours) for h in hours)
        amounts.extend(np.concatenate([[m], m * grade]) for m in mass)
    return Lumps(step=np.array(steps, dtype=np.int64), amount=np.array(amounts))


def _dust(plant: Plant, charge: Floats, on: Flags) -> None:
    """Make dust, and let recycled and sold dust leave the bins with one composition a day."""
    grid, seed = plant.grid, plant.seed
    made = composed(
        DUST_SHARE * charge[:, MASS] * wander(seed, "dust pull", grid, sd=0.05, hours=12),
        0.25 * wander(seed, "dust Cu", grid, sd=0.03, hours=24),
        0.19 * wander(seed, "dust Fe", grid, sd=0.03, hours=24),
        0.12 * wander(seed, "dust S", grid, sd=0.04, hours=24),
        0.05 * wander(seed, "dust SiO2", grid, sd=0.06, hours=24),
    )
    small = composed(
        grid.per_step(3.4) * wander(seed, "converter dust", grid, sd=0.1, hours=12),
        0.44 * wander(seed, "converter dust Cu", grid, sd=0.03, hours=24),
        0.04 * wander(seed, "converter dust Fe", grid, sd=0.06, hours=24),
        0.11 * wander(seed, "converter dust S", grid, sd=0.05, hours=24),
        0.03 * wander(seed, "converter dust SiO2", grid, sd=0.08, hours=24),
    )
    plant.move("furnace dust", made)
    plant.move("converter dust", small)
    sold_step, sold = _sold_dust(grid, seed)
    sold_mass = np.zeros(grid.steps)
    np.add.at(sold_mass, sold_step, sold)
    total = float((made + small)[:, MASS].sum() - sold.sum())
    wanted = np.full(grid.steps, total / on.sum()) * on
    drawn = well_mixed(
        made + small, start=BINS, blocks=grid.first, controlled=wanted, fixed=sold_mass, gain=0.6
    )
    plant.move("recycled dust", drawn.composition * (wanted * drawn.control)[:, None])
    plant.move_lumps(
        "sold dust",
        Lumps(step=sold_step, amount=drawn.composition[sold_step] * sold[:, None]),
    )


def _sold_dust(grid: Grid, seed: int) -> tuple[np.ndarray, Floats]:
    """Send a truck of dust away every fifth day, or so."""
    rng = chance(seed, "sold dust")
    days = [d for d in range(len(grid.days)) if d % 5 == 3]
    step = [int(grid.first[d] + rng.uniform(3.0, 9.0) / grid.hours) for d in days]
    return np.array(step, dtype=np.int64), rng.normal(22.5, 0.6, size=len(days))


def _smelt(plant: Plant, on: Flags) -> None:
    """Solve matte, slag and flux of each step from copper, iron and silica; sulfur left is gas."""
    grid, seed = plant.grid, plant.seed
    entering = plant.flow["furnace charge"] + plant.flow["recycled dust"]
    rest = entering - plant.flow["furnace dust"]
    matte_cu = 0.605 * wander(seed, "matte grade", grid, sd=0.010, hours=18)
    matte_fe = 0.62 - 0.775 * matte_cu + 0.001 * (wander(seed, "Fe", grid, sd=1, hours=18) - 1)
    matte_s = 0.28 - 0.125 * matte_cu**2 - 0.002
    slag_cu = 0.0135 * wander(seed, "furnace slag Cu", grid, sd=0.08, hours=18)
    slag_fe = 0.402 * wander(seed, "furnace slag Fe", grid, sd=0.010, hours=18)
    slag_s = 0.005 * wander(seed, "furnace slag S", grid, sd=0.10, hours=18)
    slag_si = 0.315 * wander(seed, "furnace slag SiO2", grid, sd=0.012, hours=18)
    flux_fe = 0.014 * wander(seed, "flux Fe", grid, sd=0.04, hours=60)
    flux_si = 0.925 * wander(seed, "flux SiO2", grid, sd=0.006, hours=60)
    zero = np.zeros(grid.steps)
    matrix = np.stack(
        [
            np.stack([matte_cu, slag_cu, zero], axis=1),
            np.stack([matte_fe, slag_fe, -flux_fe], axis=1),
            np.stack([zero, slag_si, -flux_si], axis=1),
        ],
        axis=1,
    )
    made = np.linalg.solve(matrix, rest[:, (CU, FE, SIO2)][:, :, None])[:, :, 0]
    matte = composed(made[:, 0], matte_cu, matte_fe, matte_s)
    slag = composed(made[:, 1], slag_cu, slag_fe, slag_s, slag_si)
    plant.move("furnace flux", composed(made[:, 2], 0.0, flux_fe, 0.0, flux_si))
    gas = np.zeros((grid.steps, 5))
    gas[:, S] = np.where(on, rest[:, S] - matte[:, S] - slag[:, S], 0.0)
    plant.move("furnace gas", gas)
    ladles = counted_loads(plant, "LC-318", "tapped matte", a_day=60)
    plant.move_lumps("tapped matte", in_lumps(matte, ladles))
    pots = chance(seed, "furnace slag pots").normal(21.0, 1.2, size=80 * len(grid.days))
    plant.move_lumps("furnace slag", in_lumps(slag, pots))


def counted_loads(plant: Plant, tag: str, name: str, *, a_day: int) -> Floats:
    """Give the true masses of counted loads: as much and as various as the count's u says."""
    declared = next(i for i in plant.site.instruments if i.tag == tag)
    assert declared.uncertainty is not None
    mean = plant.piece[tag]
    usual = LOADS_A_DAY[tag]
    spread = np.hypot(declared.uncertainty.zero, declared.uncertainty.relative * usual * mean)
    rng = chance(plant.seed, "loads", name)
    return rng.normal(mean, spread / np.sqrt(usual), size=a_day * len(plant.grid.days))


def _reverts(plant: Plant) -> None:
    """Crush reverts in campaigns, two loads a shift for nine days in fourteen."""
    grid, rng = plant.grid, chance(plant.seed, "crushed reverts")
    steps: list[int] = []
    for d in range(len(grid.days)):
        hours = np.sort(rng.uniform(2.0, 20.0, size=2))
        if d % 14 < 9:
            steps.extend(int(grid.first[d] + h / grid.hours) for h in hours)
    step = np.array(steps, dtype=np.int64)
    mass = rng.normal(6.4, 0.3, size=len(step))
    taken = np.zeros(grid.steps)
    np.add.at(taken, step, mass)
    drawn = well_mixed(
        plant.flow["skulls"],
        start=REVERTS,
        blocks=hourly(grid),
        controlled=np.zeros(grid.steps),
        fixed=taken,
    )
    plant.move_lumps(
        "crushed reverts", Lumps(step=step, amount=drawn.composition[step] * mass[:, None])
    )
    plant.hold("reverts", REVERTS)
