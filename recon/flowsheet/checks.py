"""What is wrong with a flowsheet as drawn, before any measurement is looked at."""

from __future__ import annotations

from collections.abc import Iterator

from recon.findings import Finding, Severity
from recon.flowsheet.network import Flowsheet


def find_forced_zeros(flowsheet: Flowsheet) -> list[Finding]:
    """
    Find balances that would silently force amounts to zero.

    At a node without stock, a conserved quantity whose carriers all enter, or all leave, can only
    balance at zero.

    Examples
    --------
    >>> from recon.flowsheet.network import Node, Stream
    >>> sheet = Flowsheet(
    ...     quantities=("S",),
    ...     nodes=(Node(name="ROASTER", conserves=("S",)),),
    ...     streams=(Stream(name="FEED", source=None, target="ROASTER", carries=("S",)),),
    ... )
    >>> find_forced_zeros(sheet)[0].subject
    'ROASTER'
    """
    return [
        Finding(
            code="forced-zero",
            subject=node,
            severity=Severity.SERIOUS,
            text=(
                f"Node {node}, {quantity}: every stream that carries it {way} "
                f"({', '.join(streams)}) and the node holds no stock, so all would be zero. "
                f"Declare the missing stream, give the node a stock, or leave {quantity} out of "
                "what it conserves."
            ),
        )
        for node, quantity, way, streams in _one_sided(flowsheet)
    ]


def find_loose_nodes(flowsheet: Flowsheet) -> list[Finding]:
    """Find nodes that no stream touches."""
    touched = {end for s in flowsheet.streams for end in (s.source, s.target)}
    return [
        Finding(
            code="loose-node",
            subject=node.name,
            severity=Severity.SERIOUS,
            text=f"Node {node.name}: no stream enters or leaves it. Connect it or remove it.",
        )
        for node in flowsheet.nodes
        if node.name not in touched
    ]


def _one_sided(flowsheet: Flowsheet) -> Iterator[tuple[str, str, str, list[str]]]:
    for node in flowsheet.nodes:
        if node.stock:
            continue
        for quantity in node.conserves:
            entering = [s.name for s in flowsheet.entering(node.name) if quantity in s.carries]
            leaving = [s.name for s in flowsheet.leaving(node.name) if quantity in s.carries]
            if entering and not leaving:
                yield node.name, quantity, "enters", entering
            elif leaving and not entering:
                yield node.name, quantity, "leaves", leaving
