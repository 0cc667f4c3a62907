"""What truly flows around converters and anode furnaces, in the refinery and in the gas."""

from __future__ import annotations

import numpy as np

from recon.demo.clock import Floats, chance
from recon.demo.plant import Plant
from recon.demo.shapes import (
    CU,
    FE,
    SIO2,
    S,
    composed,
    in_lumps,
    lagged,
    wander,
)
from recon.demo.smelting import counted_loads

CONVERTERS = np.array([330.0, 226.0, 36.0, 42.0, 5.0])
ANODE_FURNACES = np.array([290.0, 287.0, 0.0, 0.0, 0.0])
CELLS = np.array([5_300.0, 5_260.0, 0.0, 0.0, 0.0])
ELECTROLYTE = np.array([0.0, 207.0, 0.0, 0.0, 0.0])
ELECTROLYTE_M3 = 4_500.0
HELD_BACK = 9.0
"""Time a charge stays in the converters [h]."""


def convert(plant: Plant) -> None:
    """Fill in scrap, anode slag, blister, converter slag, flux and gas."""
    grid, seed = plant.grid, plant.seed
    scrap = composed(
        grid.per_step(47.0) * wander(seed, "scrap", grid, sd=0.05, hours=30),
        0.9935 * wander(seed, "scrap Cu", grid, sd=0.0004, hours=60),
    )
    sizes = chance(seed, "scrap loads").normal(11.8, 0.4, size=10 * len(grid.days))
    plant.move_lumps("anode scrap", in_lumps(scrap, sizes))
    slag = composed(
        grid.per_step(2.7) * wander(seed, "anode slag", grid, sd=0.06, hours=30),
        0.41 * wander(seed, "anode slag Cu", grid, sd=0.05, hours=30),
    )
    sizes = chance(seed, "anode slag loads").normal(2.6, 0.15, size=3 * len(grid.days))
    plant.move_lumps("anode slag", in_lumps(slag, sizes))
    entering = sum(
        plant.flow[s] for s in ("charged matte", "anode scrap", "crushed reverts", "anode slag")
    )
    assert isinstance(entering, np.ndarray)
    _blow(plant, lagged(entering, grid=grid, hours=HELD_BACK))
    plant.hold("converters", CONVERTERS)


def _blow(plant: Plant, charge: Floats) -> None:
    """Solve blister, slag and flux of each step; the sulfur left over is gas."""
    grid, seed = plant.grid, plant.seed
    rest = charge - plant.flow["converter dust"]
    slag_cu = 0.055 * wander(seed, "converter slag Cu", grid, sd=0.06, hours=18)
    slag_fe = 0.47 * wander(seed, "converter slag Fe", grid, sd=0.012, hours=18)
    slag_s = 0.010 * wander(seed, "converter slag S", grid, sd=0.10, hours=18)
    slag_si = 0.235 * wander(seed, "converter slag SiO2", grid, sd=0.02, hours=18)
    flux_fe = 0.014 * wander(seed, "converter flux Fe", grid, sd=0.04, hours=60)
    flux_si = 0.92 * wander(seed, "converter flux SiO2", grid, sd=0.006, hours=60)
    slag_mass = (rest[:, FE] - flux_fe / flux_si * rest[:, SIO2]) / (
        slag_fe - flux_fe / flux_si * slag_si
    )
    flux_mass = (slag_mass * slag_si - rest[:, SIO2]) / flux_si
    blister_cu = 0.988 * wander(seed, "blister Cu", grid, sd=0.0012, hours=18)
    blister_s = 0.0006 * wander(seed, "blister S", grid, sd=0.15, hours=18)
    blister_mass = (rest[:, CU] - slag_mass * slag_cu) / blister_cu
    slag = composed(slag_mass, slag_cu, slag_fe, slag_s, slag_si)
    blister = composed(blister_mass, blister_cu, 0.0, blister_s)
    plant.move("converter flux", composed(flux_mass, 0.0, flux_fe, 0.0, flux_si))
    gas = rest[:, S] - slag[:, S] - blister[:, S]
    hood = gas * 0.012 * wander(seed, "hood", grid, sd=0.12, hours=10)
    plant.move("hood gas", _sulfur(hood))
    plant.move("converter gas", _sulfur(gas - hood))
    sizes = chance(seed, "blister ladles").normal(23.4, 0.9, size=40 * len(grid.days))
    plant.move_lumps("blister", in_lumps(blister, sizes))
    plant.move_lumps(
        "converter slag", in_lumps(slag, counted_loads(plant, "PC-338", "converter slag", a_day=40))
    )


