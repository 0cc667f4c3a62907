"""What can be seen is stated before any fault, and simulation agrees with it."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from recon.flowsheet.balances import Amount, Stock
from recon.flowsheet.network import MASS, Flowsheet, Node, Stream
from recon.reconcile.problem import Draw, Effect, Measurement, MeasurementKind, Part, Problem
from recon.reconcile.read import reconcile
from recon.solve.closed_form import ClosedForm
from recon.suspects.visibility import Seen, changes, visibility
from tests.networks import EXCHANGER_ENDS, metered, network

TRUE = dict(zip(EXCHANGER_ENDS, [100.0, 64.0, 36.0, 64.0, 36.0, 100.0], strict=True))


def table(problem: Problem, **options: object) -> dict[str, Seen]:
    asked = {"days": 1, "level": 0.05, **options}
    rows = visibility(reconcile(problem, ClosedForm()), ClosedForm(), **asked)  # type: ignore[arg-type]
    return {s.name: s for s in rows}


def test_share_and_smallest_fault_follow_the_formula() -> None:
    seen = table(metered(network(EXCHANGER_ENDS), TRUE))["F2"]
    assert seen.share == pytest.approx(2 / 3)
    assert seen.smallest == pytest.approx((2.689 + 0.8416) / (2 / 3) ** 0.5, abs=0.03)
    assert seen.state == "seen"
    assert seen.relative == pytest.approx((seen.smallest or 0) / 64.0)


def test_power_at_the_smallest_fault_is_four_in_five() -> None:
    problem = metered(network(EXCHANGER_ENDS), TRUE)
    seen = table(problem)["F2"]
    random = np.random.default_rng(1)
    t = random.standard_normal(40_000) + (seen.smallest or 0.0) * seen.share**0.5
    limit = (seen.smallest or 0.0) * seen.share**0.5 - 0.8416
    assert float(np.mean(np.abs(t) > limit)) == pytest.approx(0.80, abs=0.01)


def test_days_help_until_what_is_shared_is_all_that_is_left() -> None:
    sheet = network({"a": (None, "n"), "b": (None, "n"), "c": ("n", None)})
    problem = metered(sheet, {"a": 60.0, "b": 40.0, "c": 100.0})
    alone = [table(problem, days=n)["Fa"].smallest or 0.0 for n in (1, 4, 100)]
    assert alone[0] / alone[1] == pytest.approx(2.0, rel=1e-6)
    assert alone[0] / alone[2] == pytest.approx(10.0, rel=1e-6)
    shared = replace(
        problem,
        measurements=tuple(
            replace(m, effects=(Effect(draw=0, factor=1.0, relative=True),))
            if m.name == "Fa"
            else m
            for m in problem.measurements
        ),
        draws=(Draw(source="belt", first=1, u=0.05),),
    )
    floor = [table(shared, days=n)["Fc"].smallest or 0.0 for n in (100, 10_000)]
    assert floor[0] / floor[1] < 1.2
    daily = [
        table(shared, days=n, lasting={"belt": 1.0})["Fc"].smallest or 0.0 for n in (100, 10_000)
    ]
    assert daily[0] / daily[1] == pytest.approx(10.0, rel=1e-3)


def bin_day() -> Problem:
    sheet = Flowsheet(
        quantities=(MASS,),
        nodes=(Node(name="BIN", conserves=(MASS,), stock=True),),
        streams=(
            Stream(name="A", source=None, target="BIN", carries=(MASS,)),
            Stream(name="B", source="BIN", target=None, carries=(MASS,)),
        ),
    )

    def of(name: str, unknown: Amount | Stock, value: float, u: float) -> Measurement:
        stock = isinstance(unknown, Stock)
        return Measurement(
            name=name,
            period=1,
            kind=MeasurementKind.STOCK if stock else MeasurementKind.METER,
            parts=(Part(of=((unknown, 1.0),)),),
            value=value,
            u=u,
        )

    return Problem(
        flowsheets=(sheet,),
        measurements=(
            of("A", Amount(1, "A", MASS), 100.0, 1.0),
            of("B", Amount(1, "B", MASS), 100.0, 1.0),
            of("opening", Stock(0, "BIN", MASS), 500.0, 10.0),
            of("closing", Stock(1, "BIN", MASS), 500.0, 10.0),
        ),
    )


def test_between_surveys_a_day_shows_nothing_and_a_month_shows_a_constant_bias() -> None:
    """One degree of freedom: in - out = change of stock; variance (1 + 1)/n + 200/n^2."""
    assert table(bin_day(), days=1)["A"].state == "cannot be checked"
    month = table(bin_day(), days=30, surveyed=True)["A"]
    spread = (2 / 30 + 200 / 30**2) ** 0.5
    assert month.smallest == pytest.approx((1.96 + 0.8416) * spread, rel=0.02)
    assert set(month.partners) == {"B", "opening", "closing", "leak at BIN"}
    assert month.identifiable is None


def test_a_new_instrument_changes_what_can_be_seen() -> None:
    sheet = network({"a": (None, "n"), "b": (None, "n"), "c": ("n", None)})
    few = metered(sheet, {"a": 60.0, "c": 100.0})
    more = metered(sheet, {"a": 60.0, "b": 40.0, "c": 100.0})
    before, after = (
        visibility(reconcile(p, ClosedForm()), ClosedForm(), days=1, level=0.05)
        for p in (few, more)
    )
    said = changes(before, after)
    assert any(s.startswith("Fa: cannot be checked -> seen from") for s in said)
    assert any(s.startswith("Fb: seen from") and s.endswith("(new)") for s in said)
    assert "Fb: no longer measured" in changes(after, before)
