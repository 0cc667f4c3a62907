"""Charts keep their stated rate, find a slow drift, date it, and name a lasting fault."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray

from recon.reconcile.read import reconcile
from recon.solve.closed_form import ClosedForm
from recon.suspects.charts import cusum, moving_average, plant_limit, run_charts
from recon.suspects.days import Baseline, DayEvidence, baseline_of, day_evidence
from recon.suspects.explain import explain, setting_of
from recon.suspects.groups import group_tests
from recon.suspects.lasting import carried_odds, evidence_of_days
from recon.suspects.onset import before_and_after, onset_of
from recon.suspects.prior import log_odds_of
from recon.suspects.signatures import signatures_of
from tests.bench.sites import RECYCLE_ENDS
from tests.networks import metered, network

FLOWS = {"1": 100.0, "2": 130.0, "3": 150.0, "4": 120.0, "5": 30.0, "6": 100.0, "7": 20.0}
SIGMA = {k: 0.02 * v for k, v in FLOWS.items()}
Array = NDArray[np.float64]


def template() -> DayEvidence:
    return day_evidence(
        reconcile(metered(network(RECYCLE_ENDS), FLOWS, u=SIGMA), ClosedForm()), ClosedForm(), day=0
    )


def days_of(
    random: np.random.Generator, errors: Array, *, missing: dict[int, str] | None = None
) -> list[DayEvidence]:
    """One day a row of errors, in standard uncertainties; a missing stream has no reading."""
    result = []
    for day, row in enumerate(errors, start=1):
        readings = {
            k: v + SIGMA[k] * float(e) for (k, v), e in zip(FLOWS.items(), row, strict=True)
        }
        gone = (missing or {}).get(day)
        if gone is not None:
            del readings[gone]
        problem = metered(network(RECYCLE_ENDS), readings, u=SIGMA)
        result.append(day_evidence(reconcile(problem, ClosedForm()), ClosedForm(), day=day))
    return result


def simulated(day: DayEvidence, random: np.random.Generator, faults: Array) -> list[DayEvidence]:
    """Days with the same readings present, their information drawn directly; faults (T, C)."""
    values, vectors = np.linalg.eigh(day.M)
    keep = values > 1e-9 * values.max()
    root = vectors[:, keep] * np.sqrt(values[keep])
    return [
        replace(day, day=t, N=day.M @ fault + root @ random.standard_normal(root.shape[1]))
        for t, fault in enumerate(faults, start=1)
    ]


def calm(day: DayEvidence, days: int) -> Baseline:
    """An endless, exact baseline of like days."""
    return Baseline(
        keys=day.keys,
        days=days,
        M=day.M * days,
        inverse=np.zeros_like(day.M),
        constant=np.zeros(len(day.keys)),
        persistence=0.0,
    )


def test_a_constant_error_is_taken_out_even_when_a_reading_is_missing() -> None:
    random = np.random.default_rng(1)
    bias = np.array([0.0, 3.0, 0.0, 0.0, -2.0, 0.0, 0.0])
    errors = random.standard_normal((16, 7)) * 1e-6 + bias
    days = days_of(random, errors, missing={13: "3", 15: "6"})
    charts = run_charts(days[10:], baseline_of(days[:10]), limit=3.0)
    assert max(abs(c.score) for c in charts) < 1e-3


def test_a_missing_reading_does_not_move_the_chart_that_leads() -> None:
    """The information of the days on which the reading was there is kept."""
    random = np.random.default_rng(2)
    errors = random.standard_normal((26, 7))
    errors[14:, 3] += 6.0
    missing = dict.fromkeys(range(16, 27, 2), "2")
    days = days_of(random, errors, missing=missing)
    charts = run_charts(days[14:], baseline_of(days[:14]), limit=3.5)
    assert charts[-1].leading == ("meter", "F4")
    assert charts[-1].raised


def test_all_charts_together_alarm_as_rarely_as_stated() -> None:
    """Fresh fault-free days after a 60-day baseline; mean time between alarms of 120 days."""
    day = template()
    random = np.random.default_rng(3)
    lengths, alarms = 0, 0
    limit = None
    for _ in range(30):
        quiet = simulated(day, random, np.zeros((260, len(day.keys))))
        known = replace(baseline_of(quiet[:60]), persistence=0.0)
        limit = limit or plant_limit(known, between_alarms=120.0)
        charts = run_charts(quiet[60:], known, limit)
        first = next((i for i, c in enumerate(charts, start=1) if c.raised), None)
        lengths += first or len(charts)
        alarms += first is not None
    assert lengths / max(alarms, 1) == pytest.approx(120.0, rel=0.5)


def test_persistence_from_day_to_day_widens_the_limit() -> None:
    known = calm(template(), 60)
    limits = [plant_limit(known, between_alarms=100.0, persistence=p) for p in (0.0, 0.4)]
    assert limits[1] > limits[0] * 1.2


def test_persistence_is_estimated_from_the_baseline() -> None:
    day = template()
    random = np.random.default_rng(4)
    values, vectors = np.linalg.eigh(day.M)
    root = vectors[:, -4:] * np.sqrt(values[-4:])
    for phi in (0.5, 0.0):
        noise = [random.standard_normal(4)]
        for _ in range(299):
            noise.append(phi * noise[-1] + (1 - phi**2) ** 0.5 * random.standard_normal(4))
        days = [replace(day, day=t, N=root @ z) for t, z in enumerate(noise)]
        assert baseline_of(days).persistence == pytest.approx(phi, abs=0.1)


def test_a_step_is_dated_sized_and_called_a_step() -> None:
    day = template()
    faults = np.zeros((60, len(day.keys)))
    i = day.keys.index(("meter", "F4"))
    faults[30:, i] = 6.0
    days = simulated(day, np.random.default_rng(5), faults)
    found = onset_of(days, calm(day, 60), ("meter", "F4"))
    assert found is not None
    assert found.earliest <= 31 <= found.latest
    assert found.shape == "step"
    assert found.size == pytest.approx(6.0, abs=3 * found.u)


def test_a_drift_is_told_from_a_step() -> None:
    day = template()
    faults = np.zeros((60, len(day.keys)))
    i = day.keys.index(("meter", "F4"))
    faults[20:, i] = 0.4 * np.arange(1, 41)
    days = simulated(day, np.random.default_rng(6), faults)
    found = onset_of(days, calm(day, 60), ("meter", "F4"))
    assert found is not None
    assert (found.shape, found.earliest <= 21 <= found.latest) == ("drift", True)
    assert found.size == pytest.approx(16.0, abs=4 * found.u)


def test_an_event_is_tested_at_its_own_rate() -> None:
    random = np.random.default_rng(7)
    day = template()
    false = 0
    for _ in range(400):
        days = simulated(day, random, np.zeros((30, len(day.keys))))
        said = before_and_after(days[:20], days[20:], ("meter", "F4"), reference=120.0, level=0.05)
        false += said.changed
    assert false / 400 == pytest.approx(0.05, abs=3 * (0.05 * 0.95 / 400) ** 0.5)


def test_an_event_not_yet_visible_says_when_it_would_be() -> None:
    random = np.random.default_rng(8)
    days = simulated(template(), random, np.zeros((62, len(template().keys))))
    said = before_and_after(days[:60], days[60:], ("meter", "F4"), reference=120.0, unit="t")
    assert not said.changed
    assert said.days_to_see is not None
    assert said.text == f"F4: not yet visible; 2% would show in {said.days_to_see} days"
    short = before_and_after(days[:2], days[2:4], ("meter", "F4"), reference=120.0)
    assert "would never show with the 2 days before the event" in short.text
    assert "nothing checks it" in before_and_after(days, days, ("meter", "X"), reference=1).text


def test_a_calibration_that_moved_the_meter_is_seen() -> None:
    day = template()
    faults = np.zeros((40, len(day.keys)))
    faults[20:, day.keys.index(("meter", "F4"))] = -5.0
    days = simulated(day, np.random.default_rng(9), faults)
    said = before_and_after(days[:20], days[20:], ("meter", "F4"), reference=120.0)
    assert said.changed
    assert said.change == pytest.approx(-5.0, abs=3 * (said.u or 0.0))


def test_a_lasting_fault_is_named_from_the_days_together() -> None:
    """Too small for any single day; twenty days name it."""
    answer = reconcile(metered(network(RECYCLE_ENDS), FLOWS, u=SIGMA), ClosedForm())
    signatures = signatures_of(answer)
    setting = setting_of(signatures.candidates, signatures.columns, signatures.classes)
    day = template()
    faults = np.zeros((60, len(day.keys)))
    faults[40:, day.keys.index(("meter", "F4"))] = 1.5 * SIGMA["4"]
    days = simulated(day, np.random.default_rng(10), faults)
    evidence = evidence_of_days(days[40:], baseline_of(days[:40]), setting)
    found = explain(evidence, setting, log_odds_of(signatures, 0.05))
    assert [setting.candidates[b.candidate].name for b in found.blamed] == ["F4"]
    assert found.blamed[0].probability > 0.5


def test_yesterday_is_prior_for_today_and_innocents_keep_theirs() -> None:
    answer = reconcile(metered(network(RECYCLE_ENDS), FLOWS, u=SIGMA), ClosedForm())
    signatures = signatures_of(answer)
    setting = setting_of(signatures.candidates, signatures.columns, signatures.classes)
    odds = log_odds_of(signatures, 0.05)
    after = carried_odds(odds, setting, {("meter", "F4"): 0.9})
    for choice, owner in enumerate(setting.choices.owner):
        raised = (
            setting.candidates[owner].name == "F4" and setting.candidates[owner].kind == "meter"
        )
        assert (after[choice] > odds[choice]) == raised


def test_groups_are_counted() -> None:
    random = np.random.default_rng(11)
    crews = [str(v) for v in random.choice(["A", "B", "C"], size=120)]
    weekday = [str(d % 7) for d in range(120)]
    values = random.standard_normal(120) + np.where(np.array(crews) == "B", 1.0, 0.0)
    first = group_tests(values, {"crew": crews, "weekday": weekday})[0]
    assert (first.grouping, first.group, first.tests) == ("crew", "B", 10)
    assert first.p_counted < 0.01
    false = 0
    for _ in range(300):
        quiet = random.standard_normal(120)
        false += group_tests(quiet, {"crew": crews, "weekday": weekday})[0].p_counted < 0.05
    assert false / 300 == pytest.approx(0.05, abs=3.5 * (0.05 * 0.95 / 300) ** 0.5)


def first_alarms(chart: str, shift: float, runs: int, horizon: int, **limits: float) -> float:
    """Mean run length by simulation, runs vectorised over the same recursions as the product's."""
    random = np.random.default_rng(12)
    up, down, e = (
        np.full(runs, limits.get("start", 0.0)),
        np.full(runs, limits.get("start", 0.0)),
        np.zeros(runs),
    )
    first = np.zeros(runs)
    spread = (limits.get("weight", 1.0) / (2 - limits.get("weight", 1.0))) ** 0.5
    for t in range(1, horizon + 1):
        d = random.standard_normal(runs) + shift
        if chart == "cusum":
            up = np.maximum(0.0, up + d - limits["slack"])
            down = np.maximum(0.0, down - d - limits["slack"])
            over = (up > limits["limit"]) | (down > limits["limit"])
        else:
            e += limits["weight"] * (d - e)
            over = np.abs(e) > limits["limit"] * spread
        first[(first == 0) & over] = t
        if first.all():
            break
    assert first.all(), "horizon too short"
    return float(first.mean())


