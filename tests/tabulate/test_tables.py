"""What every table keeps to: the dictionary of columns, the two blocks, the year."""

from __future__ import annotations

from collections import Counter
from dataclasses import replace
from datetime import date

import pytest

from recon.declare.site import SiteStream
from recon.reconcile.read import reconcile
from recon.solve.closed_form import ClosedForm
from recon.tabulate.cells import Cell
from recon.tabulate.columns import TABLE
from recon.tabulate.tables import Tables, tables_of
from tests.tabulate.cells import cell, value
from tests.tabulate.paper import Paper, flowsheet, mill_site, simple_month
from tests.tabulate.test_unaccounted import shared_density

WORDS = {"", "read", "corrected", "settled", "estimated", "fitted", "by difference", "computed"}


def mill_month() -> Paper:
    """Ore in, concentrate and tailings out; assays one a day, tailings one over both days."""
    paper = Paper(site=mill_site())
    for q, opening, closing in (("mass", 5000.0, 4800.0), ("Cu", 50.0, 48.5)):
        paper.stock(0, opening, quantity=q, u=1.0)
        paper.stock(2, closing, quantity=q, u=1.0)
    for p, (ore, feed, conc, tail) in enumerate(
        ((1000.0, 1100.0, 40.0, 1058.0), (1000.0, 1102.0, 41.0, 1060.0)), start=1
    ):
        for stream, mass in (("ORE", ore), ("FEED", feed), ("CONC", conc), ("TAIL", tail)):
            paper.amount(p, stream, mass, quantity="mass", u=0.005 * mass)
        paper.grade([p], "ORE", 1.0)
        paper.grade([p], "FEED", 1.0)
        paper.grade([p], "CONC", 25.0, u=0.1, stage="provisional" if p == 2 else "final")
    paper.grade([1, 2], "TAIL", 0.08, u=0.004)
    return paper


def test_every_cell_has_its_column_in_the_dictionary_and_its_place_once() -> None:
    for tables in (simple_month().tables(), mill_month().tables()):
        for c in tables.cells:
            TABLE[c.table].column(c.column)
        places = Counter((c.table, c.period, c.row, c.column) for c in tables.cells)
        assert [place for place, count in places.items() if count > 1] == []


def test_a_cell_without_a_value_says_why_and_every_basis_is_a_known_word() -> None:
    for c in mill_month().tables().cells:
        assert c.basis in WORDS
        if c.value is None and c.text is None:
            assert c.reason


def test_both_blocks_recompute_by_themselves() -> None:
    tables = mill_month().tables()
    for period in ("2026-01-01", "2026-01-02", "2026-01", "2026"):
        for stream in ("ORE", "FEED", "CONC", "TAIL"):
            for block in ("measured", "fitted"):
                dry = value(tables, "streams", stream, f"{block}_dry", period)
                metal = value(tables, "streams", stream, f"{block}_contained_Cu", period)
                grade = value(tables, "streams", stream, f"{block}_grade_Cu", period)
                assert metal == pytest.approx(dry * grade / 100, abs=1e-9)


def test_a_sample_over_two_days_is_weighted_by_measured_dry_mass() -> None:
    tables = mill_month().tables()
    assert value(tables, "streams", "TAIL", "measured_contained_Cu") == pytest.approx(
        0.0008 * (1058 + 1060), abs=0.001
    )
    assert value(tables, "streams", "TAIL", "measured_grade_Cu") == pytest.approx(0.08, abs=1e-4)


def test_wet_mass_and_moisture_stand_before_dry_where_a_moisture_applies() -> None:
    paper = simple_month()
    paper.measured = [m for m in paper.measured if m.tag != "IN mass"]
    for p in (1, 2):
        paper.amount(p, "IN", 910.0, quantity="mass", moisture=0.09)
    tables = paper.tables()
    assert value(tables, "streams", "IN", "measured_wet") == 2000.0
    assert value(tables, "streams", "IN", "measured_moisture") == pytest.approx(9.0)
    assert not [c for c in tables.cells if c.row == "OUT" and c.column == "measured_wet"]


def test_fitted_days_add_up_to_the_fitted_month() -> None:
    tables = mill_month().tables()
    for stream in ("ORE", "FEED", "CONC", "TAIL"):
        for column in ("fitted_dry", "fitted_contained_Cu"):
            days = sum(value(tables, "streams", stream, column, f"2026-01-0{p}") for p in (1, 2))
            assert value(tables, "streams", stream, column) == pytest.approx(days, abs=1e-9)


def test_fitted_figures_close_but_for_rounding() -> None:
    tables = mill_month().tables()
    for row in ("Cu", "mass"):
        assert abs(value(tables, "site-balance", row, "fitted_imbalance")) < 0.5
    assert abs(value(tables, "section-balance", "concentrator Cu", "fitted_imbalance")) < 0.005


def test_the_provisional_share_counts_contained_metal_on_provisional_assays() -> None:
    share = value(mill_month().tables(), "streams", "CONC", "provisional_share")
    assert share == pytest.approx(100 * 41 / 81)


