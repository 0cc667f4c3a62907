"""Bridge, node closure, stocks and recoveries."""

from __future__ import annotations

from dataclasses import replace

import pytest
from uncertainties import ufloat

from recon.declare.site import SiteStream
from recon.ingest.measured import Correction
from recon.reconcile.problem import Draw
from recon.reconcile.read import reconcile
from recon.solve.closed_form import ClosedForm
from recon.tabulate.tables import tables_of
from tests.tabulate.cells import cell, value
from tests.tabulate.paper import Paper, mill_site, simple_month
from tests.tabulate.test_tables import mill_month


def corrected_month() -> Paper:
    """OUT read 230 on both days; one decision corrects by 1.05, another sets an IN aside."""
    paper = simple_month()
    paper.measured = [m for m in paper.measured if m.tag not in ("OUT Cu", "IN Cu")]
    for p in (1, 2):
        step = Correction(
            decision="d1" * 20,
            kind="corrected reading",
            before=230.0,
            after=241.5,
            reason="scale read 5 % low since its check",
            by="A. Assayer",
        )
        paper.amount(p, "OUT", 241.5, corrections=(step,))
        paper.amount(p, "IN", 250.0, tag="IN second scale")
    aside = Correction(
        decision="d2" * 20, kind="set aside", before=300.0, after=None, reason="stuck", by="B. Bee"
    )
    paper.amount(1, "IN", 300.0, corrections=(aside,), set_aside=True)
    paper.site = simple_month().site
    return paper


def test_the_bridge_goes_from_as_read_over_each_decision_to_stated() -> None:
    tables = corrected_month().tables()
    table = "unaccounted-bridge"
    as_read = value(tables, table, "Cu 000 as read", "unaccounted")
    # IN Cu is declared before the second scale, so as read it counted: 300 on day 1
    assert as_read == pytest.approx(1000 + 300 + 250 - 460 - 1010)
    rows = {c.row for c in tables.cells if c.table == table and c.row.startswith("Cu ")}
    assert rows == {
        "Cu 000 as read",
        "Cu 001 d1d1d1d1d1d1",
        "Cu 002 d2d2d2d2d2d2",
        "Cu 999 stated",
    }
    effects = [
        value(tables, table, row, "effect")
        for row in ("Cu 001 d1d1d1d1d1d1", "Cu 002 d2d2d2d2d2d2")
    ]
    assert effects == pytest.approx([-23.0, -50.0])
    stated = value(tables, table, "Cu 999 stated", "unaccounted")
    assert stated == pytest.approx(as_read + sum(effects))
    assert stated == pytest.approx(value(tables, "site-balance", "Cu", "unaccounted"))
    words = cell(tables, table, "Cu 001 d1d1d1d1d1d1", "step").text
    assert words == "OUT Cu: corrected reading, by A. Assayer: scale read 5 % low since its check"
    assert cell(tables, "site-balance", "Cu", "products").basis == "corrected"


def test_a_reading_set_aside_is_shown_with_what_the_fit_says_and_not_totalled() -> None:
    tables = corrected_month().tables()
    found = cell(tables, "measured-reconciled", "IN Cu", "word")
    assert found.text == "set aside by decision"
    assert value(tables, "measured-reconciled", "IN Cu", "measured") == 300.0
    assert value(tables, "site-balance", "Cu", "receipts") == 500.0


def test_node_closure_shows_the_raw_gap_and_that_the_fit_closes_it() -> None:
    tables = mill_month().tables()
    day = value(tables, "node-closure", "MILL mass", "raw_imbalance", "2026-01-01")
    assert day == pytest.approx(1100 - 40 - 1058)
    u = (5.5**2 + 0.2**2 + 5.29**2) ** 0.5
    assert cell(tables, "node-closure", "MILL mass", "raw_imbalance", "2026-01-01").u == (
        pytest.approx(u)
    )
    assert value(tables, "node-closure", "MILL mass", "z", "2026-01-01") == pytest.approx(2 / u)
    for node in ("MILL", "SHED"):
        for q in ("mass", "Cu"):
            left = value(tables, "node-closure", f"{node} {q}", "reconciled_imbalance")
            assert left == pytest.approx(0.0, abs=1e-6)


def test_a_stock_node_is_not_closed_on_a_day_without_surveys_at_both_ends() -> None:
    found = cell(mill_month().tables(), "node-closure", "SHED Cu", "raw_imbalance", "2026-01-01")
    assert found.value is None
    assert "not surveyed" in found.reason


