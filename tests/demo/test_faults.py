"""Planted faults are where they are documented, and nowhere when they are off."""

from __future__ import annotations

from datetime import timedelta

import numpy as np
import pytest

from recon.demo.clock import instant
from recon.demo.faults import FAULTS, Fault, chosen
from recon.demo.shapes import CU
from recon.demo.simulate import Simulation, simulate
from recon.demo.spoil import spoil
from recon.ingest.rows import Quality, Record, Series
from tests.demo.made import demo_site, hourly

PAPERS = [f for f in FAULTS if f.kind != "leak"]


def spoilt(fault: Fault) -> tuple[Simulation, tuple[Series, ...], tuple[Record, ...]]:
    clean = hourly()
    series, records = spoil(
        [fault],
        site=demo_site(),
        grid=clean.truth.grid,
        series=clean.series,
        records=clean.records,
    )
    return clean, series, records


def changes(fault: Fault) -> tuple[dict[str, Series], list[Record], list[Record]]:
    """Give changed series, and records that are new and gone."""
    clean, series, records = spoilt(fault)
    changed = {
        s.tag: s
        for s, before in zip(series, clean.series, strict=True)
        if s.value.tobytes() != before.value.tobytes()
        or s.quality.tobytes() != before.quality.tobytes()
    }
    old, new = set(clean.records), set(records)

    def in_order(some: set[Record]) -> list[Record]:
        return sorted(some, key=lambda r: (r.true_from, r.natural_key))

    return changed, in_order(new - old), in_order(old - new)


def window(fault: Fault) -> tuple[int, int]:
    grid = hourly().truth.grid
    first = int(grid.edges[grid.first[fault.day]]) + round(fault.hour * 3.6e9)
    last = int(grid.edges[-1]) if fault.hours is None else first + round(fault.hours * 3.6e9)
    return first, last


def named(name: str) -> Fault:
    return next(f for f in FAULTS if f.name == name)


def test_every_kind_of_fault_is_planted_by_default() -> None:
    kinds = {
        "span step",
        "drift",
        "stuck",
        "swapped samples",
        "decimal slip",
        "wrong basis",
        "duplicate ticket",
        "totaliser reset",
        "dropout",
        "gauge error",
        "survey error",
        "sampler plugged",
        "leak",
    }
    assert {f.kind for f in chosen("on")} == kinds
    assert chosen("off") == ()
    assert [f.name for f in chosen("tails-gauge, slags-swapped")] == [
        "slags-swapped",
        "tails-gauge",
    ]
    with pytest.raises(ValueError, match=r"unknown 'tails-gage'.*tails-gauge"):
        chosen("tails-gage")


@pytest.mark.parametrize("fault", PAPERS, ids=lambda f: f.name)
def test_a_fault_changes_its_own_tag_within_its_own_time_and_nothing_else(fault: Fault) -> None:
    changed, new, gone = changes(fault)
    first, last = window(fault)
    assert bool(changed) != bool(new)
    assert set(changed) <= {fault.tag}
    clean = {s.tag: s for s in hourly().series}
    for tag, series in changed.items():
        same = (series.value == clean[tag].value) & (series.quality == clean[tag].quality)
        at = series.at[~same]
        assert first <= at.min()
        assert at.max() <= last
        assert at.min() - first <= 2.0 * 3.6e9, "begins when documented"
    for record in (*new, *gone):
        assert record.subject in {fault.tag, fault.other}
        assert instant(first) - timedelta(hours=8) <= record.true_from
        assert record.true_to <= instant(last) + timedelta(hours=8)


def test_a_span_step_is_of_the_documented_size_and_follows_a_logged_calibration() -> None:
    fault = named("mill-belt-span")
    changed, _, _ = changes(fault)
    clean = hourly().tag("WT-210")
    after = (clean.at >= window(fault)[0]) & (clean.value > 0)
    ratio = changed["WT-210"].value[after] / clean.value[after]
    np.testing.assert_allclose(ratio, 1.025, atol=2e-5)
    day = hourly().truth.grid.days[fault.day]
    logged = [r for r in hourly().records if r.subject == "WT-210" and r.item == "calibration"]
    calendar = hourly().truth.grid.calendar
    assert day in {calendar.day_of(r.true_to) for r in logged}


def test_a_stuck_meter_stands_still_through_a_stop_of_its_stream() -> None:
    fault = named("charge-stuck")
    changed, _, _ = changes(fault)
    series = changed["WT-310"]
    first, last = window(fault)
    here = (series.at >= first) & (series.at < last)
    assert len(set(series.value[here].tolist())) == 1
    assert series.value[here][0] > 20.0
    assert (hourly().tag("XS-310").value[here] == 0.0).sum() >= 8


