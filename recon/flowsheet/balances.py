"""Which linear balances follow from a sequence of flowsheets, by name and not by index."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Literal, NamedTuple

from recon.flowsheet.network import MASS, Flowsheet


class Amount(NamedTuple):
    """Amount [t] of a quantity in a stream over a period (1-based)."""

    period: int
    stream: str
    quantity: str


class Stock(NamedTuple):
    """Stock [t] of a quantity at a node at a boundary: 0 opens period 1, p closes period p."""

    boundary: int
    node: str
    quantity: str
    kind: Literal["stock"] = "stock"
    """Keeps it apart from an amount of a stream with the node's name: tuples are equal by value."""


Unknown = Amount | Stock
Linear = tuple[tuple[Unknown, float], ...]
"""A linear form in the unknowns: pairs of unknown and coefficient."""


@dataclass(frozen=True, kw_only=True)
class Row:
    """
    One linear row, ``sum(coefficient * unknown) = equals`` or ``>= equals``.

    Parameters
    ----------
    name : str
        Readable name, ``"2: ROUGHER Cu"``; messages use it, never an index.
    form : Linear
    equals : float
        Right side [t].
    """

    name: str
    form: Linear
    equals: float = 0.0


def unknowns(flowsheets: Sequence[Flowsheet]) -> Iterator[Unknown]:
    """
    List every unknown of a sequence of periods, stocks first, in the files' order.

    A stock boundary between two periods is one unknown. A node that holds a stock in either of
    the two periods it separates has one there.
    """
    last = len(flowsheets)
    for boundary in range(last + 1):
        seen: set[str] = set()
        for period in (boundary, boundary + 1):
            if not 1 <= period <= last:
                continue
            sheet = flowsheets[period - 1]
            for node in sheet.nodes:
                if node.stock and node.name not in seen:
                    seen.add(node.name)
                    for quantity in sheet.quantities:
                        yield Stock(boundary, node.name, quantity)
    for period, sheet in enumerate(flowsheets, start=1):
        for stream in sheet.streams:
            for quantity in stream.carries:
                yield Amount(period, stream.name, quantity)


def balance_rows(flowsheets: Sequence[Flowsheet]) -> Iterator[Row]:
    """
    State ``in - out - (closing - opening) = 0`` for each quantity conserved at each node.

    A node without any carrier of a quantity and without a stock states nothing for it.
    """
    for period, sheet in enumerate(flowsheets, start=1):
        for node in sheet.nodes:
            for quantity in node.conserves:
                form: list[tuple[Unknown, float]] = [
                    (Amount(period, s.name, quantity), sign)
                    for streams, sign in (
                        (sheet.entering(node.name), 1.0),
                        (sheet.leaving(node.name), -1.0),
                    )
                    for s in streams
                    if quantity in s.carries
                ]
                if node.stock:
                    form.append((Stock(period, node.name, quantity), -1.0))
                    form.append((Stock(period - 1, node.name, quantity), 1.0))
                if form:
                    yield Row(name=f"{period}: {node.name} {quantity}", form=tuple(form))


def bound_rows(flowsheets: Sequence[Flowsheet]) -> Iterator[Row]:
    """
    State every inequality ``form >= equals``: amounts and stocks, and components within dry mass.

    Amounts are not negative; stocks keep the bounds declared at their node, 0 and no upper limit
    where none is declared; the components of a stream or stock that carries dry mass do not
    exceed it together.
    """
    seen: set[Stock] = set()
    for unknown in unknowns(flowsheets):
        if isinstance(unknown, Amount):
            yield Row(name=f"{name_of(unknown)} >= 0", form=((unknown, 1.0),))
    for period, sheet in enumerate(flowsheets, start=1):
        for stream in sheet.streams:
            parts = [q for q in stream.carries if q != MASS]
            if MASS in stream.carries and parts:
                yield Row(
                    name=f"{period}: {stream.name} components within mass",
                    form=(
                        (Amount(period, stream.name, MASS), 1.0),
                        *((Amount(period, stream.name, q), -1.0) for q in parts),
                    ),
                )
        for node in sheet.nodes:
            if node.stock:
                yield from _stock_bounds(period, sheet, node.name, seen)


def _stock_bounds(period: int, sheet: Flowsheet, name: str, seen: set[Stock]) -> Iterator[Row]:
    node = sheet.node_named[name]
    limits = {q: (low, high) for q, low, high in node.bounds}
    for boundary in (period - 1, period):
        if Stock(boundary, name, sheet.quantities[0]) in seen:
            continue
        for quantity in sheet.quantities:
            stock = Stock(boundary, name, quantity)
            seen.add(stock)
            low, high = limits.get(quantity, (0.0, float("inf")))
            yield Row(name=f"{name_of(stock)} >= {low:g}", form=((stock, 1.0),), equals=low)
            if high != float("inf"):
                yield Row(name=f"{name_of(stock)} <= {high:g}", form=((stock, -1.0),), equals=-high)
        if MASS in sheet.quantities and sheet.components:
            yield Row(
                name=f"{boundary_words(boundary)}: {name} components within mass",
                form=(
                    (Stock(boundary, name, MASS), 1.0),
                    *((Stock(boundary, name, q), -1.0) for q in sheet.components),
                ),
            )


def boundary_words(boundary: int) -> str:
    """Name a boundary for people: ``"1 opening"`` for 0, else ``"p closing"``."""
    return "1 opening" if boundary == 0 else f"{boundary} closing"


def name_of(unknown: Unknown) -> str:
    """
    Name an unknown for people.

    Examples
    --------
    >>> name_of(Amount(2, "FEED", "Cu")), name_of(Stock(0, "SHED", "mass"))
    ('2: stream FEED Cu', '1 opening: stock SHED mass')
    """
    if isinstance(unknown, Amount):
        return f"{unknown.period}: stream {unknown.stream} {unknown.quantity}"
    return f"{boundary_words(unknown.boundary)}: stock {unknown.node} {unknown.quantity}"
