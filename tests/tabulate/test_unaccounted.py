"""The measured chain: what is unaccounted, and how sure that is."""

from __future__ import annotations

import pytest
from uncertainties import ufloat

from recon.reconcile.problem import Draw
from tests.tabulate.cells import cell, value
from tests.tabulate.paper import Paper, shed_site, simple_month

SITE = "site-balance"


def test_a_month_on_paper_leaves_ten_tonnes_unaccounted() -> None:
    tables = simple_month().tables()
    assert value(tables, SITE, "Cu", "opening") == 1000.0
    assert value(tables, SITE, "Cu", "receipts") == 500.0
    assert value(tables, SITE, "Cu", "products") == 480.0
    assert value(tables, SITE, "Cu", "closing") == 1010.0
    assert value(tables, SITE, "Cu", "unaccounted") == 10.0  # 1000 + 500 - 480 - 1010
    assert value(tables, SITE, "Cu", "unaccounted_share") == pytest.approx(2.0)
    # two surveys of 5 t, four readings of 1 t: sqrt(25 + 25 + 4)
    assert cell(tables, SITE, "Cu", "unaccounted").u == pytest.approx(54**0.5)
    assert value(tables, SITE, "Cu", "z") == pytest.approx(10 / 54**0.5)


def test_the_limit_and_the_loss_that_would_not_show_follow_from_u() -> None:
    tables = simple_month().tables()
    u = 54**0.5
    assert value(tables, SITE, "Cu", "investigate_beyond") == pytest.approx(2 * u)
    assert value(tables, SITE, "Cu", "loss_not_shown") == pytest.approx((2 + 1.6448536) * u)


def test_a_first_opening_is_marked_as_take_on() -> None:
    assert "take-on" in (cell(simple_month().tables(), SITE, "Cu", "note").text or "")


def shared_density(factor: float = 1.0) -> Paper:
    """Opening 1000 and closing 800, both volume x one density known to 3 %, 4 t of their own."""
    paper = Paper(site=shed_site(), draws=(Draw(source="survey density", first=1, u=0.03),))
    paper.stock(0, 1000.0, u=4.0, shared={0: factor})
    paper.stock(2, 800.0, u=4.0, shared={0: factor})
    for p in (1, 2):
        paper.amount(p, "IN", 250.0)
        paper.amount(p, "OUT", 350.0)
    return paper


def test_a_density_common_to_both_surveys_cancels_as_far_as_stocks_are_alike() -> None:
    tables = shared_density().tables()
    # by hand: own 16 + 16 + 4 x 1; density (1000 - 800) x 0.03 = 6, squared 36
    assert cell(tables, SITE, "Cu", "unaccounted").u == pytest.approx((36 + 36) ** 0.5)
    # not cancelling it would give (1000^2 + 800^2) x 0.03^2 = 1476 instead of 36
    assert cell(tables, SITE, "Cu", "stock_change").u == pytest.approx((32 + 36) ** 0.5)


@pytest.mark.reference
def test_the_joint_uncertainty_agrees_with_the_uncertainties_library() -> None:
    """Outside judge: linear error propagation of the `uncertainties` package (PyPI)."""
    density, method = ufloat(1, 0.03), ufloat(1, 0.004)
    opening, closing = ufloat(1000, 4) * density, ufloat(800, 4) * density
    masses = [ufloat(1000, 7), ufloat(900, 7)]
    grades = [ufloat(0.25, 0.001) * method, ufloat(0.27, 0.002) * method]
    out = [ufloat(300, 1) * method, ufloat(310, 2)]
    judged = opening + sum(m * g for m, g in zip(masses, grades, strict=True)) - sum(out) - closing

    paper = Paper(
        site=shed_site(),
        draws=(
            Draw(source="survey density", first=1, u=0.03),
            Draw(source="laboratory Cu", first=1, u=0.004),
        ),
    )
    paper.stock(0, 1000.0, u=4.0, shared={0: 1.0})
    paper.stock(2, 800.0, u=4.0, shared={0: 1.0})
    for p, (mass, percent, u) in enumerate(((1000.0, 25.0, 0.1), (900.0, 27.0, 0.2)), start=1):
        paper.amount(p, "IN", mass, quantity="mass", u=7.0)
        paper.grade([p], "IN", percent, u=u, shared={1: 1.0})
    paper.amount(1, "OUT", 300.0, shared={1: 1.0})
    paper.amount(2, "OUT", 310.0, u=2.0)
    found = cell(paper.tables(), SITE, "Cu", "unaccounted")
    assert found.value == pytest.approx(judged.nominal_value)
    assert found.u == pytest.approx(judged.std_dev, rel=1e-12)


