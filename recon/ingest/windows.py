"""Plausibility windows: ratios of a day's measured amounts that should lie between two values."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Sequence
    from datetime import date

    from recon.declare.site import PlausibilityWindow, Term
    from recon.ingest.context import Context
    from recon.ingest.flows import Flows


def find_implausible(context: Context, flows: Flows) -> None:
    """
    Look through each declared window, day by day, as measured.

    A window over the grades of one stream needs no mass; one over amounts is left out on a day on
    which a term is not measured or the denominator stands.
    """
    for day in context.days:
        for window in context.version(day).site.windows:
            ratio = _ratio(flows, window, day)
            if ratio is None or window.low <= ratio <= window.high:
                continue
            context.find(
                "implausible",
                window.name,
                f"{window.name}, {day}: measured {ratio:.4g}, expected {window.low:g} to "
                f"{window.high:g}. Check {_names(window)}.",
                day=day,
                evidence=(("ratio", f"{ratio:.6g}"),),
            )


def _ratio(flows: Flows, window: PlausibilityWindow, day: date) -> float | None:
    streams = {t.stream for t in (*window.of, *window.over)}
    if len(streams) == 1:
        top, bottom = _grades(flows, window.of, day), _grades(flows, window.over, day)
    else:
        top, bottom = None, None
    if top is None or bottom is None:
        top, bottom = (
            _amounts(flows, window.of, day),
            _amounts(flows, window.over, day),
        )
    return None if top is None or not bottom else top / bottom


def _grades(flows: Flows, terms: Sequence[Term], day: date) -> float | None:
    found = [flows.grade_on(t.stream, t.quantity, day) for t in terms]
    return sum(
        t.factor * g for t, g in zip(terms, found, strict=True) if g is not None
    ) if None not in found else None  # fmt: skip


def _amounts(flows: Flows, terms: Sequence[Term], day: date) -> float | None:
    total = 0.0
    for term in terms:
        amount = flows.on(term.stream, term.quantity, day)
        if amount is None:
            return None
        total += term.factor * amount
    return total


def _names(window: PlausibilityWindow) -> str:
    return ", ".join(dict.fromkeys(f"{t.stream} {t.quantity}" for t in (*window.of, *window.over)))
