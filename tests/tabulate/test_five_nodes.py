"""From raw rows to tables on the five-node site: the loss of the design, and a clean month."""

from __future__ import annotations

from datetime import date

import pytest

from recon.ingest.build import ingest_month
from recon.ingest.given import SiteVersion
from recon.reconcile.read import reconcile
from recon.tabulate.columns import TABLE
from recon.tabulate.tables import Tables, tables_of
from recon.wiring import engine_named
from tests.fakes.five_node_rows import Month, five_node_month
from tests.tabulate.cells import cell, value


def stated(made: Month) -> Tables:
    month = ingest_month(
        [SiteVersion(digest="v1", site=made.site)], made.days, made.tag_days, made.records
    )
    answer = reconcile(month.problem, engine_named("direct"))
    return tables_of(sites=(made.site,) * len(made.days), ingested=month, answer=answer)


def test_a_few_days_from_raw_rows_state_every_table() -> None:
    tables = stated(five_node_month(through=date(2026, 1, 3), noisy=True))
    for c in tables.cells:
        TABLE[c.table].column(c.column)
        assert c.value is not None or c.text is not None or c.reason
    assert {c.table for c in tables.cells} == set(TABLE) - {"tests"}
    # the shed was last surveyed at the month's opening
    found = cell(tables, "site-balance", "Cu", "unaccounted")
    assert "surveyed 72 h from the cut" in found.reason
    # the converter gas is not metered: the smelter's sulfur is not determined, and says so
    assert "CGAS" in cell(tables, "section-balance", "smelter S", "unaccounted").reason


@pytest.mark.slow
def test_150_tonnes_taken_out_of_the_truth_show_as_unaccounted_and_never_as_stock() -> None:
    daily = 150.0 / 31
    honest = stated(five_node_month(noisy=True))
    made = five_node_month(noisy=True, lost_cu=daily)
    robbed = stated(made)
    shift = value(robbed, "site-balance", "Cu", "unaccounted") - value(
        honest, "site-balance", "Cu", "unaccounted"
    )
    u = cell(robbed, "site-balance", "Cu", "unaccounted").u
    assert u is not None
    # history is robbed as well, so both surveys read other stocks; their errors move with them
    assert shift == pytest.approx(150.0, abs=0.1 * u)
    assert value(robbed, "site-balance", "Cu", "closing") < value(
        honest, "site-balance", "Cu", "closing"
    )
    last = made.truth.stocks[date(2026, 2, 1), "Cu"]
    signed = cell(robbed, "stocks", "SHED Cu", "closing")
    assert signed.value is not None
    assert signed.u is not None
    assert abs(signed.value - last) < 4 * signed.u


@pytest.mark.slow
def test_a_month_without_errors_leaves_nothing_unaccounted() -> None:
    tables = stated(five_node_month())
    for row in ("Cu", "Fe", "S", "SiO2"):
        found = cell(tables, "site-balance", row, "unaccounted")
        # 31 days of a few streams, each rounded to 0.001 t
        assert found.value == pytest.approx(0.0, abs=0.1)
    for c in tables.cells:
        if c.table == "node-closure" and c.column == "reconciled_imbalance":
            assert c.value == pytest.approx(0.0, abs=1e-5)


def test_a_stock_shows_what_was_counted_and_the_documents_it_rests_on() -> None:
    tables = stated(five_node_month(through=date(2026, 1, 2)))
    assert "rolled 48.0 h forward" in (cell(tables, "stocks", "SHED mass", "time").text or "")
    counted = cell(tables, "stocks", "SHED mass", "surveyed")
    assert (counted.unit, counted.basis) == ("m3", "read")
    assert cell(tables, "stocks", "SHED Cu", "document").text
