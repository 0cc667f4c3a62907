"""Readings become amounts of a plant day: by time, over covered running time."""

from __future__ import annotations

import time
from dataclasses import replace
from datetime import date

import numpy as np
import pytest
from scipy.integrate import quad

from recon.declare.site import Step
from recon.ingest.integrate import integrate_day
from recon.ingest.rows import Quality, Series
from recon.ingest.said import read_back
from tests.ingest.series import (
    DAY,
    HOUR,
    MINUTE,
    ON_BELT,
    RUNS,
    SIGNAL,
    TIMES,
    at_hours,
    calendar,
    day_of,
    micros,
    rate,
    series,
    site_of,
    start_of,
)

WHOLE_DAY = 288


def test_a_constant_rate_gives_rate_times_24_hours() -> None:
    days, _ = day_of([rate()], [series(np.full(WHOLE_DAY, 50.0))])
    assert days["FI-1"].amount == pytest.approx(1200.0, rel=1e-14)
    assert days["FI-1"].covered_hours == pytest.approx(24.0)
    assert days["FI-1"].mean == pytest.approx(50.0)


def test_a_step_holds_to_the_next_reading_however_uneven_they_are() -> None:
    days, _ = day_of([rate()], [at_hours([0, 1, 3, 8, 20], [10.0, 20.0, 30.0, 40.0, 50.0])])
    assert days["FI-1"].amount == pytest.approx(10 * 1 + 20 * 2 + 30 * 5 + 40 * 12 + 50 * 4)


def test_a_linear_tag_is_integrated_as_scipy_integrates_its_interpolation() -> None:
    hours = [0.0, 1.5, 4.0, 9.0, 15.5, 24.0]
    values = [10.0, 24.0, 18.0, 33.0, 21.0, 30.0]
    days, _ = day_of([rate(interpolation="linear")], [at_hours(hours, values)])
    # outside judge: adaptive quadrature of scipy over numpy's own interpolation
    expected, _ = quad(lambda h: np.interp(h, hours, values), 0, 24, points=hours[1:-1])
    assert days["FI-1"].amount == pytest.approx(expected, rel=1e-10)


def test_the_product_of_two_linear_tags_is_exact_at_the_union_of_their_times() -> None:
    f_at, f = [0.0, 5.0, 11.0, 24.0], [100.0, 80.0, 120.0, 90.0]
    q_at, q = [0.0, 3.0, 13.0, 24.0], [20.0, 31.0, 25.0, 36.0]
    flow = rate(interpolation="linear", unit="kNm3/h", chain=(TIMES,))
    strength = rate("QI-1", interpolation="linear", unit="%")
    days, _ = day_of([flow, strength], [at_hours(f_at, f), at_hours(q_at, q, "QI-1")])
    expected, _ = quad(
        lambda h: np.interp(h, f_at, f) * np.interp(h, q_at, q) / 100,
        0,
        24,
        points=[3.0, 5.0, 11.0, 13.0],
    )
    assert days["FI-1"].amount == pytest.approx(expected, rel=1e-10)


def test_a_slurry_is_multiplied_reading_by_reading_and_not_mean_by_mean() -> None:
    volume = rate(unit="m3/h", chain=(Step(by="slurry", tag="DI-1", value=2.8),))
    density = rate("DI-1", unit="t/m3")
    flows, rhos = [100.0, 300.0], [1.10, 1.40]
    days, _ = day_of([volume, density], [at_hours([0, 12], flows), at_hours([0, 12], rhos, "DI-1")])
    # V (rho - 1) s / (s - 1), twice twelve hours
    share = 2.8 / 1.8
    by_hand = 12 * (100 * 0.10 + 300 * 0.40) * share
    assert days["FI-1"].amount == pytest.approx(by_hand)
    assert days["FI-1"].amount != pytest.approx(24 * 200 * 0.25 * share)


