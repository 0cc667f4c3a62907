"""What is true of the invented site: run the plant through its days and look amounts up."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from recon.declare.site import Site
from recon.demo.clock import Floats, Grid
from recon.demo.converting import clean_gas, convert, refine
from recon.demo.flotation import run_concentrator
from recon.demo.plant import Plant
from recon.demo.shapes import QUANTITIES, Flags, Lumps
from recon.demo.slag import first_guess, mill_slag
from recon.demo.smelting import carry_matte, feed_furnace

PASSES = 3


@dataclass(frozen=True, kw_only=True)
class Truth:
    """
    Everything that truly moved and stood; quantities in the order of ``shapes.QUANTITIES``.

    Attributes
    ----------
    site : Site
    grid : Grid
    flow : dict
        Amount of each stream in each step, shape (T, 5) [t].
    lumps : dict
        Loads of streams that move in loads.
    stock : dict
        At the edges of steps, shape (T + 1, 5) [t].
    lost : dict
        What left a node by no stream, shape (T, 5) [t].
    running : dict
        By run signal, shape (T,).
    """

    site: Site
    grid: Grid
    flow: dict[str, Floats]
    lumps: dict[str, Lumps]
    stock: dict[str, Floats]
    lost: dict[str, Floats]
    running: dict[str, Flags]

    def amounts(self, stream: str) -> Floats:
        """Give what a stream carried each day, shape (D, 5) [t]."""
        return np.add.reduceat(self.flow[stream], self.grid.first[:-1], axis=0)

    def at_cuts(self, node: str) -> Floats:
        """Give what a node held at the day cuts, shape (D + 1, 5) [t]."""
        return self.stock[node][self.grid.first]

    def lost_by_day(self, node: str) -> Floats:
        """Give what left a node by no stream each day, shape (D, 5) [t]."""
        return np.add.reduceat(self.lost[node], self.grid.first[:-1], axis=0)

    def imbalances(self) -> dict[tuple[str, str], Floats]:
        """
        Give in - out - stock change - lost of each day for all that is conserved.

        Returns
        -------
        dict
            (node, quantity) to an array of shape (D,) [t].
        """
        result: dict[tuple[str, str], Floats] = {}
        for node in self.site.nodes:
            net = np.zeros((len(self.grid.days), 5))
            for stream in self.site.streams:
                if stream.target == node.name:
                    net += self.amounts(stream.name)
                elif stream.source == node.name:
                    net -= self.amounts(stream.name)
            if node.stock:
                net -= np.diff(self.at_cuts(node.name), axis=0)
            if node.name in self.lost:
                net -= self.lost_by_day(node.name)
            for q in node.conserves:
                result[node.name, q] = net[:, QUANTITIES.index(q)]
        return result


def run_plant(
    site: Site,
    *,
    grid: Grid,
    seed: int,
    piece: dict[str, float],
    lost: dict[str, Floats] | None = None,
) -> Truth:
    """
    Run the plant through its days.

    The slag mill returns copper to the shed that its own slag comes from; the loop is gone round
    until what is returned is what the slag would give, within a percent. Every balance closes
    whatever the pass, because each stream is one array for both its ends.

    Parameters
    ----------
    site : Site
        The demo site; its streams are known here by name.
    grid : Grid
    seed : int
    piece : dict
        True mean mass of counted loads [t], by tag.
    lost : dict, optional
        What leaves nodes by no stream, shape (T, 5) [t].
    """
    plant = Plant(site=site, grid=grid, seed=seed, piece=piece, lost=lost or {})
    run_concentrator(plant)
    returned = first_guess(plant)
    for _ in range(PASSES):
        plant.move("slag concentrate", returned)
        feed_furnace(plant)
        carry_matte(plant)
        convert(plant)
        returned_next = mill_slag(plant, returned)
        returned, last = returned_next, returned
    assert np.array_equal(plant.flow["slag concentrate"], last)
    refine(plant)
    clean_gas(plant)
    return Truth(
        site=site,
        grid=grid,
        flow=plant.flow,
        lumps=plant.lumps,
        stock=plant.stock,
        lost=plant.lost,
        running=plant.running,
    )
