"""The measurements of a balance file: what each is of, in which periods, with which errors."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Protocol

from recon.declare.balance_shape import MeasuredTable, SummandTable
from recon.declare.faults import did_you_mean
from recon.errors import ReconError
from recon.flowsheet.balances import Amount, Linear, Stock
from recon.flowsheet.network import MASS, Flowsheet
from recon.reconcile.problem import Draw, Effect, Measurement, MeasurementKind, Part
from recon.units import Kind, factor

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence


class Draws(Protocol):
    """A shared source that knows which of its draws is in force in a period."""

    relative: bool

    def draw_in(self, name: str, period: int) -> Draw:
        """Give the draw in force in a period."""
        ...


def measured_of(
    tables: Sequence[tuple[str, MeasuredTable]],
    sheet: Flowsheet,
    periods: int,
    sources: Mapping[str, Any],
    faults: list[str],
) -> tuple[list[Measurement], list[Draw]]:
    """
    Turn the measured tables into measurements and the draws they use.

    Parameters
    ----------
    tables : sequence of (place, MeasuredTable)
    sheet : Flowsheet
    periods : int
    sources : mapping
        Shared sources by name.
    faults : list of str
        Grows by one sentence a fault.
    """
    draws: list[Draw] = []
    seen: dict[tuple[str, int], str] = {}
    result = []
    for place, table in tables:
        before = len(faults)
        spoken = _periods(table, periods, place, faults)
        parts = _parts(table, sheet, spoken, place, faults)
        basis = _basis(table, sheet)
        unit, unit_factor = _unit(table, basis, place, faults)
        effects = _effects(table, sources, spoken[-1], unit_factor, place, draws, faults)
        name = _name(table, place, faults)
        if table.u is None and not table.held:
            faults.append(
                f"{place}, u: is required, a standard uncertainty > 0; only a held "
                "figure may be exact."
            )
        if (name, spoken[-1]) in seen:
            faults.append(
                f'{place}: "{name}" is measured twice in period {spoken[-1]} (also '
                f"{seen[name, spoken[-1]]}). Give each its own name."
            )
        seen[name, spoken[-1]] = place
        if len(faults) > before:
            continue
        result.append(
            Measurement(
                name=name,
                period=spoken[-1],
                kind=_kind(table, basis),
                parts=parts,
                value=table.value * unit_factor,
                u=None if table.u is None else table.u * unit_factor,
                held=table.held,
                effects=effects,
                unit=unit,
                unit_factor=unit_factor,
                sampler=table.sampler,
            )
        )
    return result, draws


def _kind(table: MeasuredTable, basis: str) -> MeasurementKind:
    if table.node is not None:
        return MeasurementKind.STOCK
    return MeasurementKind.ASSAY if basis == "fraction" else MeasurementKind.METER


def _basis(table: MeasuredTable, sheet: Flowsheet) -> str:
    if table.basis is not None:
        return table.basis
    amount = table.quantity == MASS or MASS not in sheet.quantities
    return "amount" if amount else "fraction"


def _name(table: MeasuredTable, place: str, faults: list[str]) -> str:
    if table.name is not None:
        return table.name
    if table.streams is not None:
        faults.append(f"{place}: a sum of streams needs a name.")
    of = table.stream or table.node or ""
    at = f" {table.at}" if table.node is not None else ""
    return f"{of} {table.quantity}{at}"


def _periods(table: MeasuredTable, periods: int, place: str, faults: list[str]) -> tuple[int, ...]:
    if table.period is not None and table.periods is not None:
        faults.append(f"{place}: give period or periods, not both.")
    spoken = tuple(table.periods or (table.period or 1,))
    if max(spoken) > periods:
        faults.append(f"{place}: period {max(spoken)} is beyond the file's {periods}.")
    if list(spoken) != sorted(set(spoken)):
        faults.append(f"{place}, periods: must rise and not repeat, found {list(spoken)}.")
    if table.shares is not None:
        if table.periods is None or len(table.shares) != len(table.periods):
            faults.append(f"{place}, shares: one share for each of the periods is expected.")
        elif min(table.shares) < 0 or abs(sum(table.shares) - 1) > 1e-6:
            faults.append(
                f"{place}, shares: must not be negative and must add to 1, found "
                f"{sum(table.shares):g}."
            )
    return spoken


def _parts(
    table: MeasuredTable,
    sheet: Flowsheet,
    spoken: tuple[int, ...],
    place: str,
    faults: list[str],
) -> tuple[Part, ...]:
    basis = _basis(table, sheet)
    if table.quantity not in sheet.quantities:
        known = did_you_mean(table.quantity, sheet.quantities)
        faults.append(f'{place}, quantity: unknown quantity "{table.quantity}". {known}')
        return ()
    if basis == "fraction" and (table.quantity == MASS or MASS not in sheet.quantities):
        faults.append(
            f'{place}, basis: a fraction needs "mass" among the quantities and a component of it.'
        )
        return ()
    if [table.stream, table.streams, table.node].count(None) != 2:
        faults.append(f"{place}: give exactly one of stream, streams and node.")
        return ()
    if table.node is not None:
        return _stock_parts(table, sheet, spoken, basis, place, faults)
    if table.at is not None:
        faults.append(f"{place}, at: only a stock at a node is measured at a boundary.")
    summands = table.streams or [SummandTable(name=table.stream or "")]
    needed = (table.quantity, MASS) if basis == "fraction" else (table.quantity,)
    if not _streams_carry(summands, needed, sheet, place, faults):
        return ()

    def amounts(period: int, quantity: str) -> Linear:
        return tuple((Amount(period, s.name, quantity), s.factor) for s in summands)

    if basis == "amount":
        if table.shares is not None:
            faults.append(f"{place}, shares: only for a fraction.")
        return (Part(of=tuple(t for p in spoken for t in amounts(p, table.quantity))),)
    if table.shares is not None:
        return tuple(
            Part(of=amounts(p, table.quantity), over=amounts(p, MASS), share=share)
            for p, share in zip(spoken, table.shares, strict=False)
        )
    return (
        Part(
            of=tuple(t for p in spoken for t in amounts(p, table.quantity)),
            over=tuple(t for p in spoken for t in amounts(p, MASS)),
        ),
    )


def _streams_carry(
    summands: Sequence[SummandTable],
    needed: tuple[str, ...],
    sheet: Flowsheet,
    place: str,
    faults: list[str],
) -> bool:
    right = True
    for summand in summands:
        stream = sheet.stream_named.get(summand.name)
        if stream is None:
            known = did_you_mean(summand.name, sheet.stream_named)
            faults.append(f'{place}: unknown stream "{summand.name}". {known}')
            right = False
            continue
        for quantity in needed:
            if quantity not in stream.carries:
                faults.append(f"{place}: stream {stream.name} does not carry {quantity}.")
                right = False
    return right


def _stock_parts(
    table: MeasuredTable,
    sheet: Flowsheet,
    spoken: tuple[int, ...],
    basis: str,
    place: str,
    faults: list[str],
) -> tuple[Part, ...]:
    node = sheet.node_named.get(table.node or "")
    if node is None:
        known = did_you_mean(table.node or "", sheet.node_named)
        faults.append(f'{place}: unknown node "{table.node}". {known}')
        return ()
    if not node.stock:
        faults.append(f"{place}: node {node.name} holds no stock; declare stock = true there.")
        return ()
    if table.at is None:
        faults.append(f'{place}, at: is required for a stock, "opening" or "closing".')
        return ()
    if table.periods is not None:
        faults.append(f"{place}, periods: a stock stands at one boundary; give one period.")
        return ()
    boundary = spoken[0] - (1 if table.at == "opening" else 0)
    of: Linear = ((Stock(boundary, node.name, table.quantity), 1.0),)
    over: Linear = ((Stock(boundary, node.name, MASS), 1.0),)
    return (Part(of=of, over=over if basis == "fraction" else None),)


def _unit(table: MeasuredTable, basis: str, place: str, faults: list[str]) -> tuple[str, float]:
    if basis == "amount":
        if table.unit is not None:
            faults.append(
                f"{place}, unit: amounts are in the one unit of mass of the file; leave it out."
            )
        return "", 1.0
    name = table.unit or "1"
    try:
        return name, factor(name, Kind.FRACTION)
    except ReconError as error:
        faults.append(f"{place}, unit: {error}")
        return name, 1.0


def _effects(
    table: MeasuredTable,
    sources: Mapping[str, Draws],
    period: int,
    unit_factor: float,
    place: str,
    draws: list[Draw],
    faults: list[str],
) -> tuple[Effect, ...]:
    result = []
    for entry in table.shared:
        name, sensitivity = (entry, 1.0) if isinstance(entry, str) else (entry.source, entry.factor)
        source = sources.get(name)
        if source is None:
            faults.append(
                f'{place}, shared: unknown source "{name}". {did_you_mean(name, sources)}'
            )
            continue
        draw = source.draw_in(name, period)
        if draw not in draws:
            draws.append(draw)
        result.append(
            Effect(
                draw=draws.index(draw),
                factor=sensitivity if source.relative else sensitivity * unit_factor,
                relative=source.relative,
            )
        )
    return tuple(result)
