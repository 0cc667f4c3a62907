"""The tests of one day: from that day's readings alone, so that no other day can hide it.

A day's problem has that day's measurements, its own priors of shared sources, and its stocks at
both boundaries measured where surveyed, else free. It gives statistics, never figures.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from recon.app.suspicion import suspicion_of
from recon.errors import SolveError
from recon.findings import NotApplicable
from recon.flowsheet.balances import Amount, Linear, Row, Stock, Unknown
from recon.reconcile.problem import Problem
from recon.reconcile.read import reconcile

if TYPE_CHECKING:
    from collections.abc import Iterable

    from recon.reconcile.problem import Draw, Measurement
    from recon.reconcile.solver import Engine
    from recon.suspects.alarm import Alarm
    from recon.suspects.naming import Suspect


@dataclass(frozen=True, kw_only=True)
class DayTest:
    """
    What one day's own readings say.

    Attributes
    ----------
    period : int
        The day's place in the month, 1-based.
    p_value : float or None
        Of the overall test; None where nothing can be tested.
    degrees_of_freedom : int
    alarm : Alarm or None
    suspects : tuple of Suspect
    reason : str
        Why there is no statistic; empty where there is one.
    """

    period: int
    p_value: float | None
    degrees_of_freedom: int
    alarm: Alarm | None
    suspects: tuple[Suspect, ...] = ()
    reason: str = ""


def day_statistics(problem: Problem, period: int, *, engine: Engine, level: float) -> DayTest:
    """
    Test one day of a month's problem.

    Parameters
    ----------
    problem : Problem
        The month's.
    period : int
        1-based.
    engine : Engine
    level : float
        Plant-wide false-alarm rate of the day's alarm [-].
    """
    try:
        answer = reconcile(one_day(problem, period), engine)
    except SolveError as error:
        return DayTest(
            period=period, p_value=None, degrees_of_freedom=0, alarm=None, reason=str(error)
        )
    if isinstance(answer.test, NotApplicable):
        return DayTest(
            period=period,
            p_value=None,
            degrees_of_freedom=answer.degrees_of_freedom,
            alarm=None,
            reason=answer.test.reason,
        )
    suspicion = suspicion_of(answer, level)
    return DayTest(
        period=period,
        p_value=answer.test.p_value,
        degrees_of_freedom=answer.degrees_of_freedom,
        alarm=suspicion.alarm,
        suspects=suspicion.suspects,
    )


def one_day(problem: Problem, period: int) -> Problem:
    """
    Cut one day out of a month's problem.

    A measurement that reaches over several days belongs to none of them alone and is left out; so
    are figures. A measured stock counts on both days whose boundary it is.
    """
    kept = [
        (m, tuple(_cut(part.of, period) for part in m.parts), m.parts)
        for m in problem.measurements
        if all(
            _inside(part.of, period) and (part.over is None or _inside(part.over, period))
            for part in m.parts
        )
    ]
    used = sorted({effect.draw for m, _, _ in kept for effect in m.effects})
    place = {old: new for new, old in enumerate(used)}
    return Problem(
        flowsheets=(problem.flowsheets[period - 1],),
        measurements=_distinct(
            replace(
                m,
                period=1,
                parts=tuple(
                    replace(
                        part, of=of, over=None if part.over is None else _cut(part.over, period)
                    )
                    for part, of in zip(parts, ofs, strict=True)
                ),
                effects=tuple(replace(e, draw=place[e.draw]) for e in m.effects),
            )
            for m, ofs, parts in kept
        ),
        draws=tuple(_first(problem.draws[old]) for old in used),
        relations=tuple(
            Row(name=row.name, form=_cut(row.form, period), equals=row.equals)
            for row in problem.relations
            if _inside(row.form, period)
        ),
    )


def _first(draw: Draw) -> Draw:
    return replace(draw, first=1)


def _distinct(measurements: Iterable[Measurement]) -> tuple[Measurement, ...]:
    """Keep names unique: a stock surveyed at both boundaries comes twice under one name."""
    seen: dict[str, int] = {}
    result: list[Measurement] = []
    for m in measurements:
        seen[m.name] = seen.get(m.name, 0) + 1
        again = seen[m.name] > 1
        result.append(replace(m, name=f"{m.name} ({seen[m.name]})") if again else m)
    return tuple(result)


def _inside(form: Linear, period: int) -> bool:
    return all(
        u.period == period if isinstance(u, Amount) else u.boundary in (period - 1, period)
        for u, _ in form
    )


def _cut(form: Linear, period: int) -> Linear:
    return tuple((_moved(u, period), c) for u, c in form)


def _moved(unknown: Unknown, period: int) -> Unknown:
    if isinstance(unknown, Amount):
        return unknown._replace(period=1)
    return Stock(unknown.boundary - period + 1, unknown.node, unknown.quantity)
