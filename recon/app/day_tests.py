"""The tests of one day: from that day's readings alone, so that no other day can hide it.

A day's problem has that day's measurements, its own priors of shared sources, and its stocks at
both boundaries measured where surveyed, else free. It gives statistics, never figures.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from recon.app.suspicion import suspicion_of
from recon.errors import SolveError
from recon.findings import NotApplicable
from recon.reconcile.read import reconcile
from recon.tabulate.cells import Cell

if TYPE_CHECKING:
    from collections.abc import Sequence
    from datetime import date

    from recon.reconcile.answer import Answer
    from recon.reconcile.problem import Problem
    from recon.reconcile.solver import Engine
    from recon.suspects.alarm import Alarm
    from recon.suspects.naming import Suspect

TABLE = "tests"
ROW = "fit"


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
    Test one day of a month.

    Parameters
    ----------
    problem : Problem
        The day's own, of ``recon.ingest.build.day_problem``.
    period : int
        The day's place in the month, 1-based.
    engine : Engine
    level : float
        Plant-wide false-alarm rate of the day's alarm [-].
    """
    try:
        answer = reconcile(problem, engine)
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


def statistic_cells(
    days: tuple[date, ...], answer: Answer, alarm: Alarm, tests: Sequence[DayTest]
) -> list[Cell]:
    """Print the tests of every day's own fit and of the month's joint fit."""
    month = days[0].strftime("%Y-%m")
    whole = answer.test
    reason = whole.reason if isinstance(whole, NotApplicable) else ""
    p_value = None if isinstance(whole, NotApplicable) else whole.p_value
    cells = _cells(month, p_value, answer.degrees_of_freedom, alarm, reason)
    for test, day in zip(tests, days, strict=True):
        cells += _cells(
            day.isoformat(), test.p_value, test.degrees_of_freedom, test.alarm, test.reason
        )
    return cells


def _cells(
    period: str, p_value: float | None, freedom: int, alarm: Alarm | None, reason: str
) -> list[Cell]:
    numbers = {
        "p_value": p_value,
        "degrees_of_freedom": float(freedom),
        "largest": alarm.largest if alarm is not None else None,
        "limit": alarm.limit if alarm is not None else None,
    }
    why = reason or "nothing is checked"
    cells = [
        Cell(
            table=TABLE,
            period=period,
            row=ROW,
            column=column,
            value=value,
            unit="-",
            basis="computed" if value is not None else "",
            reason="" if value is not None else why,
        )
        for column, value in numbers.items()
    ]
    word = "none" if alarm is None else "raised" if alarm.raised else "not raised"
    return [*cells, Cell(table=TABLE, period=period, row=ROW, column="alarm", text=word)]