def test_stocks_stand_beside_the_fits_opinion() -> None:
    tables = simple_month().tables()
    assert value(tables, "stocks", "SHED Cu", "opening") == 1000.0
    assert value(tables, "stocks", "SHED Cu", "closing") == 1010.0
    assert value(tables, "stocks", "SHED Cu", "change") == 10.0
    assert value(tables, "stocks", "SHED Cu", "closing_grade") == pytest.approx(25.0)
    fitted = value(tables, "stocks", "SHED Cu", "fitted_closing")
    assert value(tables, "stocks", "SHED Cu", "fitted_difference") == pytest.approx(fitted - 1010)
    assert cell(tables, "stocks", "SHED Cu", "method").text == ("surveyed; opening is the take-on")


def test_recovery_stands_four_ways() -> None:
    tables = mill_month().tables()
    feed = 11.0 + 11.02
    product = 10.0 + 10.25
    tail = 0.0008 * (1058 + 1060)
    assert value(tables, "recoveries", "Cu recovery", "measured") == pytest.approx(
        100 * product / feed, abs=0.01
    )
    assert value(tables, "recoveries", "Cu recovery", "built_up") == pytest.approx(
        100 * product / (product + tail), abs=0.01
    )
    f, c, t = 1.0, 25.0, 0.08
    assert value(tables, "recoveries", "Cu recovery", "two_product") == pytest.approx(
        100 * c * (f - t) / (f * (c - t)), abs=0.01
    )
    fitted = value(tables, "recoveries", "Cu recovery", "fitted")
    assert 88 < fitted < 96
    assert value(tables, "recoveries", "Cu recovery", "fitted", "2026") == pytest.approx(
        fitted, abs=0.01
    )


@pytest.mark.reference
def test_two_product_recovery_has_the_uncertainty_of_its_three_grades() -> None:
    """Outside judge: the `uncertainties` package on c (f - t) / (f (c - t))."""
    paper = Paper(site=mill_site(), days=1)
    for stream, mass in (("ORE", 1000.0), ("FEED", 1000.0), ("CONC", 40.0), ("TAIL", 960.0)):
        paper.amount(1, stream, mass, quantity="mass", u=5.0)
    for stream, percent, u in (("ORE", 1.0, 0.02), ("FEED", 1.0, 0.02), ("CONC", 25.0, 0.2)):
        paper.grade([1], stream, percent, u=u)
    paper.grade([1], "TAIL", 0.08, u=0.004)
    paper.stock(0, 5000.0, quantity="mass")
    paper.stock(0, 50.0)
    found = cell(paper.tables(), "recoveries", "Cu recovery", "two_product")
    f, c, t = ufloat(1.0, 0.02), ufloat(25.0, 0.2), ufloat(0.08, 0.004)
    judged = 100 * c * (f - t) / (f * (c - t))
    assert found.value == pytest.approx(judged.nominal_value)
    assert found.u == pytest.approx(judged.std_dev)


def test_a_recovery_with_a_second_feed_has_no_built_up_head() -> None:
    paper = mill_month()
    scats = SiteStream(name="SCATS", target="MILL", carries=("mass", "Cu"), role="receipt")
    paper.site = replace(paper.site, streams=(*paper.site.streams, scats))
    for p in (1, 2):
        paper.amount(p, "SCATS", 1.0, quantity="mass")
        paper.grade([p], "SCATS", 1.0)
    found = cell(paper.tables(), "recoveries", "Cu recovery", "built_up")
    assert found.reason == "SCATS enters beside the head"


def test_a_day_covered_by_two_samples_counts_each_by_the_part_it_covers() -> None:
    paper = simple_month()
    paper.measured = [m for m in paper.measured if m.tag != "IN Cu"]
    paper.grade([1], "IN", 25.0)
    for name, percent, part in (("night", 20.0, 0.25), ("day", 28.0, 0.75)):
        paper.grade([2], "IN", percent, name=name)
        last = paper.measured[-1]
        halves = tuple(
            replace(
                p,
                of=tuple((u, part) for u, _ in p.of),
                over=tuple((u, part) for u, _ in p.over or ()),
            )
            for p in last.measurement.parts
        )
        paper.measured[-1] = replace(last, measurement=replace(last.measurement, parts=halves))
    found = value(paper.tables(), "streams", "IN", "measured_contained_Cu", "2026-01-02")
    assert found == pytest.approx(1000.0 * 0.26)