def test_recursions_of_the_check_are_those_of_the_charts() -> None:
    series = np.random.default_rng(13).standard_normal(400) + 0.4
    up, down, e = 0.0, 0.0, 0.0
    hits: dict[str, int] = {}
    for t, d in enumerate(series, start=1):
        up, down = max(0.0, up + d - 0.5), max(0.0, down - d - 0.5)
        e += 0.1 * (d - e)
        if up > 4 or down > 4:
            hits.setdefault("cusum", t)
        if abs(e) > 2.814 * (0.1 / 1.9) ** 0.5:
            hits.setdefault("ewma", t)
    assert cusum(series, slack=0.5, limit=4.0) == hits["cusum"]
    assert moving_average(series, weight=0.1, limit=2.814) == hits["ewma"]
    assert cusum(np.zeros(5), slack=0.5, limit=4.0) is None
    assert moving_average(np.zeros(5), weight=0.1, limit=2.8) is None


@pytest.mark.parametrize(("shift", "length"), [(0.0, 168.0), (0.5, 26.6), (1.0, 8.38), (2.0, 3.34)])
def test_cusum_run_lengths_are_the_published_ones(shift: float, length: float) -> None:
    """Lucas and Crosier 1982, Table 1 (k 0.5, h 4, two-sided), source found."""
    found = first_alarms("cusum", shift, 4_000, 4_000, slack=0.5, limit=4.0)
    assert found == pytest.approx(length, rel=0.06)


