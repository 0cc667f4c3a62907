"""From truth through instruments to measurements: demo and ingest mean the same errors."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from scipy.stats import chi2

from recon.demo.shapes import QUANTITIES
from recon.demo.simulate import DayObserved, simulate_days
from recon.flowsheet.balances import Amount, Linear, Unknown, balance_rows, bound_rows
from recon.ingest.build import ingest_month
from recon.ingest.given import SiteVersion
from recon.reconcile.problem import Problem
from tests.demo.made import demo_site

DAYS = 14
SURE = 1e-5


def stated(day: DayObserved) -> Problem:
    version = SiteVersion(digest="demo", site=demo_site())
    return ingest_month([version], [day.day], day.tag_days, day.records).problem


def true_of(day: DayObserved, unknown: Unknown) -> float:
    q = QUANTITIES.index(unknown.quantity)
    if isinstance(unknown, Amount):
        return float(day.truth.amounts(unknown.stream)[day.index, q])
    return float(day.truth.at_cuts(unknown.node)[day.index + unknown.boundary, q])


def total(day: DayObserved, form: Linear) -> float:
    return sum(c * true_of(day, u) for u, c in form)


def misfits(day: DayObserved, problem: Problem) -> Iterator[tuple[str, float]]:
    """Give each measurement less the true value with its true shared errors, in its own u."""
    for m in problem.measurements:
        true = sum(
            p.share * total(day, p.of) / (total(day, p.over) if p.over else 1.0) for p in m.parts
        )
        expected = true
        for effect in m.effects:
            offset = day.offsets.by_day[problem.draws[effect.draw].source][day.index]
            expected += effect.factor * offset * (true if effect.relative else 1.0)
        assert m.u is not None
        yield m.name, (m.value - expected) / m.u


def test_measurements_err_from_the_truth_by_their_stated_uncertainty() -> None:
    z: list[float] = []
    for day in simulate_days(demo_site(), days=DAYS, seed=21):
        problem = stated(day)
        for row in (*balance_rows(problem.flowsheets), *problem.relations):
            assert abs(total(day, row.form) - row.equals) < 1e-9, row.name
        for row in bound_rows(problem.flowsheets):
            assert not total(day, row.form) - row.equals < -1e-9, row.name
        found = list(misfits(day, problem))
        assert len(found) > 150
        for name, one in found:
            assert abs(one) < 6.0, (name, day.day)
        z += [one for _, one in found]
    n, squares = len(z), float(np.sum(np.square(z)))
    # a day's median stands for the size of the day: a percent or so wider than the draws
    assert chi2.ppf(SURE, n) < squares < 1.02 * chi2.ppf(1 - SURE, n), squares / n
    assert abs(np.mean(z)) < 4.5 / np.sqrt(n)
