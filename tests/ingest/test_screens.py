"""Screens point at readings that look wrong; they change no value."""

from __future__ import annotations

from dataclasses import replace
from datetime import date

import numpy as np
import pytest

from tests.ingest.series import (
    DAY,
    HOUR,
    MINUTE,
    ON_BELT,
    RUNS,
    SIGNAL,
    at_hours,
    day_of,
    rate,
    series,
    start_of,
)


def live(n: int = 288, level: float = 50.0) -> np.ndarray:
    return level + np.random.default_rng(2).normal(0, 0.5, n)


def codes(*given: object, **more: object) -> list[str]:
    _, findings = day_of(*given, **more)  # type: ignore[arg-type]
    return [f.code for f in findings]


def test_a_healthy_day_says_nothing() -> None:
    assert codes([rate()], [series(live())]) == []


def test_a_frozen_value_is_found_with_its_hours() -> None:
    values = live()
    values[60:120] = values[60]
    days, findings = day_of([rate()], [series(values)])
    (found,) = findings
    assert found.code == "frozen"
    assert "in 60 readings over 4.9 h" in found.text
    assert days["FI-1"].amount == pytest.approx(values.sum() / 12)


def test_a_value_that_stands_while_the_stream_stands_is_not_frozen() -> None:
    values = live()
    values[60:180] = 0.0
    signal = at_hours([-1.0, 5.0, 15.0], [1.0, 0.0, 1.0], "RUN")
    found = codes([ON_BELT, SIGNAL], [series(values), signal], streams=[RUNS])
    assert "frozen" not in found


def test_a_spike_is_found_and_says_what_it_moves() -> None:
    values = live()
    values[100:102] = 300.0
    _, findings = day_of([rate()], [series(values)])
    (found,) = findings
    assert found.code == "spike"
    assert "the furthest 300 t/h" in found.text
    assert "+41" in found.text  # 2 readings x 250 t/h x 5 min = 41.7 t


def test_a_gap_in_running_time_is_found() -> None:
    readings = series(live())
    keep = np.ones(288, dtype=bool)
    keep[100:150] = False
    cut = replace(
        readings,
        at=readings.at[keep],
        value=readings.value[keep],
        quality=readings.quality[keep],
        known_at=readings.known_at[keep],
    )
    _, findings = day_of([rate()], [cut])
    (found,) = findings
    assert found.code == "gap"
    assert "3.4 h of running time" in found.text  # 50 readings missing, one stands 10 intervals


def test_two_readings_of_one_instant_are_found() -> None:
    readings = series(live())
    at = readings.at.copy()
    at[51] = at[50]
    found = codes([rate()], [replace(readings, at=at)])
    assert found == ["duplicate-reading"]


def test_zero_while_running_is_found() -> None:
    values = live()
    values[60:120] = 0.0
    signal = at_hours([-1.0], [1.0], "RUN")
    found = codes([ON_BELT, SIGNAL], [series(values), signal], streams=[RUNS])
    assert "zero-while-running" in found


def test_a_25_hour_day_told_as_24_is_found() -> None:
    long = date(2026, 10, 24)
    first = start_of(long)
    at = first + np.arange(0, 25 * HOUR, 5 * MINUTE, dtype=np.int64)
    at = np.delete(at, slice(240, 252))  # the repeated hour was overwritten
    readings = replace(series(live(len(at))), at=at, known_at=at + MINUTE)
    assert "clock-change" in codes([rate()], [readings], day=long)


def test_a_25_hour_day_told_whole_is_not_found() -> None:
    long = date(2026, 10, 24)
    readings = series(live(300), first=start_of(long))
    assert codes([rate()], [readings], day=long) == []


def test_readings_that_came_days_later_are_noted() -> None:
    readings = series(live())
    late = readings.known_at.copy()
    late[100:120] += 72 * HOUR
    assert codes([rate()], [replace(readings, known_at=late)]) == ["late"]


def test_a_null_is_a_gap_and_said() -> None:
    values = live()
    values[10:14] = np.nan
    days, findings = day_of([rate()], [series(values)])
    assert [f.code for f in findings] == ["no-value", "gap"]
    assert days["FI-1"].covered_hours == pytest.approx(24 - 4 / 12)
    assert days["FI-1"].day == DAY