@pytest.mark.parametrize(("shift", "length"), [(0.0, 149.0), (1.0, 5.29)])
def test_cusum_with_a_head_start_has_the_published_run_lengths(shift: float, length: float) -> None:
    """Same table, head start 2."""
    found = first_alarms("cusum", shift, 4_000, 4_000, slack=0.5, limit=4.0, start=2.0)
    assert found == pytest.approx(length, rel=0.06)


@pytest.mark.slow
@pytest.mark.parametrize(("shift", "length"), [(0.0, 465.0), (0.25, 139.0), (1.0, 10.4)])
def test_cusum_h_five_has_the_remembered_run_lengths(shift: float, length: float) -> None:
    """Montgomery, h = 5 (from memory, recomputed)."""
    found = first_alarms("cusum", shift, 8_000, 12_000, slack=0.5, limit=5.0)
    assert found == pytest.approx(length, rel=0.04)


@pytest.mark.slow
@pytest.mark.parametrize(
    ("weight", "limit", "shift", "length"),
    [
        (0.40, 3.054, 0.0, 500.0),
        (0.20, 2.962, 0.5, 41.8),
        (0.10, 2.814, 0.0, 500.0),
        (0.10, 2.814, 0.25, 106.0),
        (0.10, 2.814, 1.0, 10.3),
        (0.05, 2.615, 0.5, 28.8),
    ],
)
def test_moving_average_run_lengths_are_the_published_ones(
    weight: float, limit: float, shift: float, length: float
) -> None:
    """Montgomery's table for 500 days, as in Lucas and Saccucci 1990 (from memory, recomputed)."""
    found = first_alarms("ewma", shift, 8_000, 12_000, weight=weight, limit=limit)
    assert found == pytest.approx(length, rel=0.04)


@pytest.mark.slow
def test_a_drift_of_a_twentieth_a_day_is_found_within_three_weeks() -> None:
    """One chart at a mean of 370 days between alarms: goal 21 days mean, 28 for nine in ten."""
    random = np.random.default_rng(14)
    found = []
    for _ in range(2_000):
        quiet = random.standard_normal(50)
        drift = random.standard_normal(200) + 0.05 * np.arange(1, 201)
        e = 0.0
        for d in quiet:
            e += 0.1 * (d - e)
        spread = (0.1 / 1.9) ** 0.5
        for t, d in enumerate(drift, start=1):
            e += 0.1 * (d - e)
            if abs(e) > 2.70 * spread:
                found.append(t)
                break
    assert float(np.mean(found)) <= 21
    assert float(np.quantile(found, 0.9)) <= 28
