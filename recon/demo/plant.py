"""The invented plant as it truly is: every flow, every stock, every load."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from recon.declare.site import Site
from recon.demo.clock import Floats, Grid
from recon.demo.shapes import QUANTITIES, Flags, Lumps


@dataclass(kw_only=True)
class Plant:
    """
    A plant being simulated; the parts of the works fill it in, in the order of the flow.

    Attributes
    ----------
    site : Site
    grid : Grid
    seed : int
    piece : dict
        True mean mass of a counted load [t] by tag: the declared factor and its shared error.
    flow : dict
        Amount of each stream in each step, shape (T, 5) [t].
    lumps : dict
        Loads of the streams that move in loads.
    stock : dict
        What each stock holds at the edges of steps, shape (T + 1, 5) [t].
    lost : dict
        What leaves a node by no stream, shape (T, 5) [t].
    running : dict
        By run signal, whether it is on, shape (T,).
    """

    site: Site
    grid: Grid
    seed: int
    piece: dict[str, float]
    flow: dict[str, Floats] = field(default_factory=dict)
    lumps: dict[str, Lumps] = field(default_factory=dict)
    stock: dict[str, Floats] = field(default_factory=dict)
    lost: dict[str, Floats] = field(default_factory=dict)
    running: dict[str, Flags] = field(default_factory=dict)

    def move(self, stream: str, flow: Floats) -> None:
        """State what a stream carries; quantities that it does not carry are not counted."""
        carries = next(s.carries for s in self.site.streams if s.name == stream)
        kept = np.array([q in carries for q in QUANTITIES])
        self.flow[stream] = np.where(kept, flow, 0.0)

    def move_lumps(self, stream: str, lumps: Lumps) -> None:
        """State what a stream carries in loads."""
        self.lumps[stream] = lumps
        self.move(stream, lumps.flow(self.grid.steps))

    def hold(self, node: str, start: Floats) -> None:
        """
        Work out a stock from what enters and leaves; every stream of the node is known.

        A quantity that is not conserved there has no stock to speak of: NaN, so nobody uses it.
        """
        net = np.zeros((self.grid.steps, 5))
        for stream in self.site.streams:
            if stream.target == node:
                net += self.flow[stream.name]
            elif stream.source == node:
                net -= self.flow[stream.name]
        if node in self.lost:
            net -= self.lost[node]
        conserves = next(n.conserves for n in self.site.nodes if n.name == node)
        stock = start + np.concatenate([np.zeros((1, 5)), np.cumsum(net, axis=0)])
        kept = np.array([q in conserves for q in QUANTITIES])
        self.stock[node] = np.where(kept, stock, np.nan)
