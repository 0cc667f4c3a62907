"""Which day cut each survey speaks of, and what stands at a month's end without one."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from recon.ingest.measurements import Candidate
from recon.ingest.roll import rolled

if TYPE_CHECKING:
    from collections.abc import Sequence
    from datetime import datetime

    from recon.declare.site import SiteNode
    from recon.ingest.context import Context
    from recon.ingest.flows import Flows
    from recon.ingest.reading import Reading
    from recon.ingest.surveys import Surveyed


@dataclass(frozen=True, kw_only=True)
class Stocks:
    """
    Stocks at the month's boundaries.

    Attributes
    ----------
    candidates : tuple of Candidate
        Boundary 0 opens the month, p closes its day p.
    known : tuple of Reading
        Surveys as found, history included: what references are taken from.
    """

    candidates: tuple[Candidate, ...]
    known: tuple[Reading, ...]


def at_boundaries(context: Context, flows: Flows, surveys: Sequence[Surveyed]) -> Stocks:
    """
    Give each stock place its measurements at the month's day cuts.

    A survey speaks of the nearest cut within the place's roll limit. Where the month's opening has
    none in reach, the last survey before it is rolled to it however far. Where its end has none,
    the last survey rolled there is kept for the statement, *by difference*, and takes no part in
    the fit, which has that survey already.
    """
    cuts = [context.start(day) for day in context.days]
    cuts.append(context.end(context.days[-1]))
    found: list[Candidate] = []
    for place in _places(context):
        own = [s for s in surveys if s.place == place.name and s.readings]
        reach = {b: _nearest(cut, own, place) for b, cut in enumerate(cuts)}
        told: set[str] = set()
        for survey in own:
            b = min(range(len(cuts)), key=lambda b: abs((cuts[b] - survey.at).total_seconds()))
            if _days(cuts[b], survey.at) <= place.roll_limit_days:
                found += _candidates(context, rolled(context, flows, survey, cuts[b]), b)
                told.add(survey.document)
        if reach[0] is None:
            before = [s for s in own if s.at < cuts[0]]
            if before and before[-1].document not in told:
                _say_far(context, place, before[-1], cuts[0])
                found += _candidates(context, rolled(context, flows, before[-1], cuts[0]), 0)
        last = len(cuts) - 1
        if reach[last] is None and own:
            earlier = [s for s in own if s.at <= cuts[last]]
            if earlier:
                moved = rolled(context, flows, earlier[-1], cuts[last])
                found += [replace(c, compare=True) for c in _candidates(context, moved, last)]
    return Stocks(candidates=tuple(found), known=tuple(r for s in surveys for r in s.readings))


def _places(context: Context) -> list[SiteNode]:
    """Stock places of the month, as last declared."""
    found: dict[str, SiteNode] = {}
    for day in context.days:
        for node in context.version(day).site.nodes:
            if node.stock:
                found[node.name] = node
    return list(found.values())


def _nearest(cut: datetime, surveys: Sequence[Surveyed], place: SiteNode) -> Surveyed | None:
    within = [s for s in surveys if _days(cut, s.at) <= place.roll_limit_days]
    return min(within, key=lambda s: _days(cut, s.at), default=None)


def _days(a: datetime, b: datetime) -> float:
    return abs((a - b).total_seconds()) / 86400


def _candidates(context: Context, readings: Sequence[Reading], boundary: int) -> list[Candidate]:
    return [
        Candidate(instrument=context.version(r.day).instrument[r.tag], reading=r, boundary=boundary)
        for r in readings
    ]


def _say_far(context: Context, place: SiteNode, survey: Surveyed, cut: datetime) -> None:
    context.find(
        "rolled-far",
        place.name,
        f"Place {place.name}: the month opens without a survey within "
        f"{place.roll_limit_days:g} d; survey {survey.document} of {survey.at:%F %H:%M}Z is rolled "
        f"{_days(cut, survey.at):.1f} d to the cut. Survey the place.",
        day=context.days[0],
    )
