"""Totalisers: differences, roll-overs and resets."""

from __future__ import annotations

from datetime import date

import numpy as np
import pytest

from tests.ingest.series import DAY, HOUR, at_hours, day_of, rate, series, start_of

COUNTER = rate("FQ-1", kind="totaliser", unit="t", modulus=10_000.0)


def test_a_day_is_the_difference_of_its_ends() -> None:
    readings = at_hours([-1, 5, 11, 17, 25], [100.0, 160.0, 220.0, 280.0, 360.0], "FQ-1")
    days, _ = day_of([COUNTER], [readings])
    assert days["FQ-1"].amount == pytest.approx(240.0)
    assert days["FQ-1"].covered_hours == pytest.approx(24.0)


def test_days_add_up_to_the_totaliser_without_remainder() -> None:
    rng = np.random.default_rng(3)
    counts = 500 + np.cumsum(rng.uniform(0, 9, 24 * 6))
    readings = series(counts, tag="FQ-1", every=HOUR, first=start_of() - HOUR // 3)
    total = 0.0
    for k in range(4):
        days, _ = day_of([COUNTER], [readings], day=date(2026, 1, DAY.day + k))
        total += days["FQ-1"].amount or 0.0
    ends = [(start_of() + 24 * k * HOUR) for k in (0, 4)]
    first, last = np.interp(ends, readings.at, readings.value)
    assert total == pytest.approx(last - first, rel=1e-12)


def test_a_rollover_is_bridged_by_the_modulus() -> None:
    readings = at_hours([0, 6, 12, 18, 24], [9_900.0, 9_960.0, 20.0, 80.0, 140.0], "FQ-1")
    days, findings = day_of([COUNTER], [readings])
    assert days["FQ-1"].amount == pytest.approx(240.0)
    (found,) = [f for f in findings if f.code == "totaliser-rollover"]
    assert "rolled over at 10000 t" in found.text


def test_a_reset_is_reported_and_its_span_filled_by_the_mean() -> None:
    counts = np.concatenate([3_000 + 10 * np.arange(12), 10 * np.arange(13)]).astype(float)
    days, findings = day_of([COUNTER], [series(counts, tag="FQ-1", every=HOUR)])
    assert days["FQ-1"].covered_hours == pytest.approx(23.0)
    assert days["FQ-1"].amount == pytest.approx(230.0)
    assert days["FQ-1"].mean == pytest.approx(10.0)
    (found,) = [f for f in findings if f.code == "totaliser-reset"]
    assert "fell from 3110 to 0 t" in found.text


def test_without_a_modulus_every_large_drop_is_a_reset() -> None:
    plain = rate("FQ-1", kind="totaliser", unit="t")
    readings = at_hours([0, 6, 12, 18, 24], [9_900.0, 9_960.0, 20.0, 80.0, 140.0], "FQ-1")
    _, findings = day_of([plain], [readings])
    assert [f.code for f in findings if f.code.startswith("totaliser")] == ["totaliser-reset"]


def test_a_small_step_back_counts_as_it_is_and_is_said() -> None:
    readings = at_hours([0, 6, 12, 18, 24], [500.0, 560.0, 558.0, 620.0, 680.0], "FQ-1")
    days, findings = day_of([COUNTER], [readings])
    assert days["FQ-1"].amount == pytest.approx(180.0)
    assert [f.code for f in findings if f.code.startswith("totaliser")] == ["totaliser-back"]


def test_the_last_minutes_of_a_day_take_the_last_rate_until_the_next_reading_comes() -> None:
    readings = series(100.0 + 5.0 * np.arange(48), tag="FQ-1", every=HOUR // 2)
    days, findings = day_of([COUNTER], [readings])
    assert days["FQ-1"].covered_hours == pytest.approx(24.0)
    assert days["FQ-1"].amount == pytest.approx(240.0)
    assert findings == ()