def test_a_product_covers_only_time_in_which_both_are_known() -> None:
    flow = rate(unit="kNm3/h", chain=(TIMES,))
    strength = rate("QI-1", unit="%")
    half = series(np.full(WHOLE_DAY, 25.0), tag="QI-1", bad=range(144, WHOLE_DAY))
    days, _ = day_of([flow, strength], [series(np.full(WHOLE_DAY, 80.0)), half])
    assert days["FI-1"].covered_hours == pytest.approx(12.0)
    assert days["FI-1"].amount == pytest.approx(12 * 80 * 0.25)


def test_the_value_in_force_at_the_start_is_carried_in() -> None:
    before = at_hours([-1.0], [40.0])
    after = at_hours([6.0, 12.0, 18.0], [60.0, 60.0, 60.0])
    together = at_hours([-1.0, 6.0, 12.0, 18.0], [40.0, 60.0, 60.0, 60.0])
    site = site_of(rate())
    one, _ = integrate_day(site, calendar(), DAY, {"FI-1": after}, {"FI-1": before})
    two, _ = integrate_day(site, calendar(), DAY, {"FI-1": together})
    assert one[0].amount == pytest.approx(6 * 40 + 18 * 60)
    assert one == two


@pytest.mark.parametrize(
    ("day", "hours"), [(date(2026, 3, 28), 23.0), (date(2026, 10, 24), 25.0), (DAY, 24.0)]
)
def test_days_have_23_24_or_25_hours(day: date, hours: float) -> None:
    # plant days begin at 06:00, so the clock changes within the day before the Sunday's cut
    start = start_of(day)
    readings = series(np.full(12 * 26, 10.0), first=start - HOUR // 2)
    days, _ = day_of([rate()], [readings], day=day)
    assert days["FI-1"].day_hours == hours
    assert days["FI-1"].amount == pytest.approx(10.0 * hours)


def test_bad_readings_are_gaps_and_never_zeros() -> None:
    days, findings = day_of([rate()], [series(np.full(WHOLE_DAY, 50.0), bad=range(72))])
    assert days["FI-1"].covered_hours == pytest.approx(18.0)
    assert days["FI-1"].mean == pytest.approx(50.0)
    assert days["FI-1"].bad == 72
    assert {"bad-quality", "gap"} <= {f.code for f in findings}


def test_uncertain_readings_count_and_are_said() -> None:
    readings = series(np.full(WHOLE_DAY, 50.0))
    readings.quality[:100] = Quality.UNCERTAIN
    days, findings = day_of([rate()], [readings])
    assert days["FI-1"].covered_hours == pytest.approx(24.0)
    assert [f.code for f in findings if f.code == "uncertain-quality"]


def test_a_reading_out_of_range_is_set_aside_with_its_value() -> None:
    values = np.full(WHOLE_DAY, 50.0)
    values[100:104] = 4200.0
    days, findings = day_of([rate(low=0.0, high=120.0)], [series(values)])
    assert days["FI-1"].mean == pytest.approx(50.0)
    (found,) = [f for f in findings if f.code == "out-of-range"]
    assert "4 readings lie outside 0 to 120 t/h, the furthest 4200 t/h" in found.text


def test_a_tag_that_went_silent_is_not_held_for_the_rest_of_the_day() -> None:
    days, findings = day_of([rate()], [series(np.full(36, 50.0))])  # three hours, then nothing
    assert days["FI-1"].covered_hours == pytest.approx(3.0, abs=1.0)
    assert [f.code for f in findings if f.code == "gap"]


def test_a_tag_silent_since_yesterday_is_not_covered() -> None:
    days, _ = day_of([rate()], [at_hours([-2.0], [50.0])])
    assert (days["FI-1"].amount, days["FI-1"].covered_hours) == (None, 0.0)


def test_only_running_time_counts() -> None:
    values = np.full(WHOLE_DAY, 50.0)
    values[72:144] = 1.3  # a zero shift shows while the stream stands
    signal = at_hours([-5.0, 6.0, 12.0], [1.0, 0.0, 1.0], "RUN")
    days, findings = day_of([ON_BELT, SIGNAL], [series(values), signal], streams=[RUNS])
    assert days["RUN"].amount == pytest.approx(18.0)
    assert days["FI-1"].running_hours == pytest.approx(18.0)
    assert days["FI-1"].amount == pytest.approx(18 * 50.0)
    (shift,) = [f for f in findings if f.code == "zero-shift"]
    assert "reads 1.3 t/h (median) while its stream stands" in shift.text


def test_a_run_signal_that_did_not_change_holds_all_day() -> None:
    signal = at_hours([-100.0], [0.0], "RUN")
    days, _ = day_of([ON_BELT, SIGNAL], [series(np.zeros(WHOLE_DAY)), signal], streams=[RUNS])
    assert (days["RUN"].covered_hours, days["RUN"].amount) == (24.0, 0.0)
    assert days["FI-1"].running_hours == 0.0


def test_findings_travel_with_the_tag_day() -> None:
    values = np.full(WHOLE_DAY, 50.0)
    values[100] = 4200.0
    days, findings = day_of([rate(high=120.0)], [series(values)])
    again = read_back(days["FI-1"].said, None)
    assert tuple(again) == tuple(findings)
    assert {f.period for f in read_back(days["FI-1"].said, 14)} == {14}


def test_cutting_readings_finer_changes_nothing() -> None:
    rng = np.random.default_rng(5)
    values = rng.uniform(10, 90, WHOLE_DAY)
    coarse, _ = day_of([rate()], [series(values)])
    fine, _ = day_of([rate()], [series(np.repeat(values, 5), every=MINUTE)])
    assert fine["FI-1"].amount == pytest.approx(coarse["FI-1"].amount, rel=1e-12)


def test_another_unit_scales_the_amount_and_nothing_else() -> None:
    rng = np.random.default_rng(6)
    values = rng.uniform(10, 90, WHOLE_DAY)
    tonnes, _ = day_of([rate()], [series(values)])
    kilos, _ = day_of([rate(unit="kg/h")], [series(values * 1000)])
    assert kilos["FI-1"].amount == pytest.approx(1000 * (tonnes["FI-1"].amount or 0), rel=1e-12)
    assert kilos["FI-1"].covered_hours == tonnes["FI-1"].covered_hours


def test_days_of_a_long_series_add_up_to_its_integral() -> None:
    rng = np.random.default_rng(8)
    values = rng.uniform(10, 90, 5 * WHOLE_DAY)
    whole = series(values)
    total = 0.0
    for k in range(5):
        days, _ = day_of([rate()], [whole], day=date(2026, 1, 14 + k))
        total += days["FI-1"].amount or 0.0
    assert total == pytest.approx(float(values.sum()) / 12, rel=1e-12)


def test_readings_flow_at_millions_a_second() -> None:
    rng = np.random.default_rng(9)
    day = series(rng.uniform(10, 90, 1440), every=MINUTE)
    tags = [f"FI-{i}" for i in range(200)]
    site = site_of(*(rate(tag) for tag in tags))
    readings = {tag: replace(day, tag=tag) for tag in tags}
    integrate_day(site, calendar(), DAY, readings)
    begun = time.process_time()
    integrate_day(site, calendar(), DAY, readings)
    speed = 200 * 1440 / (time.process_time() - begun)
    assert speed > 2e5  # a tenth of what an idle core does, so a busy machine does not fail


def test_a_reading_from_the_future_is_set_aside() -> None:
    readings = series(np.full(WHOLE_DAY, 50.0))
    ahead = readings.known_at.copy()
    ahead[200:210] = readings.at[200:210] - HOUR
    days, findings = day_of([rate()], [replace(readings, known_at=ahead)])
    assert days["FI-1"].bad == 10
    (found,) = [f for f in findings if f.code == "future-reading"]
    assert "up to 1.00 h after they became known" in found.text


def test_micros_of_a_day_start_are_its_instant() -> None:
    assert start_of() == micros(calendar().start(DAY))
    assert isinstance(series([1.0]), Series)