def test_a_dropout_leaves_no_good_value() -> None:
    fault = named("concentrate-flow-dropout")
    changed, _, _ = changes(fault)
    series = changed["FT-226"]
    bad = series.quality == Quality.BAD
    assert bad.sum() == 5
    assert np.isnan(series.value[bad]).any()
    assert (series.value[bad] == 0.0).any()


def test_a_reset_totaliser_goes_back_to_zero_and_counts_on() -> None:
    changed, _, _ = changes(named("acid-totaliser-reset"))
    series, clean = changed["FQ-530"], hourly().tag("FQ-530")
    drops = np.flatnonzero(np.diff(series.value) < 0)
    before = np.flatnonzero(np.diff(clean.value) < 0)
    assert len(before) == 1, "the clean totaliser rolls over once"
    assert len(drops) == 2
    assert series.value[drops[1] + 1] == 0.0


def test_slips_swaps_and_bases_are_of_the_documented_size() -> None:
    _, new, gone = changes(named("tails-decimal-slip"))
    assert [round(g.value / n.value, 6) for n, g in zip(new, gone, strict=True)] == [10.0, 10.0]  # type: ignore[operator]
    _, new, gone = changes(named("slag-iron-as-oxide"))
    assert len(new) == 4
    assert all(abs(n.value / g.value - 1.286) < 1e-4 for n, g in zip(new, gone, strict=True))  # type: ignore[operator]
    _, new, gone = changes(named("slags-swapped"))
    assert {r.subject for r in new} == {"furnace slag", "converter slag"}
    assert sorted(r.value or 0.0 for r in new) == sorted(r.value or 0.0 for r in gone)
    grade = {r.subject: r.value for r in new if r.item == "Cu"}
    assert grade["furnace slag"] > grade["converter slag"]  # type: ignore[operator]


def test_a_ticket_entered_twice_has_the_same_load_under_another_number() -> None:
    _, new, gone = changes(named("truck-entered-twice"))
    assert gone == []
    (again,) = new
    twin = [
        r
        for r in hourly().records
        if r.subject == "WB-01" and r.true_from == again.true_from - timedelta(minutes=17)
    ]
    assert [(r.value, r.lot, r.extra) for r in twin] == [(again.value, again.lot, again.extra)]
    assert again.document not in {r.document for r in hourly().records}


def test_a_plugged_sampler_lowers_night_samples_only() -> None:
    _, new, gone = changes(named("tails-sampler-night"))
    assert {r.item for r in new} == {"Cu", "S", "Fe"}
    assert all(r.document.endswith("-N") for r in new)
    nights = {r.document for r in new}
    assert 9 <= len(nights) <= 11
    ratio = [n.value / g.value for n, g in zip(new, gone, strict=True) if n.item == "Cu"]  # type: ignore[operator]
    np.testing.assert_allclose(ratio, 0.88, atol=1e-3)


def test_a_survey_error_touches_one_survey() -> None:
    _, new, gone = changes(named("shed-survey"))
    (after,), (before,) = new, gone
    assert after.item == "volume"
    assert after.value == pytest.approx(0.94 * (before.value or 0.0), rel=1e-6)


def test_copper_that_is_taken_leaves_the_truth_and_no_stream() -> None:
    taken = simulate(demo_site(), months=1, interval=60, seed=1, faults=["copper-taken"])
    clean = hourly(months=1)
    assert taken.truth.lost_by_day("shed")[:, CU].sum() == pytest.approx(150.0, rel=1e-9)
    for stream, flow in taken.truth.flow.items():
        assert flow.tobytes() == clean.truth.flow[stream].tobytes()
    missing = clean.truth.at_cuts("shed")[-1, CU] - taken.truth.at_cuts("shed")[-1, CU]
    assert missing == pytest.approx(150.0, rel=1e-9)
    assert max(float(np.abs(v).max()) for v in taken.truth.imbalances().values()) < 1e-9


def test_switching_faults_on_leaves_every_other_reading_as_it_was() -> None:
    names = [f.name for f in FAULTS if f.default and f.kind != "leak"]
    together = simulate(demo_site(), months=1, interval=60, seed=1, faults=names)
    clean = hourly(months=1)
    tags = {f.tag for f in FAULTS if f.default}
    for with_faults, without in zip(together.series, clean.series, strict=True):
        same = with_faults.value.tobytes() == without.value.tobytes()
        assert same or with_faults.tag in tags
