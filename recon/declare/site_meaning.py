"""Whether what a site file says makes sense: names that exist, ends that differ, roles that fit.

Each check takes entries with their place and adds one sentence a fault. Entries whose shape is
wrong are not here, but their names are known, so that one slip is not reported twice.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import TypeVar
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError, available_timezones

from recon.declare.faults import did_you_mean
from recon.declare.site import (
    ErrorSource,
    PlausibilityWindow,
    Shift,
    Site,
    SiteFigure,
    SiteNode,
    SiteRelation,
    SiteStream,
    SourceQuery,
    Term,
)
from recon.errors import UnknownUnitError
from recon.units import UNITS, Kind, unit

Entry = TypeVar("Entry")
Placed = Sequence[tuple[str, Entry]]
"""Entries, each with the place where a person finds it."""

NEEDED = ("mass", "Cu", "Fe", "S", "SiO2")
"""Quantities that every site balances."""


@dataclass(frozen=True, kw_only=True)
class Known:
    """
    Every name that the file declares, entries of faulty shape included.

    Attributes
    ----------
    quantities, sections, nodes, streams, sources, tags : frozenset of str
        ``quantities`` is empty where the head could not be read.
    carried : mapping
        What each stream carries, streams of sound shape alone.
    """

    quantities: frozenset[str]
    sections: frozenset[str]
    nodes: frozenset[str]
    streams: frozenset[str]
    sources: frozenset[str]
    tags: frozenset[str]
    carried: Mapping[str, tuple[str, ...]]

    def quantity(self, name: str, place: str, faults: list[str]) -> None:
        """Refuse a quantity that the site does not have."""
        if self.quantities:
            _known(name, self.quantities, "quantity", place, faults)

    def terms(self, terms: Sequence[Term], place: str, faults: list[str]) -> None:
        """Refuse terms of unknown streams and of quantities that a stream does not carry."""
        if not terms:
            faults.append(f"{place}: at least one term is needed.")
        for term in terms:
            if term.stream not in self.streams:
                _known(term.stream, self.streams, "stream", place, faults)
            else:
                self.carries(term.stream, term.quantity, place, faults)
            if term.factor == 0:
                faults.append(f"{place}: {term.stream} has factor 0; leave the term out.")

    def carries(self, stream: str, quantity: str, place: str, faults: list[str]) -> None:
        """Refuse a quantity that a stream does not carry."""
        carried = self.carried.get(stream)
        if carried is not None and quantity not in carried:
            faults.append(
                f'{place}: stream {stream} does not carry "{quantity}"; it carries '
                f"{', '.join(carried)}."
            )


def check_head(site: Site, faults: list[str]) -> None:
    """Check zone, quantities and the plain numbers of a site."""
    try:
        ZoneInfo(site.zone)
    except (ZoneInfoNotFoundError, OSError, ValueError):
        faults.append(
            f'site, zone: unknown time zone "{site.zone}". '
            + (_closest(site.zone) or 'Write an IANA name, for example "America/Santiago".')
        )
    _twice(site.quantities, "site, quantities", faults)
    for quantity in NEEDED:
        if quantity not in site.quantities:
            faults.append(
                f'site, quantities: "{quantity}" is missing; every site balances '
                f"{', '.join(NEEDED)}."
            )
    if site.day_cut.tzinfo is not None:
        faults.append("site, day_cut: is plant time, without an offset.")
    if site.settling_hours < 0:
        faults.append(f"site, settling_hours: must be 0 or more, found {site.settling_hours:g}.")
    if not 0 < site.alarm_level <= 0.5:
        faults.append(
            "site, alarm_level: a false-alarm rate above 0 and at most 0.5 is expected, found "
            f"{site.alarm_level:g}."
        )


def check_nodes(nodes: Placed[SiteNode], known: Known, faults: list[str]) -> None:
    """Check sections, conserved quantities, bounds and what only a stock can have."""
    for place, node in nodes:
        _known(node.section, known.sections, "section", f"{place}, section", faults)
        _twice(node.conserves, f"{place}, conserves", faults)
        for quantity in node.conserves:
            known.quantity(quantity, f"{place}, conserves", faults)
        for quantity, (low, high) in node.bounds.items():
            known.quantity(quantity, f"{place}, bounds", faults)
            if not 0 <= low < high:
                faults.append(
                    f"{place}, bounds: {quantity} needs 0 <= lowest < highest [t], found "
                    f"[{low:g}, {high:g}]."
                )
        if not node.stock:
            for key, said in (("bounds", node.bounds), ("well_mixed", node.well_mixed)):
                if said:
                    faults.append(f"{place}, {key}: needs stock = true; a unit without a stock.")
        if node.roll_limit_days < 0:
            faults.append(
                f"{place}, roll_limit_days: must be 0 or more, found {node.roll_limit_days:g}."
            )


def check_streams(streams: Placed[SiteStream], known: Known, faults: list[str]) -> None:
    """Check ends, what is carried, roles at the site boundary, and run signals."""
    for place, stream in streams:
        for key, end in (("from", stream.source), ("to", stream.target)):
            if end is not None:
                _known(end, known.nodes, "node", f"{place}, {key}", faults)
        if not stream.carries:
            faults.append(f"{place}, carries: at least one quantity is needed.")
        _twice(stream.carries, f"{place}, carries", faults)
        for quantity in stream.carries:
            known.quantity(quantity, f"{place}, carries", faults)
        _role(place, stream, faults)
        if stream.run_signal is not None:
            _known(stream.run_signal, known.tags, "tag", f"{place}, run_signal", faults)


def _role(place: str, stream: SiteStream, faults: list[str]) -> None:
    if stream.source is None and stream.target is None:
        faults.append(f"{place}: has neither from nor to, so it is in no balance.")
    elif stream.source == stream.target:
        faults.append(f"{place}: leaves and enters the same node {stream.source}.")
    elif stream.source is None and stream.role != "receipt":
        faults.append(
            f'{place}, role: it enters the site (no from), so its role is "receipt"; found '
            f'"{stream.role}".'
        )
    elif stream.target is None and stream.role not in ("product", "discard"):
        faults.append(
            f'{place}, role: it leaves the site (no to), so its role is "product" or "discard"; '
            f'found "{stream.role}".'
        )
    elif stream.source is not None and stream.target is not None and stream.role != "internal":
        faults.append(
            f"{place}, role: it runs between two nodes of the site, so it is internal; found "
            f'"{stream.role}". Leave role out, or leave out the end that is the boundary.'
        )


def check_sources(sources: Placed[ErrorSource], known: Known, faults: list[str]) -> None:
    """Check the size of shared sources and how their draws end."""
    for place, source in sources:
        if source.u <= 0:
            faults.append(f"{place}, u: a standard uncertainty > 0 is expected, found {source.u}.")
        if source.relative and source.u >= 1:
            faults.append(f"{place}, u: {source.u:g} means {source.u:.0%}; write 1 % as 0.01.")
        if source.lasts == "calibration" and source.calibrated_by is None:
            faults.append(
                f'{place}, calibrated_by: lasts = "calibration" needs the tag whose logged '
                "calibrations end a draw."
            )
        if source.calibrated_by is not None:
            _known(source.calibrated_by, known.tags, "tag", f"{place}, calibrated_by", faults)
            if source.lasts != "calibration":
                faults.append(
                    f'{place}, calibrated_by: has an effect with lasts = "calibration" only; '
                    f'found "{source.lasts}".'
                )


def check_ratios(
    figures: Placed[SiteFigure],
    windows: Placed[PlausibilityWindow],
    relations: Placed[SiteRelation],
    known: Known,
    faults: list[str],
) -> None:
    """Check the terms of relations, figures and plausibility windows."""
    for place, relation in relations:
        known.terms(relation.terms, f"{place}, terms", faults)
    for place, figure in figures:
        known.terms(figure.of, f"{place}, of", faults)
        known.terms(figure.over, f"{place}, over", faults)
        check_unit(figure.unit, (Kind.FRACTION,), f"{place}, unit", faults)
    for place, window in windows:
        known.terms(window.of, f"{place}, of", faults)
        known.terms(window.over, f"{place}, over", faults)
        if window.low >= window.high:
            faults.append(
                f"{place}: low < high is expected, found {window.low:g} and {window.high:g}."
            )


def check_shifts_and_queries(
    shifts: Placed[Shift], queries: Placed[SourceQuery], faults: list[str]
) -> None:
    """Check that shifts start apart and that each kind of row has one source."""
    starts: dict[object, str] = {}
    for place, shift in shifts:
        if shift.start in starts:
            faults.append(f"{place}, start: the same as of {starts[shift.start]}.")
        starts[shift.start] = place
    kinds: dict[str, str] = {}
    for place, query in queries:
        if (query.query is None) == (query.sheet is None):
            faults.append(f"{place}: write either query (an SQL file) or sheet, one of the two.")
        if query.kind in kinds:
            faults.append(f"{place}, kind: {query.kind} come from {kinds[query.kind]} already.")
        kinds[query.kind] = place


def check_unit(name: str, kinds: Iterable[Kind], place: str, faults: list[str]) -> None:
    """Refuse an unknown unit and one of another kind than expected."""
    try:
        found = unit(name)
    except UnknownUnitError:
        faults.append(f'{place}: unknown unit "{name}". {did_you_mean(name, UNITS)}')
        return
    expected = tuple(kinds)
    if found.kind not in expected:
        faults.append(
            f'{place}: "{name}" is a unit of {found.kind}; a unit of '
            f"{' or '.join(expected)} is expected."
        )


def check_twice(names: Iterable[tuple[str, str]], faults: list[str]) -> None:
    """Refuse a name used by two entries of one list; takes (place, name)."""
    first: dict[str, str] = {}
    for place, name in names:
        if name in first:
            faults.append(f'{place}: the name "{name}" is used twice (also {first[name]}).')
        first.setdefault(name, place)


def _known(name: str, names: Iterable[str], what: str, place: str, faults: list[str]) -> None:
    known = set(names)
    if name not in known:
        faults.append(f'{place}: unknown {what} "{name}". {did_you_mean(name, known)}')


def _twice(names: Sequence[str], place: str, faults: list[str]) -> None:
    for name in sorted({n for n in names if names.count(n) > 1}):
        faults.append(f'{place}: "{name}" is named twice.')


def _closest(zone: str) -> str:
    suggestion = did_you_mean(zone, available_timezones())
    return suggestion if suggestion.startswith("Did") else ""
