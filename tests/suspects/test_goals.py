"""A smaller tier of `python -m tests.bench suspects`: no figure lies significantly off its goal.

Few trials, so each check asks whether the goal lies within the 95 % interval or on its good side.
Goals for several faults at once are judged by the bench alone, whose results are kept beside it.
"""

from __future__ import annotations

import numpy as np
import pytest

from tests.bench import sites
from tests.bench.diagnosing import bench_of
from tests.bench.suspects import (
    MESHED,
    exchanger,
    false_alarms,
    mdb_row,
    power_rows,
    run,
    wilson,
)

pytestmark = pytest.mark.slow


@pytest.mark.parametrize("level", [0.05, 0.01])
def test_chance_raises_alarms_and_is_blamed_at_the_stated_rate(level: float) -> None:
    random = np.random.default_rng(41)
    case = sites.flow_network(random, streams=28, nodes=11, name="meshed", most_alike=MESHED)
    bench = bench_of(case, level=level, linear=True)
    alarms, sets, _ = false_alarms(bench, random, 1_500)
    for hits in (alarms, sets):
        low, high = wilson(hits, 1_500)
        assert low <= level * 1.2
        assert high >= level * 0.8


def test_one_visible_fault_is_found_on_a_meshed_network() -> None:
    random = np.random.default_rng(42)
    case = sites.flow_network(random, streams=28, nodes=11, name="meshed", most_alike=MESHED)
    tally = run(bench_of(case, level=0.05, linear=True), random, 1, 300)
    assert wilson(tally.visible_found, tally.visible)[1] >= 0.99
    assert tally.false / tally.trials <= 0.09 + 2 * (0.09 / tally.trials) ** 0.5


def test_one_visible_fault_is_found_in_small_processes() -> None:
    random = np.random.default_rng(43)
    for case in (exchanger(), sites.small_recycle(random)):
        tally = run(bench_of(case, level=0.05, linear=True), random, 1, 300)
        assert wilson(tally.visible_found, tally.visible)[1] >= 0.99


def test_detection_and_smallest_fault_follow_their_formulas() -> None:
    random = np.random.default_rng(44)
    case = sites.flow_network(random, streams=28, nodes=11, name="meshed", most_alike=MESHED)
    bench = bench_of(case, level=0.05, linear=True)
    rows = [*power_rows(bench, random, 20_000), mdb_row(bench, random)]
    assert [row.what for row in rows if not row.met] == []
