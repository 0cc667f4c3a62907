"""Tickets, samples and surveys: what counts once, what covers which days, what is rolled."""

from __future__ import annotations

from dataclasses import replace
from datetime import date, timedelta
from itertools import pairwise
from typing import TYPE_CHECKING

import pytest

from recon.declare.site import EstimateRule, Step, Uncertainty
from recon.flowsheet.balances import Amount
from recon.ingest.build import ingest_month
from recon.ingest.given import SiteVersion
from recon.ingest.rows import Record, RowKind
from tests.fakes.five_node_rows import five_node_month
from tests.ingest.test_build import one, stated

if TYPE_CHECKING:
    from recon.declare.site import Instrument, Site
    from recon.ingest.measured import IngestedMonth
    from tests.fakes.five_node_rows import Month

FIRST = date(2026, 1, 1)
SECOND = date(2026, 1, 2)


def changed(site: Site, tag: str, **given: object) -> Site:
    return replace(
        site,
        instruments=tuple(
            replace(i, **given) if i.tag == tag else i  # type: ignore[arg-type]
            for i in site.instruments
        ),
    )


def instrument(site: Site, tag: str) -> Instrument:
    return next(i for i in site.instruments if i.tag == tag)


def codes(month: IngestedMonth) -> list[str]:
    return [f.code for f in month.findings]


def rows(made: Month, document: str) -> list[Record]:
    return [r for r in made.records if r.document == document]


# tickets


def test_a_ticket_entered_twice_under_one_number_counts_once() -> None:
    made = five_node_month(through=FIRST)
    (ticket,) = rows(made, "CONC-WT-260101-03")
    again = replace(ticket, document="conc wt 260101 3", known_at=ticket.known_at)
    month = stated(replace(made, records=(*made.records, again)))
    assert one(month, "CONC-WT").measurement.value == pytest.approx(
        made.truth.amounts[FIRST, "CONC", "mass"]
    )
    (found,) = [f for f in month.findings if f.code == "duplicate-ticket"]
    assert found.subject == "CONC-WT"
    assert "CONC-WT-260101-03" in found.text


def test_two_tickets_alike_in_weights_and_time_are_pointed_at_and_both_count() -> None:
    made = five_node_month(through=FIRST)
    (ticket,) = rows(made, "CONC-WT-260101-03")
    alike = replace(
        ticket, document="CONC-WT-260101-77", true_to=ticket.true_to + timedelta(minutes=4)
    )
    month = stated(replace(made, records=(*made.records, alike)))
    (found,) = [f for f in month.findings if f.code == "alike-tickets"]
    assert "4 min apart" in found.text
    assert one(month, "CONC-WT").raw == pytest.approx(
        sum(r.value or 0.0 for r in made.records if r.subject == "CONC-WT"
            and r.document.startswith("CONC-WT-260101")) + (ticket.value or 0.0)
    )  # fmt: skip


def test_a_ticket_of_a_lot_is_dried_with_its_own_moisture() -> None:
    made = five_node_month(through=FIRST, history=0)
    (moisture,) = [r for r in rows(made, "CONC-260101") if r.item == "moisture"]
    wetter = replace(moisture, document="LOT-9", lot="L9", value=20.0)
    tickets = [r for r in made.records if r.subject == "CONC-WT"]
    marked = replace(tickets[0], lot="L9")
    others = tuple(r for r in made.records if r is not tickets[0])
    month = stated(replace(made, records=(*others, marked, wetter)))
    dry = (marked.value or 0) * 0.80
    plain = [r.value or 0 for r in tickets[1:]]
    # the day's other tickets take the day's samples, weighted by their hours
    assert one(month, "CONC-WT").measurement.value == pytest.approx(
        dry + sum(plain) * (1 - (0.085 + 0.20) / 2)
    )