def test_measured_against_reconciled_gives_the_adjustment_in_its_own_unit() -> None:
    tables = mill_month().tables()
    measured = cell(tables, "measured-reconciled", "CONC Cu", "measured")
    reconciled = cell(tables, "measured-reconciled", "CONC Cu", "reconciled")
    moved = value(tables, "measured-reconciled", "CONC Cu", "adjustment")
    assert measured.unit == "%"
    assert measured.value == pytest.approx(25.0)
    assert measured.u == pytest.approx(0.1 / 2**0.5)
    assert reconciled.value is not None
    assert moved == pytest.approx(reconciled.value - 25.0)
    assert reconciled.u is not None
    assert measured.u is not None
    assert reconciled.u < measured.u


def test_a_held_figure_is_called_settled_and_stays_unmoved() -> None:
    paper = simple_month()
    paper.measured = [m for m in paper.measured if m.tag != "OUT Cu"]
    for p in (1, 2):
        paper.amount(p, "OUT", 240.0, use="held", u=0.1)
    tables = paper.tables()
    assert cell(tables, "site-balance", "Cu", "products").basis == "settled"
    assert value(tables, "measured-reconciled", "OUT Cu", "adjustment") == pytest.approx(
        0, abs=1e-9
    )
    assert cell(tables, "measured-reconciled", "OUT Cu", "adjustment_z").value is None


def test_a_stream_that_stands_is_zero_and_has_no_grade() -> None:
    paper = mill_month()
    paper.measured = [m for m in paper.measured if m.stream != "ORE" or m.measurement.period == 1]
    paper.not_running = ((paper.day(2), "ORE"),)
    tables = paper.tables()
    assert value(tables, "streams", "ORE", "measured_dry", "2026-01-02") == 0.0
    assert cell(tables, "streams", "ORE", "measured_grade_Cu", "2026-01-02").reason == (
        "stream stands"
    )
    assert value(tables, "streams", "ORE", "measured_dry") == 1000.0


def test_the_same_month_gives_the_same_cells() -> None:
    first, again = mill_month().tables(), mill_month().tables()
    assert first == again


def numbers(tables: Tables, period: str) -> list[Cell]:
    """Cells of a period that hold numbers."""
    return [c for c in tables.cells if c.period == period and c.value is not None]


def test_year_to_date_adds_signed_leaves_of_earlier_months() -> None:
    january = simple_month().tables()
    assert numbers(january, "2026")
    february = simple_month(
        opening=1010.0, into=500.0, out=490.0, closing=1015.0, first=date(2026, 2, 1)
    ).tables(opening=january.closing, year=january.leaves)
    assert value(february, "site-balance", "Cu", "unaccounted", "2026-02") == 5.0
    assert value(february, "site-balance", "Cu", "receipts", "2026") == 1000.0
    assert value(february, "site-balance", "Cu", "products", "2026") == 970.0
    assert value(february, "site-balance", "Cu", "opening", "2026") == 1000.0
    assert value(february, "site-balance", "Cu", "unaccounted", "2026") == 15.0
    assert value(february, "streams", "IN", "measured_contained_Cu", "2026") == 1000.0
    assert value(february, "site-balance", "Cu", "previous_month", "2026-02") == 10.0


def test_each_leaf_of_the_year_is_stated_once() -> None:
    for tables in (simple_month().tables(), mill_month().tables()):
        places = Counter((x.month, x.table, x.row, x.column) for x in tables.leaves)
        assert [place for place, count in places.items() if count > 1] == []


def test_a_stream_that_begins_within_the_month_counts_from_its_first_day() -> None:
    paper = simple_month()
    paper.amount(2, "TOLL", 30.0)
    paper.amount(2, "TOLL", 120.0, quantity="mass")
    toll = SiteStream(name="TOLL", target="SHED", carries=("mass", "Cu"), role="receipt")
    later = replace(paper.site, streams=(*paper.site.streams, toll))
    ingested = paper.ingested()
    problem = replace(ingested.problem, flowsheets=(flowsheet(paper.site), flowsheet(later)))
    ingested = replace(ingested, problem=problem)
    tables = tables_of(
        sites=(paper.site, later), ingested=ingested, answer=reconcile(problem, ClosedForm())
    )
    assert value(tables, "site-balance", "Cu", "receipts", "2026-01-01") == 250.0
    assert value(tables, "site-balance", "Cu", "receipts", "2026-01-02") == 280.0
    assert value(tables, "site-balance", "Cu", "unaccounted") == 40.0
    assert value(tables, "streams", "TOLL", "measured_contained_Cu") == 30.0


def test_each_unaccounted_figure_has_a_budget_that_sums_to_one() -> None:
    paper = shared_density()
    figures = {f.name: f for f in paper.tables().figures}
    found = figures["unaccounted Cu"]
    assert found.u == pytest.approx(72**0.5)
    assert sum(s.share for s in found.budget) == pytest.approx(1.0)
    first = found.budget[0]
    assert (first.name, first.source) == ("survey density", True)
    assert first.share == pytest.approx(0.5)
    assert figures["unaccounted mass"].reason.startswith("not determined")
