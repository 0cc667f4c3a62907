"""State the month as one problem, and any one of its days as a problem of its own."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

from recon.declare.site_file import flowsheet_of
from recon.flowsheet.balances import Amount, Linear, Row, Stock, Unknown
from recon.ingest.measurements import in_problem
from recon.reconcile.problem import Draw, Effect, Figure, Part, Problem

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence
    from datetime import date

    from recon.declare.site import Term
    from recon.ingest.context import Context
    from recon.ingest.measured import Measured
    from recon.reconcile.problem import Measurement


def state_month(
    context: Context,
    measured: Sequence[Measured],
    draws: Sequence[Draw],
    not_running: Iterable[tuple[date, str]],
) -> Problem:
    """
    State the month to date.

    Parameters
    ----------
    context : Context
    measured : sequence of Measured
        Compared and set-aside ones stay out; draws that only they used are dropped.
    draws : sequence of Draw
        What the measurements' effects index.
    not_running : iterable of (date, str)
        Streams tied to zero, one relation a quantity, named "... stands".

    Returns
    -------
    Problem
    """
    sheets = tuple(flowsheet_of(context.version(day).site) for day in context.days)
    used, measurements = _renumber([m.measurement for m in measured if in_problem(m)], draws)
    return Problem(
        flowsheets=sheets,
        measurements=measurements,
        draws=used,
        relations=(*_stands(context, not_running), *_relations(context)),
        figures=tuple(_figures(context)),
    )


def one_day(problem: Problem, p: int) -> Problem:
    """
    State the one-day problem of period p: its statistics are printed, never its figures.

    It keeps the readings that speak of that day alone, with draws and priors of its own; stocks at
    its two boundaries are measured where they were surveyed, else free. A sample over several days
    tests the month, not a day.

    Raises
    ------
    ValueError
        The month has no such day.
    """
    if not 1 <= p <= len(problem.flowsheets):
        raise ValueError(f"day {p} of a month to date of {len(problem.flowsheets)}")
    kept = [
        replace(m, period=1, parts=tuple(_moved_part(part, p) for part in m.parts))
        for m in problem.measurements
        if _within((u for part in m.parts for u, _ in (*part.of, *(part.over or ()))), p)
    ]
    draws, measurements = _renumber(kept, problem.draws)
    return Problem(
        flowsheets=(problem.flowsheets[p - 1],),
        measurements=_unique(measurements),
        draws=_one_a_source(draws),
        relations=tuple(
            replace(row, form=_moved(row.form, p))
            for row in problem.relations
            if _within((u for u, _ in row.form), p)
        ),
        figures=tuple(
            replace(
                f, period=1, of=_moved(f.of, p), over=None if f.over is None else _moved(f.over, p)
            )
            for f in problem.figures
            if f.period == p
        ),
    )


def _stands(context: Context, not_running: Iterable[tuple[date, str]]) -> list[Row]:
    rows = []
    for day, name in not_running:
        p = context.period(day)
        assert p is not None
        for quantity in context.version(day).stream[name].carries:
            rows.append(
                Row(
                    name=f"{p}: {name} {quantity} stands",
                    form=((Amount(p, name, quantity), 1.0),),
                )
            )
    return rows


def _relations(context: Context) -> list[Row]:
    return [
        Row(name=f"{p}: {relation.name}", form=_form(relation.terms, p), equals=relation.equals)
        for p, day in enumerate(context.days, start=1)
        for relation in context.version(day).site.relations
    ]


def _figures(context: Context) -> list[Figure]:
    """Every declared figure, a day and over the month; days whose version lacks it are left out."""
    found: list[Figure] = []
    whole: dict[str, tuple[list[tuple[Unknown, float]], list[tuple[Unknown, float]]]] = {}
    for p, day in enumerate(context.days, start=1):
        for figure in context.version(day).site.figures:
            of, over = _form(figure.of, p), _form(figure.over, p)
            found.append(Figure(name=figure.name, period=p, of=of, over=over or None))
            top, bottom = whole.setdefault(figure.name, ([], []))
            top.extend(of)
            bottom.extend(over)
    return found + [
        Figure(name=name, period=None, of=tuple(of), over=tuple(over) or None)
        for name, (of, over) in whole.items()
    ]


def _form(terms: Iterable[Term], p: int) -> Linear:
    return tuple((Amount(p, t.stream, t.quantity), t.factor) for t in terms)


def _renumber(
    measurements: Sequence[Measurement], draws: Sequence[Draw]
) -> tuple[tuple[Draw, ...], tuple[Measurement, ...]]:
    """Keep the draws that some measurement uses and let effects point at them."""
    used = sorted({e.draw for m in measurements for e in m.effects})
    place = {old: new for new, old in enumerate(used)}
    return tuple(draws[i] for i in used), tuple(
        replace(
            m,
            effects=tuple(
                Effect(draw=place[e.draw], factor=e.factor, relative=e.relative) for e in m.effects
            ),
        )
        for m in measurements
    )


def _within(unknowns: Iterable[Unknown], p: int) -> bool:
    return all(
        u.period == p if isinstance(u, Amount) else u.boundary in (p - 1, p) for u in unknowns
    )


def _moved(form: Linear, p: int) -> Linear:
    return tuple(
        (
            u._replace(period=1)
            if isinstance(u, Amount)
            else Stock(u.boundary - (p - 1), u.node, u.quantity),
            c,
        )
        for u, c in form
    )


def _moved_part(part: Part, p: int) -> Part:
    return replace(
        part,
        of=_moved(part.of, p),
        over=None if part.over is None else _moved(part.over, p),
    )


def _unique(measurements: Sequence[Measurement]) -> tuple[Measurement, ...]:
    """The survey that closed the day before opens this one: say so in its name."""
    return tuple(
        replace(m, name=m.name.replace(" closing", " opening"))
        if isinstance(u := m.parts[0].of[0][0], Stock) and u.boundary == 0
        else m
        for m in measurements
    )


def _one_a_source(draws: Sequence[Draw]) -> tuple[Draw, ...]:
    """Draws of one day begin with it; two of one source (yesterday's survey) keep their order."""
    seen: dict[str, int] = {}
    found = []
    for draw in draws:
        seen[draw.source] = seen.get(draw.source, 0) + 1
        name = draw.source if seen[draw.source] == 1 else f"{draw.source} ({seen[draw.source]})"
        found.append(Draw(source=name, first=1, u=draw.u))
    return tuple(found)