def test_a_day_without_any_ticket_is_taken_as_nothing_moved_and_said() -> None:
    made = five_node_month(through=FIRST)
    none = tuple(r for r in made.records if not r.document.startswith("CONC-WT-260101"))
    month = stated(replace(made, records=none))
    assert (FIRST, "CONC") in month.not_running
    assert "no-tickets" in codes(month)


# samples


def spanning(made: Month, document: str, days: int, **extra: object) -> Month:
    """Let the first day's sample speak of more days, and take the later ones away."""
    point = document.split("-")[0]
    kept = [r for r in made.records if r.subject != point or r.kind is not RowKind.ASSAY]
    long = [
        replace(r, true_to=r.true_to + timedelta(days=days - 1), **extra)  # type: ignore[arg-type]
        for r in rows(made, document)
    ]
    return replace(made, records=(*kept, *long))


def test_one_sample_over_two_days_is_one_measurement_weighted_by_fitted_mass() -> None:
    made = spanning(five_node_month(through=SECOND, history=0), "MATTE-260101", 2)
    measurement = one(stated(made), "MATTE Cu", 2).measurement
    (part,) = measurement.parts
    assert part.of == ((Amount(1, "MATTE", "Cu"), 1.0), (Amount(2, "MATTE", "Cu"), 1.0))
    assert part.over == ((Amount(1, "MATTE", "mass"), 1.0), (Amount(2, "MATTE", "mass"), 1.0))


def test_increments_of_the_sampler_give_the_shares_instead() -> None:
    made = five_node_month(through=SECOND, history=0)
    made = spanning(made, "MATTE-260101", 2, extra=(("increments", "30; 10"),))
    measurement = one(stated(made), "MATTE Cu", 2).measurement
    assert [p.share for p in measurement.parts] == [0.75, 0.25]


def test_a_sample_over_two_days_has_half_the_sampling_variance_but_one_analysis() -> None:
    made = five_node_month(through=SECOND, history=0)
    single, double = (stated(m).recipes for m in (made, spanning(made, "MATTE-260101", 2)))
    u = instrument(made.site, "MATTE Cu").uncertainty
    assert u is not None
    (one_day,) = [r.slope for r in single if (r.name, r.period) == ("MATTE Cu", 1)]
    (two_days,) = [r.slope for r in double if (r.name, r.period) == ("MATTE Cu", 2)]
    assert one_day**2 == pytest.approx(u.sampling**2 + u.preparation**2 + u.analysis**2)
    assert two_days**2 == pytest.approx(u.sampling**2 / 2 + u.preparation**2 + u.analysis**2)


def test_the_highest_known_stage_counts_and_stages_are_never_averaged() -> None:
    made = five_node_month(through=FIRST)
    provisional = tuple(
        replace(r, value=30.0)
        if r.document == "CONC-260101" and r.item == "Cu" and r.stage == "provisional"
        else r
        for r in made.records
    )
    final = one(stated(replace(made, records=provisional)), "CONC Cu")
    assert final.stage == "final"
    assert final.measurement.value != pytest.approx(0.30)
    early = tuple(r for r in provisional if r.stage != "final" or r.document != "CONC-260101")
    month = stated(replace(made, records=early))
    assert one(month, "CONC Cu").stage == "provisional"
    assert one(month, "CONC Cu").measurement.value == pytest.approx(0.30)
    assert [f.subject for f in month.findings if f.code == "provisional"]


def test_a_missing_assay_without_a_rule_gives_no_number() -> None:
    made = five_node_month(through=FIRST)
    none = tuple(r for r in made.records if r.document != "SLAG-260101")
    month = stated(replace(made, records=none))
    assert not [m for m in month.measured if m.tag == "SLAG Cu"]
    assert "missing-assay" in codes(month)