def test_copper_taken_out_of_the_truth_shows_as_unaccounted_and_never_as_stock() -> None:
    """The survey finds 150 t less; nobody metered them out."""
    honest, robbed = simple_month(), simple_month(closing=1010.0 - 150.0)
    before, after = honest.tables(), robbed.tables()
    assert value(after, SITE, "Cu", "closing") == value(before, SITE, "Cu", "closing") - 150.0
    assert value(after, SITE, "Cu", "unaccounted") == 10.0 + 150.0
    assert abs(value(after, SITE, "Cu", "z")) > 2
    assert "unaccounted-large" in {f.code for f in after.findings}
    signed = {(s.node, s.quantity): s.value for s in after.closing}
    assert signed["SHED", "Cu"] == 860.0
    # the fit spreads the loss over stock and flows; its stock is an opinion beside the signed one
    assert value(after, SITE, "Cu", "fitted_closing") > 860.0
    assert value(after, SITE, "Cu", "fitted_imbalance") == pytest.approx(0.0, abs=0.005)


def test_a_stream_that_nothing_measures_leaves_unaccounted_not_determined() -> None:
    paper = simple_month()
    paper.measured = [
        m for m in paper.measured if not (m.tag == "OUT Cu" and m.measurement.period == 2)
    ]
    found = cell(paper.tables(), SITE, "Cu", "unaccounted")
    assert found.value is None
    assert "OUT 2026-01-02: Cu is not measured" in found.reason


def test_a_closing_that_nobody_surveyed_is_rolled_by_difference_and_not_tested() -> None:
    paper = simple_month()
    paper.measured = [m for m in paper.measured if m.boundary != "closing"]
    tables = paper.tables()
    closing = cell(tables, SITE, "Cu", "closing")
    assert closing.value == 1020.0  # 1000 + 500 - 480
    assert closing.basis == "by difference"
    assert cell(tables, SITE, "Cu", "unaccounted").value is None
    assert cell(tables, SITE, "Cu", "unaccounted").reason.startswith("not determined: SHED")


def test_a_survey_rolled_further_than_its_limit_is_by_difference() -> None:
    paper = simple_month()
    paper.measured = [m for m in paper.measured if m.boundary != "closing"]
    paper.stock(2, 1010.0, rolled_hours=-30.0)
    paper.stock(2, 4040.0, quantity="mass", rolled_hours=-23.0)
    tables = paper.tables()
    assert cell(tables, SITE, "Cu", "closing").basis == "by difference"
    assert cell(tables, SITE, "Cu", "unaccounted").value is None
    assert cell(tables, SITE, "mass", "unaccounted").value == 40.0


def test_an_estimated_closing_is_tested_and_called_estimated() -> None:
    paper = simple_month()
    paper.measured = [m for m in paper.measured if m.boundary != "closing" or m.quantity != "Cu"]
    paper.stock(2, 1008.0, estimated=True)
    tables = paper.tables()
    assert cell(tables, SITE, "Cu", "closing").basis == "estimated"
    assert value(tables, SITE, "Cu", "unaccounted") == 12.0


def test_the_signed_chain_uses_no_fitted_value() -> None:
    """A wild extra meter moves the fit and no measured cell of the balance."""
    calm, wild = simple_month(), simple_month()
    wild.amount(1, "OUT", 900.0, tag="OUT second meter", u=0.5)
    for column in ("receipts", "products", "closing", "unaccounted", "z"):
        assert value(wild.tables(), SITE, "Cu", column) == value(calm.tables(), SITE, "Cu", column)
    fitted = [value(m.tables(), SITE, "Cu", "fitted_products") for m in (calm, wild)]
    assert abs(fitted[0] - fitted[1]) > 100


def test_a_reading_only_compared_counts_where_nothing_else_measures_the_amount() -> None:
    paper = simple_month()
    paper.measured = [m for m in paper.measured if m.tag != "OUT Cu"]
    for p in (1, 2):
        paper.amount(p, "OUT", 239.0, tag="OUT monitor", use="compare")
    tables = paper.tables()
    assert value(tables, SITE, "Cu", "products") == 478.0
    assert cell(tables, "measured-reconciled", "OUT monitor", "word").text == "compared only"


def test_a_held_figure_counts_before_a_meter_declared_first() -> None:
    paper = simple_month()
    for p in (1, 2):
        paper.amount(p, "OUT", 235.0, tag="OUT settled", use="held", u=0.1)
    assert value(paper.tables(), SITE, "Cu", "products") == 470.0


def test_a_real_reading_counts_before_an_estimated_one_declared_first() -> None:
    paper = simple_month()
    paper.measured = [m for m in paper.measured if m.tag != "OUT Cu"]
    for p in (1, 2):
        paper.amount(p, "OUT", 200.0, estimated=True)
        paper.amount(p, "OUT", 241.0, tag="OUT second scale")
    found = cell(paper.tables(), SITE, "Cu", "products")
    assert (found.value, found.basis) == (482.0, "read")