def test_an_override_where_nothing_was_read_is_missing_in_the_bridge_as_read() -> None:
    paper = simple_month()
    paper.measured = [m for m in paper.measured if m.tag != "OUT Cu" or m.measurement.period == 1]
    made = Correction(
        decision="d3" * 20, kind="override", before=None, after=240.0, reason="log", by="C. Cee"
    )
    paper.amount(2, "OUT", 240.0, corrections=(made,))
    tables = paper.tables()
    as_read = cell(tables, "unaccounted-bridge", "Cu 000 as read", "unaccounted")
    assert as_read.reason == "not determined: OUT 2026-01-02: Cu is not measured"
    assert value(tables, "unaccounted-bridge", "Cu 999 stated", "unaccounted") == 10.0
    step = cell(tables, "unaccounted-bridge", "Cu 001 d3d3d3d3d3d3", "effect")
    assert step.value is None


def test_a_moisture_corrected_on_every_ticket_is_undone_once_in_the_bridge() -> None:
    """Three tickets of 80 t dry: their moisture was read 8 % and corrected to 9 %."""
    paper = simple_month()
    paper.measured = [m for m in paper.measured if m.tag != "OUT Cu"]
    steps = tuple(
        Correction(
            decision="d4" * 20, kind="corrected reading", before=80 * 0.92 / 0.91, after=80.0
        )
        for _ in range(3)
    )
    for p in (1, 2):
        paper.amount(p, "OUT", 240.0, corrections=steps)
    as_read = value(paper.tables(), "unaccounted-bridge", "Cu 000 as read", "unaccounted")
    assert as_read == pytest.approx(1000 + 500 - 480 * 0.92 / 0.91 - 1010)


def test_readings_that_are_compared_only_keep_their_own_shared_sources() -> None:
    """Effects of readings index every draw of the month, not only those of the fit."""
    paper = simple_month()
    paper.measured = [m for m in paper.measured if m.tag != "OUT Cu"]
    paper.draws = (
        Draw(source="monitor", first=1, u=0.10),
        Draw(source="laboratory", first=1, u=0.02),
    )
    for p in (1, 2):
        paper.amount(p, "OUT", 240.0, tag="OUT monitor", use="compare", shared={0: 1.0})
    ingested = paper.ingested()
    fit = replace(ingested.problem, draws=paper.draws[1:])
    ingested = replace(ingested, problem=fit, draws=paper.draws)
    tables = tables_of(
        sites=(paper.site,) * 2, ingested=ingested, answer=reconcile(fit, ClosedForm())
    )
    found = cell(tables, "site-balance", "Cu", "products")
    assert found.u == pytest.approx((2 + 48.0**2) ** 0.5)


def test_printed_and_unrounded_unaccounted_agree_where_something_is_discarded() -> None:
    tables = mill_month().tables()
    for row in ("Cu", "concentrator Cu", "concentrator mass"):
        table = "site-balance" if row == "Cu" else "section-balance"
        exact = value(tables, "unaccounted-bridge", f"{row} 999 stated", "unaccounted")
        assert exact == pytest.approx(value(tables, table, row, "unaccounted"), abs=0.2)


def test_a_component_that_a_node_passes_unbalanced_is_stated_without_a_test() -> None:
    paper = mill_month()
    paper.site = replace(
        paper.site,
        nodes=tuple(
            replace(n, conserves=("mass",)) if n.name == "MILL" else n for n in paper.site.nodes
        ),
    )
    tables = paper.tables()
    assert value(tables, "site-balance", "Cu", "unaccounted") == pytest.approx(-0.444)
    z = cell(tables, "site-balance", "Cu", "z")
    assert (z.value, z.reason) == (None, "Cu is not balanced at MILL")
    assert "unmeasured is part of unaccounted" in (
        cell(tables, "site-balance", "Cu", "note").text or ""
    )
    assert "unaccounted-large" not in {f.code for f in tables.findings}


def test_dry_mass_is_stated_only_where_every_node_conserves_it() -> None:
    paper = mill_month()
    paper.site = replace(
        paper.site,
        nodes=tuple(
            replace(n, conserves=("Cu",)) if n.name == "MILL" else n for n in paper.site.nodes
        ),
    )
    rows = {c.row for c in paper.tables().cells if c.table.endswith("-balance")}
    assert rows == {"Cu", "yard mass", "yard Cu", "concentrator Cu"}