def test_an_estimate_rule_stands_in_with_what_it_was_off_before() -> None:
    made = five_node_month(through=FIRST)
    site = changed(made.site, "SLAG Cu", estimate=EstimateRule(rule="last"))
    none = tuple(r for r in made.records if r.document != "SLAG-260101")
    month = stated(replace(made, site=site, records=none))
    found = one(month, "SLAG Cu")
    past = [
        r.value or 0
        for r in sorted(none, key=lambda r: r.true_to)
        if (r.subject, r.item) == ("SLAG", "Cu")
    ]
    off = [(b - a) / 100 for a, b in pairwise(past)]
    assert found.estimated
    assert found.measurement.value == pytest.approx(past[-1] / 100)
    rms = (sum(d * d for d in off) / len(off)) ** 0.5
    assert found.measurement.u == pytest.approx(rms)
    (said,) = [f for f in month.findings if f.code == "estimated"]
    assert "29 past revisions" in said.text


def test_a_moisture_used_in_two_tonnages_is_one_shared_error_of_both() -> None:
    made = five_node_month(through=FIRST)
    site = changed(made.site, "CHARGE-WI", chain=(Step(by="moisture", tag="CONC H2O"),))
    problem = stated(replace(made, site=site)).problem
    shared = [d.source for d in problem.draws if d.source.startswith("CONC H2O ")]
    assert shared == ["CONC H2O CONC-260101"]
    index = [d.source for d in problem.draws].index(shared[0])
    factors = {m.name: e.factor for m in problem.measurements for e in m.effects if e.draw == index}
    assert factors == {
        "CHARGE-WI": pytest.approx(-0.01 / 0.915),
        "CONC-WT": pytest.approx(-0.01 / 0.915),
    }


def test_a_moisture_used_once_goes_into_the_tonnage_that_it_dries() -> None:
    made = five_node_month(through=FIRST)
    exact = changed(made.site, "CHARGE H2O", uncertainty=Uncertainty(zero=0.0))
    loose, tight = (
        one(stated(replace(made, site=s)), "CHARGE-WI").measurement for s in (made.site, exact)
    )
    assert loose.u is not None
    assert tight.u is not None
    extra = (loose.u**2 - tight.u**2) ** 0.5
    assert extra == pytest.approx(0.0015 / 0.918 * loose.value, rel=0.1)


# surveys


def moved(made: Month, hours: float, document: str = "SURVEY-260101") -> Month:
    shift = timedelta(hours=hours)
    return replace(
        made,
        records=tuple(
            replace(r, true_from=r.true_from + shift, true_to=r.true_to + shift)
            if r.document == document
            else r
            for r in made.records
        ),
    )


def test_a_survey_taken_after_the_cut_is_rolled_back_with_what_flowed() -> None:
    made = five_node_month(through=SECOND)
    at_cut = one(stated(made), "SHED volume opening")
    late = one(stated(moved(made, 6.0)), "SHED volume opening")
    tickets = [r for r in made.records if r.document.startswith("CONC-WT-260101")]
    start = min(r.true_to for r in rows(made, "SURVEY-260101"))
    received = sum(
        (r.value or 0) * 0.915 for r in tickets if start <= r.true_to < start + timedelta(hours=6)
    )
    drawn = made.truth.amounts[FIRST, "CHARGE", "mass"] / 4
    assert late.rolled_hours == -6.0
    assert late.measurement.value == pytest.approx(
        at_cut.measurement.value - received + drawn, rel=1e-9
    )
    assert (late.measurement.u or 0) > (at_cut.measurement.u or 0)


def test_the_flows_of_a_roll_bring_their_shared_errors_with_them() -> None:
    made = moved(five_node_month(through=SECOND), 6.0)
    problem = stated(made).problem
    (stock,) = [m for m in problem.measurements if m.name == "SHED volume opening"]
    drawn = made.truth.amounts[FIRST, "CHARGE", "mass"] / 4
    factors = {problem.draws[e.draw].source: e.factor for e in stock.effects if not e.relative}
    assert factors["belt scale"] == pytest.approx(drawn, rel=1e-9)
    assert factors["weighbridge"] < 0


