"""One place rounds, and totals add what is printed."""

from __future__ import annotations

from decimal import Decimal

import pytest
from hypothesis import given
from hypothesis import strategies as st

from recon.tabulate.rounding import footed, leaf_decimals, printed, residue
from tests.tabulate.cells import cell, value
from tests.tabulate.paper import simple_month


def test_halves_go_to_the_even_digit_as_they_are_written() -> None:
    assert [str(printed(x, 0)) for x in (0.5, 1.5, 2.5, -0.5)] == ["0", "2", "2", "0"]
    assert str(printed(1.005, 2)) == "1.00"  # the double below 1.005 is still written 1.005
    assert str(printed(1.015, 2)) == "1.02"


def test_what_is_not_finite_is_refused() -> None:
    for x in (float("nan"), float("inf")):
        with pytest.raises(ValueError, match="finite"):
            printed(x, 1)


@given(st.lists(st.floats(-1e7, 1e7), max_size=40), st.integers(0, 6))
def test_the_residue_is_what_rounding_lost(values: list[float], decimals: int) -> None:
    leaves = [printed(v, decimals) for v in values]
    lost = residue(footed(leaves), float(sum(Decimal(repr(v)) for v in values)))
    assert abs(lost) <= 0.5 * 10.0**-decimals * len(values) + 1e-6


def test_decimals_follow_the_quantity() -> None:
    assert {q: leaf_decimals(q) for q in ("mass", "Cu", "S", "Au")} == {
        "mass": 1,
        "Cu": 3,
        "S": 3,
        "Au": 6,
    }


def test_a_month_is_the_sum_of_its_printed_days_and_says_what_that_loses() -> None:
    paper = simple_month()
    paper.measured = [m for m in paper.measured if m.tag != "IN Cu"]
    for p in (1, 2):
        paper.amount(p, "IN", 250.0004)
    tables = paper.tables()
    days = [
        value(tables, "streams", "IN", "measured_contained_Cu", f"2026-01-0{p}") for p in (1, 2)
    ]
    assert days == [250.0, 250.0]
    assert value(tables, "streams", "IN", "measured_contained_Cu") == 500.0
    assert value(tables, "site-balance", "Cu", "receipts") == 500.0
    lost = cell(tables, "residues", "streams IN", "residue_measured_contained_Cu")
    assert lost.value == pytest.approx(-0.0008)
