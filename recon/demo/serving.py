"""What moistures, densities and strengths truly are, and what a chain makes of a raw value."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from recon.declare.site import Instrument, Site, Step
from recon.demo.clock import Floats, Grid, chance
from recon.demo.shapes import wander
from recon.units import unit

USUAL: dict[str, tuple[float, float, float]] = {
    # tag: value [its unit], standard deviation relative to it, memory [h]
    "DT-221": (1.262, 0.0020, 40.0),
    "DT-222": (1.254, 0.0020, 40.0),
    "DT-223": (1.205, 0.0015, 40.0),
    "DT-224": (1.152, 0.0012, 40.0),
    "DT-225": (1.131, 0.0012, 40.0),
    "DT-226": (1.243, 0.0020, 40.0),
    "DT-228": (1.247, 0.0020, 40.0),
    "DT-388": (1.560, 0.0040, 40.0),
    "AT-350": (38.0, 0.03, 30.0),
    "AT-351": (9.2, 0.04, 30.0),
    "AT-520": (11.6, 0.03, 30.0),
    "AT-530": (98.42, 0.0008, 30.0),
    "AT-540": (640.0, 0.05, 30.0),
    "AT-570": (470.0, 0.05, 30.0),
    "ore belt moisture": (3.1, 0.06, 100.0),
    "mill feed moisture": (2.9, 0.05, 100.0),
    "cake moisture": (9.2, 0.03, 60.0),
    "flux moisture": (2.6, 0.06, 100.0),
    "slag concentrate moisture": (9.0, 0.04, 60.0),
    "custom A moisture": (8.1, 0.05, 60.0),
    "custom B moisture": (8.8, 0.05, 60.0),
    "slimes moisture": (24.0, 0.03, 60.0),
    "weak acid S": (19.5, 0.05, 60.0),
    "bleed Cu": (46.0, 0.01, 100.0),
    "ore pile density": (1.72, 0.0, 1.0),
    "ore pile moisture": (3.0, 0.05, 100.0),
    "shed density": (2.05, 0.0, 1.0),
    "shed moisture": (8.6, 0.03, 100.0),
    "slag yard density": (2.10, 0.0, 1.0),
    "reverts density": (2.60, 0.0, 1.0),
    "electrolyte strength": (46.0, 0.008, 200.0),
}
"""Invented operating values of what serves others, inside the ranges of common practice."""

LOT_DAYS = {"custom A": 1, "custom B": 3}
"""Days that one lot of a supplier covers."""


def true_values(site: Site, grid: Grid, seed: int) -> dict[str, Floats]:
    """
    Give what each serving tag truly is in each step [canonical unit], shape (T,).

    Samples and lots have one value for a whole plant day or lot, so that a day's tonnage dries by
    the very value that is sampled.
    """
    values: dict[str, Floats] = {}
    for instrument in served(site):
        usual, sd, hours = USUAL[instrument.tag]
        path = usual * wander(seed, f"serving {instrument.tag}", grid, sd=sd, hours=hours)
        if instrument.kind == "assay":
            days = LOT_DAYS.get(instrument.point or "", 1)
            starts = [grid.first[d - d % days] for d in range(len(grid.days))]
            path = np.repeat(path[starts], np.diff(grid.first))
        values[instrument.tag] = path * unit(instrument.unit).factor
    return values


def served(site: Site) -> tuple[Instrument, ...]:
    """List the instruments that serve others' chains."""
    tags = {s.tag for i in site.instruments for s in i.chain if s.tag is not None}
    return tuple(i for i in site.instruments if i.tag in tags)


def multiplier(instrument: Instrument, values: Mapping[str, Floats]) -> Floats | float:
    """Give the canonical amount that one raw unit stands for, at given serving values."""
    total: Floats | float = unit(instrument.unit).factor
    for step in instrument.chain:
        second = values[step.tag] if step.tag is not None else step.value
        assert second is not None
        total = total * step_factor(step, second)
    return total


def step_factor(step: Step, second: Floats | float) -> Floats | float:
    """Give the factor of one step at its second value [canonical]."""
    if step.by == "moisture":
        return 1.0 - second
    if step.by == "slurry":
        assert step.value is not None
        return (second - 1.0) * step.value / (step.value - 1.0)
    return second


def slope(step: Step, second: float) -> float:
    """Give the relative change of an amount per unit of the second value [1 / canonical]."""
    if step.by == "moisture":
        return 1.0 / (1.0 - second)
    if step.by == "slurry":
        return 1.0 / (second - 1.0)
    return 1.0 / second


def flicker(seed: int, tag: str, size: int, sd: float) -> Floats:
    """Make the fast noise of a transmitter [-], shape (size,)."""
    return sd * chance(seed, "flicker", tag).standard_normal(size)
