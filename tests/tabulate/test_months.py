"""Several months: opening ties to closing, late data are booked, the running sum is joint."""

from __future__ import annotations

from dataclasses import replace
from datetime import date

import pytest

from recon.declare.site import ErrorSource
from recon.ingest.given import OpeningStock
from recon.reconcile.problem import Draw
from recon.tabulate.leaves import Booked
from tests.tabulate.cells import cell, value
from tests.tabulate.paper import Paper, shed_site, simple_month

FEBRUARY = date(2026, 2, 1)
SITE = "site-balance"


def february(closing: float = 1015.0) -> Paper:
    """Open month after the paper one: + 500 - 490, closing 1015."""
    return simple_month(opening=1010.0, out=490.0, closing=closing, first=FEBRUARY)


def test_opening_is_last_months_printed_closing_digit_for_digit() -> None:
    january = simple_month(closing=1010.12345).tables()
    assert {s.value for s in january.closing if s.quantity == "Cu"} == {1010.123}
    tables = february().tables(opening=january.closing, year=january.leaves)
    assert value(tables, SITE, "Cu", "opening_signed", "2026-02") == 1010.123
    assert value(tables, SITE, "Cu", "opening", "2026-02") == 1010.123
    assert value(tables, "stocks", "SHED Cu", "opening_signed", "2026-02") == 1010.123


def test_a_survey_seen_again_later_does_not_change_the_signed_opening() -> None:
    january = simple_month().tables()
    paper = february()
    paper.measured = [
        replace(m, measurement=replace(m.measurement, value=977.0))
        if m.boundary == "opening" and m.quantity == "Cu"
        else m
        for m in paper.measured
    ]
    tables = paper.tables(opening=january.closing, year=january.leaves)
    assert value(tables, SITE, "Cu", "opening", "2026-02") == 1010.0


def test_a_late_receipt_is_booked_as_unaccounted_of_the_earlier_month() -> None:
    """Closed 1000 + 500 - 480 - 1010 = 10; open + 500 - 490 - 1015 leaves 5; +5 t come late."""
    january = simple_month().tables()
    late = Booked(boundary="site", quantity="Cu", item="receipt 17", delta_net_in=5.0)
    tables = february().tables(opening=january.closing, year=january.leaves, booked=[late])
    assert value(tables, SITE, "Cu", "booked_earlier", "2026-02") == 5.0
    assert value(tables, SITE, "Cu", "unaccounted", "2026-02") == 5.0
    # year to date = signed 10 + booked 5 + own 5
    assert value(tables, SITE, "Cu", "unaccounted", "2026") == 20.0


def test_a_restated_closing_survey_enters_the_opening_and_nets_to_zero() -> None:
    january = simple_month().tables()
    adjusted = [replace(s, booked=-20.0 if s.quantity == "Cu" else 0.0) for s in january.closing]
    late = Booked(boundary="site", quantity="Cu", item="survey of January", delta_closing=-20.0)
    tables = february().tables(opening=adjusted, year=january.leaves, booked=[late])
    assert value(tables, SITE, "Cu", "opening_booked", "2026-02") == -20.0
    assert value(tables, SITE, "Cu", "opening", "2026-02") == 990.0
    assert value(tables, SITE, "Cu", "unaccounted", "2026-02") == -15.0
    assert value(tables, SITE, "Cu", "booked_earlier", "2026-02") == 20.0
    assert value(tables, SITE, "Cu", "unaccounted", "2026") == 15.0  # 10 + 20 - 15


def test_booked_lines_go_on_into_the_year_of_later_months() -> None:
    january = simple_month().tables()
    late = Booked(boundary="site", quantity="Cu", item="receipt 17", delta_net_in=5.0)
    two = february().tables(opening=january.closing, year=january.leaves, booked=[late])
    march = simple_month(
        opening=1015.0, into=400.0, out=398.0, closing=1016.0, first=date(2026, 3, 1)
    ).tables(opening=two.closing, year=(*january.leaves, *two.leaves))
    assert value(march, SITE, "Cu", "unaccounted", "2026-03") == 1.0
    assert value(march, SITE, "Cu", "unaccounted", "2026") == 21.0


def test_an_unsigned_opening_is_said_to_be() -> None:
    january = simple_month().tables()
    tables = february().tables(opening=january.closing, opening_signed=False)
    assert "not signed" in (cell(tables, SITE, "Cu", "note", "2026-02").text or "")


LASTING = ErrorSource(name="scale", u=0.01, relative=True, lasts="throughout")
DAILY = ErrorSource(name="scale", u=0.01, relative=True, lasts="day")
CALIBRATED = ErrorSource(name="scale", u=0.01, relative=True, lasts="calibration")


def scaled(source: ErrorSource, first: date, draws: tuple[int, ...] = (1,)) -> Paper:
    """250 t in a day over one scale known to 1 %; everything else known to 1 t or 5 t."""
    paper = Paper(
        site=shed_site(sources=[source]),
        first=first,
        draws=tuple(Draw(source="scale", first=f, u=source.u) for f in draws),
    )
    paper.stock(0, 1000.0)
    for p in (1, 2):
        paper.amount(p, "IN", 250.0, shared={min(p, len(draws)) - 1: 1.0})
        paper.amount(p, "OUT", 250.0)
    paper.stock(2, 1000.0)
    return paper


