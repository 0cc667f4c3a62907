"""A month of readings made from a known truth is stated so that the truth comes back."""

from __future__ import annotations

import random
from dataclasses import replace
from datetime import date, timedelta
from typing import TYPE_CHECKING

import pytest

from recon.flowsheet.balances import Amount, Stock
from recon.ingest.build import day_problem, ingest_month, with_references
from recon.ingest.given import Decision, SiteVersion
from recon.ingest.rows import RowKind
from recon.reconcile.read import reconcile
from recon.wiring import engine_named
from tests.fakes.five_node_rows import five_node_month

if TYPE_CHECKING:
    from recon.ingest.measured import IngestedMonth, Measured
    from tests.fakes.five_node_rows import Month

FIRST = date(2026, 1, 1)


def stated(made: Month, *decisions: Decision) -> IngestedMonth:
    return ingest_month(
        [SiteVersion(digest="v1", site=made.site)],
        made.days,
        made.tag_days,
        made.records,
        decisions,
    )


def one(month: IngestedMonth, name: str, period: int = 1) -> Measured:
    (found,) = [
        m for m in month.measured if m.measurement.name == name and m.measurement.period == period
    ]
    return found


def decision(kind: str, tag: str, value: float | None = None, day: date = FIRST) -> Decision:
    return Decision(
        decision=f"d-{kind}", kind=kind, tag=tag, first=day, last=day, value=value,
        reason="as found at calibration", by="A. Person",
    )  # fmt: skip


def test_readings_without_error_give_the_truth_back_exactly() -> None:
    made = five_node_month(through=date(2026, 1, 3), standing=(date(2026, 1, 2),))
    month = stated(made)
    answer = reconcile(month.problem, engine_named("direct"))
    true = made.truth.unknowns(made.days)
    sizes: dict[str, float] = {}
    for unknown, value in true.items():
        sizes[unknown.quantity] = max(sizes.get(unknown.quantity, 0.0), abs(value))
    for estimate in answer.estimates:
        if not estimate.fraction:
            assert estimate.value == pytest.approx(
                true[estimate.unknown], rel=1e-9, abs=1e-9 * sizes[estimate.unknown.quantity]
            ), estimate.unknown
    assert answer.objective < 1e-12


def test_a_month_across_a_clock_change_gives_the_truth_back_exactly() -> None:
    made = five_node_month(month=date(2026, 3, 1), through=date(2026, 3, 29), history=1)
    last = made.days[-2:]
    month = ingest_month(
        [SiteVersion(digest="v1", site=made.site)], last, made.tag_days, made.records
    )
    answer = reconcile(month.problem, engine_named("direct"))
    true = made.truth.amounts[date(2026, 3, 29), "CHARGE", "mass"]
    (found,) = [
        e.value
        for e in answer.estimates
        if e.unknown == Amount(2, "CHARGE", "mass") and not e.fraction
    ]
    hours = {t.day: t.day_hours for t in made.tag_days}
    assert sorted({hours[d] for d in made.days}) == [23.0, 24.0]
    assert found == pytest.approx(true, rel=1e-9)


def test_the_order_of_rows_does_not_matter() -> None:
    made = five_node_month(through=date(2026, 1, 3), noisy=True)
    mixed = random.Random(7)
    tag_days, records = list(made.tag_days), list(made.records)
    mixed.shuffle(tag_days)
    mixed.shuffle(records)
    assert stated(made) == stated(replace(made, tag_days=tuple(tag_days), records=tuple(records)))


def test_documents_in_another_unit_state_the_same_month() -> None:
    made = five_node_month(through=date(2026, 1, 2), noisy=True)
    other = tuple(
        replace(r, value=None if r.value is None else r.value * 1000, unit="kg")
        if r.kind is RowKind.TICKET
        else r
        for r in made.records
    )
    plain, changed = stated(made), stated(replace(made, records=other))
    for a, b in zip(plain.measured, changed.measured, strict=True):
        assert a.measurement.value == pytest.approx(b.measurement.value, rel=1e-12)
        assert a.measurement.u == pytest.approx(b.measurement.u, rel=1e-12)


