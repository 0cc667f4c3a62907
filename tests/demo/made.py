"""Simulations that several tests look at, each made once a process."""

from __future__ import annotations

from functools import cache
from pathlib import Path

from recon.declare.site import Instrument, Site
from recon.declare.site_file import read_site
from recon.demo.simulate import Simulation, simulate

DEMO = Path(__file__).resolve().parents[2] / "config" / "demo" / "site.toml"


@cache
def demo_site() -> Site:
    return read_site(DEMO).site


@cache
def hourly(*, faults: str = "off", seed: int = 1, months: int = 2) -> Simulation:
    return simulate(demo_site(), months=months, interval=60, seed=seed, faults=faults)


@cache
def _by_tag() -> dict[str, Instrument]:
    return {i.tag: i for i in demo_site().instruments}


def instrument(tag: str) -> Instrument:
    return _by_tag()[tag]
