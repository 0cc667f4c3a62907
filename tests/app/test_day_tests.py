"""A day's test comes from that day's readings alone."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.stats import kstest

from recon.app.day_tests import day_statistics
from recon.findings import Statistic
from recon.flowsheet.balances import Amount, Stock
from recon.flowsheet.network import MASS, Flowsheet, Node, Stream
from recon.ingest.statement import one_day
from recon.reconcile.problem import Draw, Effect, Measurement, MeasurementKind, Part, Problem
from recon.reconcile.read import reconcile
from recon.solve.closed_form import ClosedForm

IN, OUT, STOCK, SAMPLE = "in", "out", "stock", "sample"


def bin_over_days(
    days: int,
    *,
    bias: dict[int, float] | None = None,
    noise: NDArray[np.float64] | None = None,
    scale: bool = True,
) -> Problem:
    """A bin: 100 t in on every day, 100 t out, 500 t stock surveyed at every boundary."""
    sheet = Flowsheet(
        quantities=(MASS,),
        nodes=(Node(name="BIN", conserves=(MASS,), stock=True),),
        streams=(
            Stream(name="A", source=None, target="BIN", carries=(MASS,)),
            Stream(name="B", source="BIN", target=None, carries=(MASS,)),
        ),
    )
    errors = iter(np.zeros(3 * days + 1) if noise is None else noise)

    def meter(name: str, period: int, stream: str) -> Measurement:
        return Measurement(
            name=name,
            period=period,
            kind=MeasurementKind.METER,
            parts=(Part(of=((Amount(period, stream, MASS), 1.0),)),),
            value=100.0 + next(errors) + ((bias or {}).get(period, 0.0) if name == IN else 0.0),
            u=1.0,
            effects=(Effect(draw=0, factor=1.0, relative=True),) if scale and name == IN else (),
        )

    def survey(boundary: int) -> Measurement:
        return Measurement(
            name=f"{STOCK} {boundary}",
            period=max(boundary, 1),
            kind=MeasurementKind.STOCK,
            parts=(Part(of=((Stock(boundary, "BIN", MASS), 1.0),)),),
            value=500.0 + next(errors),
            u=1.0,
        )

    return Problem(
        flowsheets=(sheet,) * days,
        measurements=(
            *(meter(IN, p, "A") for p in range(1, days + 1)),
            *(meter(OUT, p, "B") for p in range(1, days + 1)),
            *(survey(b) for b in range(days + 1)),
        ),
        draws=(Draw(source="scale", first=1, u=0.001),) if scale else (),
    )


def test_one_day_keeps_its_meters_and_both_its_surveys() -> None:
    problem = one_day(bin_over_days(3), 2)
    assert [m.name for m in problem.measurements] == [IN, OUT, "stock 1", "stock 2"]
    boundaries = [m.parts[0].of[0][0] for m in problem.measurements[2:]]
    assert boundaries == [Stock(0, "BIN", MASS), Stock(1, "BIN", MASS)]
    assert all(m.period == 1 for m in problem.measurements)
    assert problem.draws == (Draw(source="scale", first=1, u=0.001),)


def test_a_sample_over_two_days_belongs_to_neither() -> None:
    month = bin_over_days(2)
    both = Measurement(
        name=SAMPLE,
        period=2,
        kind=MeasurementKind.METER,
        parts=(Part(of=((Amount(1, "A", MASS), 1.0), (Amount(2, "A", MASS), 1.0))),),
        value=200.0,
        u=1.0,
    )
    month = Problem(
        flowsheets=month.flowsheets,
        measurements=(*month.measurements, both),
        draws=month.draws,
    )
    for period in (1, 2):
        assert SAMPLE not in [m.name for m in one_day(month, period).measurements]


def test_a_fault_alarms_its_own_day_and_no_other() -> None:
    month = bin_over_days(3, bias={2: 20.0})
    tests = [
        day_statistics(one_day(month, p), p, engine=ClosedForm(), level=0.05) for p in (1, 2, 3)
    ]
    raised = [t.alarm.raised for t in tests if t.alarm is not None]
    assert raised == [False, True, False]
    assert IN in tests[1].suspects[0].names


def test_one_day_of_a_one_day_month_is_the_month() -> None:
    month = bin_over_days(1, bias={1: 3.0})
    whole, day = reconcile(month, ClosedForm()), reconcile(one_day(month, 1), ClosedForm())
    assert day.test_objective == pytest.approx(whole.test_objective, rel=1e-9)


def test_p_values_of_clean_days_are_uniform() -> None:
    """Two meters and two surveys of one linear balance: exactly chi-square with one degree."""
    random = np.random.default_rng(7)
    found = []
    for _ in range(120):
        month = bin_over_days(2, noise=random.standard_normal(7), scale=False)
        test = reconcile(one_day(month, 2), ClosedForm()).test
        assert isinstance(test, Statistic)
        found.append(test.p_value)
    assert kstest(found, "uniform").pvalue > 0.001