def test_a_stream_whose_signal_is_off_all_day_is_tied_to_zero() -> None:
    made = five_node_month(through=date(2026, 1, 2), standing=(date(2026, 1, 2),))
    month = stated(made)
    assert (date(2026, 1, 2), "MATTE") in month.not_running
    assert "2: MATTE Cu stands" in [row.name for row in month.problem.relations]
    assert not [m for m in month.measured if m.stream == "MATTE" and m.measurement.period == 2]


def test_an_assay_of_a_stream_that_stood_is_set_aside_with_a_finding() -> None:
    made = five_node_month(through=date(2026, 1, 2), standing=(date(2026, 1, 2),))
    strayed = tuple(
        replace(r, true_from=r.true_from + timedelta(days=1), true_to=r.true_to + timedelta(days=1))
        if r.document == "MATTE-260101"
        else r
        for r in made.records
    )
    month = stated(replace(made, records=strayed))
    found = [f for f in month.findings if f.code == "assay-while-standing"]
    assert {f.subject for f in found} == {"MATTE Cu", "MATTE Fe", "MATTE S"}
    assert "sample MATTE-260101" in found[0].text
    assert found[0].period == 2


def test_a_moisture_that_dries_a_tonnage_pulls_it_with_its_sign() -> None:
    made = five_node_month(through=date(2026, 1, 1))
    month = stated(made)
    problem = month.problem
    for name, moisture in (("CONC-WT", 0.085), ("CHARGE-WI", 0.082)):
        (m,) = [m for m in problem.measurements if m.name == name]
        effects = {problem.draws[e.draw].source: e for e in m.effects}
        # d ln(wet (1 - m)) / dm = -1 / (1 - m), the oven's offset being in per cent
        assert effects["moisture oven"].factor == pytest.approx(-0.01 / (1 - moisture))
        assert effects["moisture oven"].relative


def test_a_logged_calibration_splits_the_draw_of_its_scale() -> None:
    made = five_node_month(through=date(2026, 1, 3))
    event = replace(
        made.records[0],
        kind=RowKind.EVENT,
        document="CAL-7",
        subject="CHARGE-WI",
        item="calibration",
        true_from=made.records[0].true_from.replace(year=2026, month=1, day=2, hour=8),
        true_to=made.records[0].true_from.replace(year=2026, month=1, day=2, hour=8),
    )
    month = stated(replace(made, records=(*made.records, event)))
    draws = [d.first for d in month.problem.draws if d.source == "belt scale"]
    assert draws == [1, 2]
    by_period = {
        m.period: {month.problem.draws[e.draw].first for e in m.effects if e.relative}
        for m in month.problem.measurements
        if m.name == "CHARGE-WI"
    }
    assert 2 in by_period[2]
    assert 2 in by_period[3]
    assert 2 not in by_period[1]


def test_uncertainty_comes_from_the_median_and_not_from_the_reading() -> None:
    made = five_node_month(through=date(2026, 1, 2))
    doubled = tuple(
        replace(t, amount=2 * t.amount, mean=2 * t.mean)
        if t.tag == "FLUX-WI" and t.day == FIRST and t.amount and t.mean
        else t
        for t in made.tag_days
    )
    before = one(stated(made), "FLUX-WI").measurement
    after = one(stated(replace(made, tag_days=doubled)), "FLUX-WI").measurement
    assert after.value == pytest.approx(2 * before.value)
    assert before.u is not None
    assert after.u == pytest.approx(before.u, rel=0.02)