def refine(plant: Plant) -> None:
    """Fill in anodes, cathode, slimes, electrolyte and bleed."""
    grid, seed = plant.grid, plant.seed
    blister = lagged(plant.flow["blister"], grid=grid, hours=15.0)
    slag_cu = float(plant.flow["anode slag"][:, CU].mean())
    anode_cu = 0.9935 * wander(seed, "anode Cu", grid, sd=0.0003, hours=24)
    cast = composed((blister[:, CU] - slag_cu) / anode_cu, anode_cu)
    sizes = chance(seed, "casts").normal(26.5, 0.8, size=40 * len(grid.days))
    plant.move_lumps("anodes", in_lumps(cast, sizes))
    plant.move("anode gas", _sulfur(0.96 * blister[:, S]))
    plant.hold("anode furnaces", ANODE_FURNACES)

    slimes = composed(
        grid.per_step(1.75) * wander(seed, "slimes", grid, sd=0.08, hours=48),
        0.21 * wander(seed, "slimes Cu", grid, sd=0.05, hours=48),
    )
    sizes = chance(seed, "drums").normal(0.62, 0.02, size=8 * len(grid.days))
    plant.move_lumps("slimes", in_lumps(slimes, sizes))
    dissolved = grid.per_step(3.0) * wander(seed, "net dissolution", grid, sd=0.06, hours=30)
    plant.move("net dissolution", _copper(dissolved))
    bled = lagged(plant.flow["net dissolution"], grid=grid, hours=100.0)[:, CU]
    plant.move("bleed", _copper(bled * wander(seed, "bleed", grid, sd=0.03, hours=12)))
    plant.hold("electrolyte", ELECTROLYTE)

    plated = lagged(plant.flow["anodes"], grid=grid, hours=216.0)[:, CU]
    others = sum(float(plant.flow[s][:, CU].mean()) for s in ("anode scrap", "slimes"))
    purity = np.full(grid.steps, 0.99996)
    product = plated - others - dissolved
    product *= wander(seed, "stripping", grid, sd=0.02, hours=20)
    sizes = chance(seed, "bundles").normal(23.6, 0.3, size=40 * len(grid.days))
    plant.move_lumps("cathode", in_lumps(composed(product / purity, purity), sizes))
    plant.hold("cells", CELLS)


def clean_gas(plant: Plant) -> None:
    """Fill in gas cleaning, acid plant and stack."""
    grid, seed = plant.grid, plant.seed
    gas = plant.flow["furnace gas"][:, S] + plant.flow["converter gas"][:, S]
    weak = gas * 0.007 * wander(seed, "weak acid", grid, sd=0.05, hours=20)
    clean = gas - weak
    slip = clean * 0.0028 * wander(seed, "slip", grid, sd=0.12, hours=8)
    plant.move("weak acid", _sulfur(weak))
    plant.move("cleaned gas", _sulfur(clean))
    plant.move("tail gas", _sulfur(slip))
    plant.move("acid", _sulfur(clean - slip))
    stack = slip + plant.flow["hood gas"][:, S] + plant.flow["anode gas"][:, S]
    plant.move("stack gas", _sulfur(stack))


def _sulfur(amount: Floats) -> Floats:
    flow = np.zeros((len(amount), 5))
    flow[:, S] = amount
    return flow


def _copper(amount: Floats) -> Floats:
    flow = np.zeros((len(amount), 5))
    flow[:, CU] = amount
    return flow
