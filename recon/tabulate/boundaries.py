"""Where a balance is struck: around the site, each section and each node."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from recon.declare.site import Site, SiteNode, SiteStream

SITE = "site"


@dataclass(frozen=True, kw_only=True)
class Boundary:
    """
    A set of nodes with a line drawn around it.

    Attributes
    ----------
    name : str
        Section or node; ``site`` for the whole.
    kind : str
    nodes : frozenset of str
    """

    name: str
    kind: Literal["site", "section", "node"]
    nodes: frozenset[str]

    def entering(self, site: Site, quantity: str) -> tuple[SiteStream, ...]:
        """Streams that cross the line inwards and carry a quantity."""
        return tuple(
            s
            for s in site.streams
            if s.target in self.nodes and s.source not in self.nodes and quantity in s.carries
        )

    def leaving(self, site: Site, quantity: str) -> tuple[SiteStream, ...]:
        """Streams that cross the line outwards and carry a quantity."""
        return tuple(
            s
            for s in site.streams
            if s.source in self.nodes and s.target not in self.nodes and quantity in s.carries
        )

    def stocks(self, site: Site, quantity: str) -> tuple[SiteNode, ...]:
        """Stock places within at which a balance of the quantity is declared."""
        return tuple(
            n for n in site.nodes if n.stock and n.name in self.nodes and quantity in n.conserves
        )

    def unbalanced(self, site: Site, quantity: str) -> tuple[str, ...]:
        """Nodes within through which a quantity passes without a balance declared there."""
        passed = {
            end for s in site.streams if quantity in s.carries for end in (s.source, s.target)
        }
        return tuple(
            n.name
            for n in site.nodes
            if n.name in self.nodes and quantity not in n.conserves and n.name in passed
        )


def boundaries_of(sites: Sequence[Site]) -> tuple[Boundary, ...]:
    """List the site, its sections and its nodes, each once, in the order declared."""
    sections: dict[str, set[str]] = {}
    nodes: dict[str, None] = {}
    for site in sites:
        for section in site.sections:
            sections.setdefault(section.name, set())
        for node in site.nodes:
            sections.setdefault(node.section, set()).add(node.name)
            nodes[node.name] = None
    return (
        Boundary(name=SITE, kind="site", nodes=frozenset(nodes)),
        *(
            Boundary(name=name, kind="section", nodes=frozenset(inside))
            for name, inside in sections.items()
            if inside
        ),
        *(Boundary(name=name, kind="node", nodes=frozenset((name,))) for name in nodes),
    )


def row_name(boundary: Boundary, quantity: str) -> str:
    """
    Name a row: the quantity for the site, else the boundary and the quantity.

    Examples
    --------
    >>> row_name(Boundary(name="smelter", kind="section", nodes=frozenset()), "Cu")
    'smelter Cu'
    """
    return quantity if boundary.kind == "site" else f"{boundary.name} {quantity}"


def table_name(boundary: Boundary) -> str:
    """Site and sections have a table each."""
    return "site-balance" if boundary.kind == "site" else "section-balance"


def distinct(sites: Iterable[Site]) -> tuple[Site, ...]:
    """List each version once, in the order it comes into force."""
    return tuple({id(site): site for site in sites}.values())
