"""What a balance file says: from its tables to a problem, or every fault in it at once."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from pydantic import TypeAdapter

from recon.declare.balance_measured import measured_of
from recon.declare.balance_shape import (
    FigureTable,
    HeadTable,
    MeasuredTable,
    NodeTable,
    RelationTable,
    SourceTable,
    StreamTable,
    Table,
    TermTable,
)
from recon.declare.faults import did_you_mean, shaped
from recon.errors import FaultyFileError, UnreadableFileError
from recon.flowsheet.balances import Amount, Linear, Row
from recon.flowsheet.checks import find_forced_zeros, find_loose_nodes
from recon.flowsheet.network import Flowsheet, Node, Stream
from recon.reconcile.problem import Draw, Figure, Problem

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping, Sequence
    from pathlib import Path

TABLES: dict[str, type[Table]] = {
    "node": NodeTable,
    "stream": StreamTable,
    "measured": MeasuredTable,
    "source": SourceTable,
    "relation": RelationTable,
    "figure": FigureTable,
}


@dataclass(frozen=True, kw_only=True)
class Balance:
    """A balance file as understood."""

    title: str
    problem: Problem


def read_balance(path: Path, sheets: Callable[[Path], Mapping[str, Any]] | None = None) -> Balance:
    """
    Read a balance file.

    Parameters
    ----------
    path : Path
        A ``.toml`` file, or a workbook where a reader is given.
    sheets : callable, optional
        Reads a workbook into the tables a TOML file would hold.

    Raises
    ------
    UnreadableFileError
        The file is missing or is not what its name says.
    FaultyFileError
        Something in it is wrong; every fault is listed.
    """
    if path.suffix == ".xlsx" and sheets is not None:
        return balance_of(sheets(path), str(path))
    try:
        tables = tomllib.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        raise UnreadableFileError(str(path), f"cannot be read: {error.strerror}.") from error
    except UnicodeDecodeError as error:
        raise UnreadableFileError(str(path), "is not UTF-8 text.") from error
    except tomllib.TOMLDecodeError as error:
        raise UnreadableFileError(str(path), f"is not valid TOML: {error}.") from error
    return balance_of(tables, str(path))


def balance_of(tables: Mapping[str, Any], path: str) -> Balance:
    """
    Understand the tables of a balance file.

    Parameters
    ----------
    tables : mapping
        As a TOML reader gives them.
    path : str
        Named in messages.

    Raises
    ------
    FaultyFileError
        Something is wrong; every fault is listed.
    """
    faults: list[str] = []
    head = _head(tables, faults)
    found = {name: _tables(tables, name, faults) for name in TABLES}
    quantities = tuple(head.quantities) if head else ()
    periods = head.periods if head else 1
    if len(set(quantities)) < len(quantities):
        faults.append("quantities: a quantity is named twice.")
    sheet = _flowsheet(quantities, found["node"], found["stream"], tables, faults)
    draws = _sources(found["source"], periods, faults)
    measurements, used = measured_of(found["measured"], sheet, periods, draws, faults)
    relations = _relations(found["relation"], sheet, periods, faults)
    figures = _figures(found["figure"], sheet, periods, faults)
    if not faults:
        checks = (*find_loose_nodes(sheet), *find_forced_zeros(sheet))
        faults.extend(finding.text for finding in checks)
    if faults:
        raise FaultyFileError(path, faults)
    problem = Problem(
        flowsheets=(sheet,) * periods,
        measurements=tuple(measurements),
        draws=tuple(used),
        relations=tuple(relations),
        figures=tuple(figures),
    )
    return Balance(title=head.title if head else "", problem=problem)


def _head(tables: Mapping[str, Any], faults: list[str]) -> HeadTable | None:
    own = {k: v for k, v in tables.items() if k not in TABLES}
    known = {*HeadTable.model_fields, *TABLES}
    for key in [k for k in own if k not in known]:
        faults.append(f"{key}: unknown key. {did_you_mean(key, known)}")
        del own[key]
    return shaped(TypeAdapter(HeadTable), own, "the file's head", faults)


def _tables(tables: Mapping[str, Any], name: str, faults: list[str]) -> list[tuple[str, Any]]:
    """Give place and table of every entry whose shape is right."""
    entries = tables.get(name, [])
    if not isinstance(entries, list):
        faults.append(f"{name}: write [[{name}]], a list of tables.")
        return []
    adapter: TypeAdapter[Any] = TypeAdapter(TABLES[name])
    result = []
    for i, entry in enumerate(entries, start=1):
        label = entry.get("name") if isinstance(entry, dict) else None
        place = f"{name} {i}" + (f" ({label})" if label else "")
        table = shaped(adapter, entry, place, faults)
        if table is not None:
            result.append((place, table))
    return result


def _names(tables: Mapping[str, Any], name: str) -> set[str]:
    """All names declared in a table, those of faulty entries included."""
    entries = tables.get(name, [])
    if not isinstance(entries, list):
        return set()
    return {str(e["name"]) for e in entries if isinstance(e, dict) and "name" in e}


def _twice(tables: Sequence[tuple[str, Any]], faults: list[str]) -> None:
    seen: set[str] = set()
    for place, table in tables:
        if table.name in seen:
            faults.append(f"{place}: the name is used twice.")
        seen.add(table.name)


def _flowsheet(
    quantities: tuple[str, ...],
    nodes: Sequence[tuple[str, NodeTable]],
    streams: Sequence[tuple[str, StreamTable]],
    tables: Mapping[str, Any],
    faults: list[str],
) -> Flowsheet:
    _twice(nodes, faults)
    _twice(streams, faults)
    known = _names(tables, "node")
    for place, stream in streams:
        for key, end in (("from", stream.source), ("to", stream.target)):
            if end is not None and end not in known:
                faults.append(f'{place}, {key}: unknown node "{end}". {did_you_mean(end, known)}')
        if stream.source is not None and stream.source == stream.target:
            faults.append(f"{place}: leaves and enters the same node {stream.source}.")
    lists = [(place, "conserves", node.conserves) for place, node in nodes]
    lists += [(place, "carries", stream.carries) for place, stream in streams]
    for place, key, listed in lists:
        if quantities:
            faults.extend(
                f'{place}, {key}: unknown quantity "{q}". {did_you_mean(q, quantities)}'
                for q in listed or ()
                if q not in quantities
            )
    return Flowsheet(
        quantities=quantities,
        nodes=tuple(
            Node(
                name=n.name,
                conserves=_in_order(n.conserves, quantities),
                same_composition=n.same_composition,
                stock=n.stock,
            )
            for _, n in nodes
        ),
        streams=tuple(
            Stream(
                name=s.name,
                source=s.source,
                target=s.target,
                carries=_in_order(s.carries, quantities),
            )
            for _, s in streams
        ),
    )


def _in_order(listed: list[str] | None, quantities: tuple[str, ...]) -> tuple[str, ...]:
    return quantities if listed is None else tuple(q for q in quantities if q in listed)


@dataclass(frozen=True, kw_only=True)
class SourceDraws:
    """A shared source and the first period of each of its draws."""

    u: float
    relative: bool
    firsts: tuple[int, ...]

    def draw_in(self, name: str, period: int) -> Draw:
        """Give the draw in force in a period."""
        first = max(f for f in self.firsts if f <= period)
        return Draw(source=name, first=first, u=self.u)


def _sources(
    sources: Sequence[tuple[str, SourceTable]], periods: int, faults: list[str]
) -> dict[str, SourceDraws]:
    _twice(sources, faults)
    result = {}
    for place, source in sources:
        firsts: tuple[int, ...] = (1,)
        if source.lasts == "period":
            firsts = tuple(range(1, periods + 1))
        elif isinstance(source.lasts, list):
            firsts = _spans(source.lasts, periods, place, faults)
        result[source.name] = SourceDraws(u=source.u, relative=source.relative, firsts=firsts)
    return result


def _spans(spans: list[list[int]], periods: int, place: str, faults: list[str]) -> tuple[int, ...]:
    ordered = sorted(spans)
    covered = [p for span in ordered if len(span) == 2 for p in range(span[0], span[1] + 1)]
    if covered != list(range(1, periods + 1)):
        faults.append(
            f"{place}, lasts: the spans must cover periods 1 to {periods} once each, as "
            f"[[first, last], ...]; found {spans}."
        )
        return (1,)
    return tuple(span[0] for span in ordered)


def amounts_of(
    terms: Sequence[TermTable], sheet: Flowsheet, period: int, place: str, faults: list[str]
) -> Linear:
    """Turn terms into a linear form; report unknown streams and quantities not carried."""
    form = []
    for term in terms:
        stream = sheet.stream_named.get(term.stream)
        if stream is None:
            known = did_you_mean(term.stream, sheet.stream_named)
            faults.append(f'{place}: unknown stream "{term.stream}". {known}')
        elif term.quantity not in stream.carries:
            faults.append(
                f"{place}: stream {term.stream} does not carry {term.quantity}; it carries "
                f"{', '.join(stream.carries)}."
            )
        else:
            form.append((Amount(period, term.stream, term.quantity), term.factor))
    return tuple(form)


def _relations(
    tables: Sequence[tuple[str, RelationTable]],
    sheet: Flowsheet,
    periods: int,
    faults: list[str],
) -> list[Row]:
    _twice(tables, faults)
    result = []
    for place, table in tables:
        for period in range(1, periods + 1):
            into = faults if period == 1 else []
            form = amounts_of(table.terms, sheet, period, place, into)
            result.append(Row(name=f"{period}: {table.name}", form=form, equals=table.equals))
    return result


def _figures(
    tables: Sequence[tuple[str, FigureTable]],
    sheet: Flowsheet,
    periods: int,
    faults: list[str],
) -> list[Figure]:
    _twice(tables, faults)
    result = []
    for place, table in tables:
        each = []
        for period in range(1, periods + 1):
            into = faults if period == 1 else []
            of = amounts_of(table.of, sheet, period, place, into)
            over = amounts_of(table.over, sheet, period, place, into)
            each.append(Figure(name=table.name, period=period, of=of, over=over))
        result.extend(each)
        if periods > 1:
            result.append(
                Figure(
                    name=table.name,
                    period=None,
                    of=tuple(t for f in each for t in f.of),
                    over=tuple(t for f in each for t in f.over or ()),
                )
            )
    return result
