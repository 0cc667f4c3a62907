"""What is drawn on a site's flowsheet for one period: nodes, streams, and what each carries."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

MASS = "mass"
"""The quantity that is dry mass; every other quantity is a component of it."""


@dataclass(frozen=True, kw_only=True)
class Node:
    """
    A unit or stock place at which quantities are conserved.

    Parameters
    ----------
    name : str
        Name as the plant says it.
    conserves : tuple of str
        Quantities for which a balance is stated here. Dry mass is not conserved around furnaces,
        converters and acid plants: melts take up oxygen and give sulfur to gas.
    same_composition : bool
        The streams leaving are shares of one common composition.
    stock : bool
        Holds a stock of every quantity at each period boundary.
    bounds : tuple of (str, float, float)
        Lowest and highest stock of a quantity [t]; a quantity not named has 0 and no limit.
    """

    name: str
    conserves: tuple[str, ...]
    same_composition: bool = False
    stock: bool = False
    bounds: tuple[tuple[str, float, float], ...] = ()


@dataclass(frozen=True, kw_only=True)
class Stream:
    """
    A flow between two nodes; a missing end is the site boundary.

    Parameters
    ----------
    name : str
        Name as the plant says it.
    source, target : str or None
        Node it leaves and node it enters.
    carries : tuple of str
        Quantities it carries; each has one amount a period.
    """

    name: str
    source: str | None
    target: str | None
    carries: tuple[str, ...]


@dataclass(frozen=True, kw_only=True)
class Flowsheet:
    """
    The network of one period.

    Parameters
    ----------
    quantities : tuple of str
        All quantities balanced; ``"mass"`` is dry mass.
    nodes : tuple of Node
    streams : tuple of Stream
    """

    quantities: tuple[str, ...]
    nodes: tuple[Node, ...]
    streams: tuple[Stream, ...]

    @cached_property
    def stream_named(self) -> dict[str, Stream]:
        """Streams by name."""
        return {stream.name: stream for stream in self.streams}

    @cached_property
    def node_named(self) -> dict[str, Node]:
        """Nodes by name."""
        return {node.name: node for node in self.nodes}

    def entering(self, node: str) -> tuple[Stream, ...]:
        """Streams that enter a node."""
        return tuple(s for s in self.streams if s.target == node)

    def leaving(self, node: str) -> tuple[Stream, ...]:
        """Streams that leave a node."""
        return tuple(s for s in self.streams if s.source == node)

    @property
    def components(self) -> tuple[str, ...]:
        """Quantities other than dry mass."""
        return tuple(q for q in self.quantities if q != MASS)