def running_u(source: ErrorSource, draws: tuple[int, ...] = (1,)) -> float:
    january = scaled(source, date(2026, 1, 1), draws).tables()
    tables = scaled(source, FEBRUARY, draws).tables(opening=january.closing, year=january.leaves)
    found = cell(tables, SITE, "Cu", "running_unaccounted", "2026-02")
    assert value(tables, SITE, "Cu", "running_months", "2026-02") == 2
    assert found.u is not None
    return found.u


def test_a_source_that_lasts_adds_up_over_months_and_stocks_between_cancel() -> None:
    # own: first opening 25, last closing 25, eight readings of 1; scale (500 + 500) x 1 %
    assert running_u(LASTING) == pytest.approx((25 + 25 + 8 + 10.0**2) ** 0.5)


def test_draws_of_single_days_add_in_squares_over_months() -> None:
    assert running_u(DAILY, (1, 2)) == pytest.approx((25 + 25 + 8 + 4 * 2.5**2) ** 0.5)


def test_a_calibration_still_in_force_carries_over_the_month_end() -> None:
    # January: one draw for both days. It is in force in February until day 2.
    january = scaled(CALIBRATED, date(2026, 1, 1)).tables()
    tables = scaled(CALIBRATED, FEBRUARY, (1, 2)).tables(
        opening=january.closing, year=january.leaves
    )
    found = cell(tables, SITE, "Cu", "running_unaccounted", "2026-02")
    assert found.u == pytest.approx((25 + 25 + 8 + 7.5**2 + 2.5**2) ** 0.5)


def test_twelve_such_months_are_projected_from_what_lasts_and_what_does_not() -> None:
    tables = scaled(LASTING, date(2026, 1, 1)).tables()
    u = (25 + 25 + 12 * 4 + (12 * 5.0) ** 2) ** 0.5
    assert value(tables, SITE, "Cu", "loss_not_shown_12") == pytest.approx(3.6448536 * u)


def test_a_month_after_one_by_difference_states_the_span() -> None:
    paper = simple_month()
    paper.measured = [m for m in paper.measured if m.boundary != "closing"]
    january = paper.tables()
    assert {s.basis for s in january.closing} == {"by difference"}
    tables = simple_month(opening=1020.0, out=490.0, closing=1015.0, first=FEBRUARY).tables(
        opening=january.closing, year=january.leaves
    )
    assert cell(tables, SITE, "Cu", "unaccounted", "2026-02").value is None
    assert value(tables, SITE, "Cu", "span_months", "2026-02") == 2
    # 1000 + 500 - 480 + 500 - 490 - 1015
    assert value(tables, SITE, "Cu", "span_unaccounted", "2026-02") == 15.0


def test_a_month_without_a_figure_leaves_the_year_without_one() -> None:
    paper = simple_month()
    paper.measured = [m for m in paper.measured if m.tag != "OUT Cu"]
    january = paper.tables()
    tables = february().tables(opening=january.closing, year=january.leaves)
    found = cell(tables, SITE, "Cu", "products", "2026")
    assert found.value is None
    assert found.reason == "2026-01 states no figure"


def test_a_place_that_last_month_did_not_state_is_taken_on() -> None:
    other = OpeningStock(node="BIN", quantity="Cu", value=3.0, u=0.1, basis="read")
    tables = february().tables(opening=[other])
    assert "take-on" in (cell(tables, SITE, "Cu", "note", "2026-02").text or "")


def surveyed_by_density(first: date, opening: float, closing: float) -> Paper:
    """Both surveys rest on one density known to 3 %, which lasts; 4 t of their own."""
    density = ErrorSource(name="survey density", u=0.03, relative=True, lasts="throughout")
    paper = Paper(
        site=shed_site(sources=[density]),
        first=first,
        draws=(Draw(source="survey density", first=1, u=0.03),),
    )
    paper.stock(0, opening, u=4.0, shared={0: 1.0})
    paper.stock(2, closing, u=4.0, shared={0: 1.0})
    for p in (1, 2):
        paper.amount(p, "IN", 250.0)
        paper.amount(p, "OUT", 250.0 + (opening - closing) / 2)
    return paper


def test_a_density_that_lasts_cancels_between_a_signed_opening_and_the_closing() -> None:
    january = surveyed_by_density(date(2026, 1, 1), 1000.0, 900.0).tables()
    tables = surveyed_by_density(FEBRUARY, 900.0, 800.0).tables(
        opening=january.closing, year=january.leaves
    )
    found = cell(tables, SITE, "Cu", "unaccounted", "2026-02")
    assert found.u == pytest.approx((16 + 16 + 4 + (100 * 0.03) ** 2) ** 0.5)
    run = cell(tables, SITE, "Cu", "running_unaccounted", "2026-02")
    # first opening 1000, last closing 800: the density moves their difference
    assert run.u == pytest.approx((16 + 16 + 8 + (200 * 0.03) ** 2) ** 0.5)


def test_twelve_months_keep_a_lasting_density_of_both_stocks_together() -> None:
    tables = surveyed_by_density(date(2026, 1, 1), 1000.0, 900.0).tables()
    u = (16 + 16 + 12 * 4 + (100 * 0.03) ** 2) ** 0.5
    assert value(tables, SITE, "Cu", "loss_not_shown_12") == pytest.approx(3.6448536 * u)
