"""Two engines, one problem: both agree with the textbook formula and with each other."""

from __future__ import annotations

import numpy as np
import pytest

from recon.errors import ContradictionError
from recon.flowsheet.balances import Amount
from recon.reconcile.accept import check
from recon.reconcile.problem import Measurement, MeasurementKind, Part, Problem
from recon.reconcile.read import reconcile
from recon.reconcile.solver import Engine
from recon.reconcile.state import state_of
from recon.solve.closed_form import ClosedForm
from recon.solve.convex import Convex
from tests.networks import linear_closed_form, network, random_network, with_noise

ENGINES: list[Engine] = [ClosedForm(), Convex()]


@pytest.mark.parametrize("engine", ENGINES, ids=lambda e: e.name)
@pytest.mark.parametrize("seed", range(4))
def test_linear_networks_agree_with_the_textbook_formula(engine: Engine, seed: int) -> None:
    random = np.random.default_rng(seed)
    problem = with_noise(
        random_network(random, nodes=6, metered_share=1.0, worst=0.02).problem, random
    )
    expected = linear_closed_form(problem)
    answer = reconcile(problem, engine)
    u = {m.parts[0].of[0][0]: m.u for m in problem.measurements}
    for estimate in answer.estimates:
        assert not estimate.at_bound, "the formula knows no bounds; draw another network"
        unknown = estimate.unknown
        assert isinstance(unknown, Amount)
        assert estimate.value == pytest.approx(expected[unknown], abs=1e-6 * (u[unknown] or 1.0))


@pytest.mark.parametrize("seed", range(6))
def test_engines_agree_on_flow_times_assay(seed: int) -> None:
    random = np.random.default_rng(100 + seed)
    truth = random_network(random, nodes=5, components=3, metered_share=0.7)
    problem = with_noise(truth.problem, random)
    first, second = (engine.solve(state_of(problem)) for engine in ENGINES)
    assert check(first).reasons == ()
    assert check(second).reasons == ()
    assert first.objective == pytest.approx(second.objective, rel=1e-8, abs=1e-8)
    moved = first.local.data @ (
        np.concatenate([first.point.x - second.point.x, np.zeros(0)]) / first.local.scale
    )
    assert np.abs(moved).max() < 1e-6


@pytest.mark.parametrize("engine", ENGINES, ids=lambda e: e.name)
def test_perfect_data_is_untouched(engine: Engine) -> None:
    truth = random_network(np.random.default_rng(7), nodes=6, components=2, metered_share=0.9)
    answer = reconcile(truth.problem, engine)
    assert answer.objective < 1e-12
    for estimate in answer.estimates:
        if estimate.determined and not estimate.fraction and isinstance(estimate.unknown, Amount):
            assert estimate.value == pytest.approx(truth.amounts[estimate.unknown], rel=1e-6)


def test_adjusted_uncertainty_never_exceeds_measured_uncertainty() -> None:
    random = np.random.default_rng(11)
    problem = with_noise(random_network(random, nodes=6, metered_share=1.0).problem, random)
    answer = reconcile(problem, ClosedForm())
    after = {e.unknown: e.u for e in answer.estimates if not e.fraction}
    for row in answer.measurements:
        unknown = row.measurement.parts[0].of[0][0]
        assert (after[unknown] or 0.0) <= (row.u or 0.0) * (1 + 1e-12)


@pytest.mark.parametrize("engine", ENGINES, ids=lambda e: e.name)
def test_held_figures_that_contradict_are_named(engine: Engine) -> None:
    sheet = network({"in": (None, "tank"), "out": ("tank", None)})

    def held(stream: str, value: float) -> Measurement:
        return Measurement(
            name=f"custody {stream}",
            period=1,
            kind=MeasurementKind.METER,
            parts=(Part(of=((Amount(1, stream, "mass"), 1.0),)),),
            value=value,
            u=None,
            held=True,
        )

    problem = Problem(flowsheets=(sheet,), measurements=(held("in", 100.0), held("out", 90.0)))
    with pytest.raises(
        ContradictionError, match=r"cannot be met together. Open: .*(tank mass|custody)"
    ):
        reconcile(problem, engine)


@pytest.mark.parametrize("engine", ENGINES, ids=lambda e: e.name)
def test_a_negative_reading_ends_at_the_bound_and_says_so(engine: Engine) -> None:
    sheet = network({"in": (None, "tee"), "a": ("tee", None), "b": ("tee", None)})
    readings = {"in": 100.0, "a": 103.0, "b": -4.0}
    problem = Problem(
        flowsheets=(sheet,),
        measurements=tuple(
            Measurement(
                name=s,
                period=1,
                kind=MeasurementKind.METER,
                parts=(Part(of=((Amount(1, s, "mass"), 1.0),)),),
                value=v,
                u=1.0,
            )
            for s, v in readings.items()
        ),
    )
    answer = reconcile(problem, engine)
    b = next(e for e in answer.estimates if e.unknown == Amount(1, "b", "mass"))
    assert b.value == pytest.approx(0.0, abs=1e-9)
    assert b.at_bound
    assert answer.test_objective < answer.objective