def test_without_history_the_fitted_value_of_a_first_pass_is_the_reference() -> None:
    made = five_node_month(through=date(2026, 1, 2), history=0)
    month = stated(made)
    assert all(r.provisional for r in month.recipes)
    fitted = {
        (m.measurement.name, m.measurement.period): 2 * m.measurement.value for m in month.measured
    }
    frozen = with_references(month, fitted)
    assert not any(r.provisional for r in frozen.recipes)
    scale = one(frozen, "CONC-WT").measurement
    reference = 2 * (one(month, "CONC-WT").measurement.value
                     + one(month, "CONC-WT", 2).measurement.value) / 2  # fmt: skip
    (recipe,) = [r for r in month.recipes if (r.name, r.period) == ("CONC-WT", 1)]
    assert scale.u == pytest.approx((recipe.fixed**2 + (recipe.slope * reference) ** 2) ** 0.5)
    assert with_references(frozen, fitted) == frozen


def test_a_corrected_reading_keeps_what_was_read() -> None:
    made = five_node_month(through=date(2026, 1, 1))
    read = one(stated(made), "CONC-WT").measurement.value
    month = stated(made, decision("corrected reading", "CONC-WT", 0.99))
    changed = one(month, "CONC-WT")
    assert changed.measurement.value == pytest.approx(0.99 * read)
    (correction,) = changed.corrections
    assert (correction.before, correction.after) == pytest.approx((read, 0.99 * read))
    assert correction.by == "A. Person"


def test_a_corrected_moisture_shows_in_the_tonnage_it_dries() -> None:
    made = five_node_month(through=date(2026, 1, 1))
    read = one(stated(made), "CONC-WT").measurement.value
    changed = one(stated(made, decision("override", "CONC H2O", 9.5)), "CONC-WT")
    assert changed.measurement.value == pytest.approx(read / 0.915 * 0.905)
    (correction,) = changed.corrections
    assert (correction.before, correction.after) == pytest.approx((read, read / 0.915 * 0.905))


def test_a_reading_set_aside_stays_for_the_bridge_but_not_in_the_fit() -> None:
    made = five_node_month(through=date(2026, 1, 1))
    month = stated(made, decision("set aside", "MATTE-WT"))
    assert one(month, "MATTE-WT").set_aside
    assert "MATTE-WT" not in [m.name for m in month.problem.measurements]


def test_a_held_reading_is_held_in_the_problem() -> None:
    made = five_node_month(through=date(2026, 1, 1))
    month = stated(made, decision("held", "ANODE-WT"))
    (held,) = [m for m in month.problem.measurements if m.held]
    assert held.name == "ANODE-WT"


def test_a_compared_monitor_is_measured_but_not_in_the_problem() -> None:
    made = five_node_month(through=date(2026, 1, 1))
    month = stated(made)
    monitor = one(month, "STACK-S")
    assert monitor.use == "compare"
    assert monitor.measurement.value == pytest.approx(
        made.truth.amounts[FIRST, "TAILGAS", "S"], rel=1e-12
    )
    assert "STACK-S" not in [m.name for m in month.problem.measurements]


def test_surveys_at_the_cuts_measure_both_boundaries() -> None:
    month = stated(five_node_month(month=date(2026, 2, 1)))
    assert one(month, "SHED volume opening").boundary == "opening"
    closing = one(month, "SHED volume closing", 28)
    assert closing.day == date(2026, 2, 28)
    assert closing.measurement.parts[0].of == ((Stock(28, "SHED", "mass"), 1.0),)


def test_the_problem_of_a_day_keeps_that_day_alone() -> None:
    made = five_node_month(through=date(2026, 1, 3))
    problem = day_problem(stated(made), 3)
    assert len(problem.flowsheets) == 1
    assert {m.period for m in problem.measurements} == {1}
    assert {f.name for f in problem.figures} == {f.name for f in made.site.figures}
    answer = reconcile(problem, engine_named("direct"))
    assert answer.objective < 1e-12
    assert answer.degrees_of_freedom > 5


def test_figures_are_stated_a_day_and_over_the_month() -> None:
    month = stated(five_node_month(through=date(2026, 1, 3)))
    periods = [f.period for f in month.problem.figures if f.name == "S capture as acid"]
    assert periods == [1, 2, 3, None]