def test_the_grade_of_a_rolled_stock_follows_metal_over_mass() -> None:
    made = five_node_month(through=SECOND)
    at_cut = one(stated(made), "SHED Cu opening").measurement
    rolled = one(stated(moved(made, 6.0)), "SHED Cu opening").measurement
    assert rolled.value == pytest.approx(at_cut.value, abs=5e-4)
    assert rolled.value != at_cut.value
    assert (rolled.u or 0) > (at_cut.u or 0)


def test_a_month_that_opens_without_a_survey_in_reach_rolls_the_last_one_to_it() -> None:
    month = stated(moved(five_node_month(through=SECOND), -72.0))
    found = one(month, "SHED volume opening")
    assert found.rolled_hours == 72.0
    assert "rolled-far" in codes(month)


def test_a_month_end_without_a_survey_is_by_difference_and_not_in_the_fit() -> None:
    month = stated(five_node_month(through=SECOND))
    closing = one(month, "SHED volume closing", 2)
    assert closing.use == "compare"
    assert closing.rolled_hours == 48.0
    assert "SHED volume closing" not in [m.name for m in month.problem.measurements]


def test_a_survey_of_an_unknown_place_is_set_aside_with_a_finding() -> None:
    made = five_node_month(through=FIRST)
    stray = replace(rows(made, "SURVEY-260101")[0], subject="SHEDD", document="S-9")
    month = stated(replace(made, records=(*made.records, stray)))
    assert "unknown-place" in codes(month)


# values off by a known ratio


@pytest.mark.parametrize(
    ("tag", "ratio", "words"),
    [
        ("ANODE Cu", 0.1, "a decimal place"),
        ("MATTE Fe", 1.286, "FeO for Fe"),
        ("CHARGE S", 2.996, "SO4 for S"),
    ],
)
def test_an_assay_off_by_a_known_ratio_is_named(tag: str, ratio: float, words: str) -> None:
    made = five_node_month(through=FIRST)
    point, analyte = tag.split()
    site = changed(made.site, tag, high=None)
    off = tuple(
        replace(r, value=(r.value or 0) * ratio)
        if (r.document, r.item) == (f"{point}-260101", analyte)
        else r
        for r in made.records
    )
    month = stated(replace(made, site=site, records=off))
    (found,) = [f for f in month.findings if f.code == "wrong-ratio"]
    assert found.subject == tag
    assert words in found.text


def test_a_tonnage_far_from_its_usual_size_is_pointed_at() -> None:
    made = five_node_month(through=FIRST)
    off = tuple(
        replace(t, amount=1.7 * t.amount, mean=1.7 * t.mean)
        if (t.tag, t.day) == ("CHARGE-WI", FIRST) and t.amount and t.mean
        else t
        for t in made.tag_days
    )
    month = stated(replace(made, tag_days=off))
    assert [f.subject for f in month.findings if f.code == "far-outside"] == ["CHARGE-WI"]


def test_a_ratio_outside_its_window_is_found() -> None:
    made = five_node_month(through=FIRST)
    off = tuple(
        replace(r, value=18.0) if (r.document, r.item) == ("SLAG-260101", "SiO2") else r
        for r in made.records
    )
    month = stated(replace(made, records=off))
    (found,) = [f for f in month.findings if f.code == "implausible"]
    assert "slag Fe/SiO2, 2026-01-01: measured 2.3" in found.text


# versions


def test_each_day_uses_the_site_version_in_force() -> None:
    made = five_node_month(through=SECOND)
    later = replace(
        changed(made.site, "MATTE-WT", chain=(Step(by="factor", value=0.5),)), valid_from=SECOND
    )
    month = ingest_month(
        [SiteVersion(digest="a", site=made.site), SiteVersion(digest="b", site=later)],
        made.days,
        made.tag_days,
        made.records,
    )
    assert one(month, "MATTE-WT", 1).measurement.value == pytest.approx(
        made.truth.amounts[FIRST, "MATTE", "mass"]
    )
    assert one(month, "MATTE-WT", 2).measurement.value == pytest.approx(
        made.truth.amounts[SECOND, "MATTE", "mass"] / 2
    )
