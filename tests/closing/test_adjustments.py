"""Late data in closed months, worked by hand."""

from __future__ import annotations

from dataclasses import replace
from datetime import date

import pytest
from hypothesis import given
from hypothesis import strategies as st

from recon.closing.adjustments import (
    MonthBalance,
    direct_and_refit,
    effect,
    open_month,
    software_difference,
)

JAN, FEB, MAR = date(2026, 1, 1), date(2026, 2, 1), date(2026, 3, 1)
CLOSED = MonthBalance(
    month=JAN, component="Cu", opening=1000.0, net_in=500.0 - 480.0, closing=1010.0
)
OWN = MonthBalance(month=FEB, component="Cu", opening=1010.0, net_in=500.0 - 490.0, closing=1015.0)


def test_the_closed_and_the_open_month_by_hand() -> None:
    """1000 + 500 - 480 - 1010 = 10; 1010 + 500 - 490 - 1015 = 5."""
    assert CLOSED.unaccounted == 10.0
    assert open_month(signed=[CLOSED], own=OWN, booked=[]).own_unaccounted == 5.0


def test_a_late_receipt_never_changes_a_stock() -> None:
    late = effect("receipt +5 t", [CLOSED], [replace(CLOSED, net_in=CLOSED.net_in + 5.0)])
    assert (late.closing, late.unaccounted) == (0.0, 5.0)
    month = open_month(signed=[CLOSED], own=OWN, booked=[late])
    assert month.own_unaccounted == 5.0
    assert month.booked_unaccounted == 5.0
    assert month.adjusted_opening == CLOSED.closing
    assert month.year_to_date == 20.0


def test_a_restated_closing_survey_enters_stock_and_unaccounted() -> None:
    late = effect("survey -20 t", [CLOSED], [replace(CLOSED, closing=990.0)])
    month = open_month(signed=[CLOSED], own=OWN, booked=[late])
    assert (late.closing, late.unaccounted) == (-20.0, 20.0)
    assert (month.own_unaccounted, month.booked_unaccounted) == (-15.0, 20.0)
    assert month.adjusted_opening == 990.0


def test_a_survey_restated_between_two_closed_months_nets_to_zero() -> None:
    second = MonthBalance(month=FEB, component="Cu", opening=1010.0, net_in=10.0, closing=1015.0)
    late = effect(
        "January survey -20 t",
        [CLOSED, second],
        [replace(CLOSED, closing=990.0), replace(second, opening=990.0)],
    )
    assert (late.opening, late.net_in, late.closing, late.unaccounted) == (0.0, 0.0, 0.0, 0.0)


amounts = st.floats(-1e4, 1e4, allow_nan=False)


@given(st.lists(st.tuples(amounts, amounts), min_size=1, max_size=5), amounts, st.data())
def test_the_four_numbers_of_a_line_foot(
    months: list[tuple[float, float]], opening: float, data: st.DataObject
) -> None:
    def chain(first: float, rows: list[tuple[float, float]]) -> list[MonthBalance]:
        result: list[MonthBalance] = []
        for i, (net, closing) in enumerate(rows):
            before = first if not result else result[-1].closing
            result.append(
                MonthBalance(
                    month=date(2026, i + 1, 1),
                    component="Cu",
                    opening=before,
                    net_in=net,
                    closing=closing,
                )
            )
        return result

    changed = [(n + data.draw(amounts), c + data.draw(amounts)) for n, c in months]
    line = effect("late", chain(opening, months), chain(opening + data.draw(amounts), changed))
    assert line.opening + line.net_in - line.closing == pytest.approx(line.unaccounted, abs=1e-7)


def test_items_and_what_they_do_together_add_up() -> None:
    one = effect("a", [CLOSED], [replace(CLOSED, net_in=22.0)])
    two = effect("b", [CLOSED], [replace(CLOSED, closing=1005.0)])
    both = effect("both", [CLOSED], [replace(CLOSED, net_in=22.5, closing=1005.0)])
    lines = direct_and_refit([one, two], both)
    assert lines[-1].item == "refit"
    assert sum(line.unaccounted for line in lines) == pytest.approx(both.unaccounted)
    assert lines[-1].net_in == pytest.approx(0.5)


def test_months_that_re_perform_leave_no_software_line() -> None:
    booked = effect("a", [CLOSED], [replace(CLOSED, net_in=22.0)])
    line = software_difference([CLOSED], [booked], [replace(CLOSED, net_in=22.0)])
    assert (line.opening, line.net_in, line.closing, line.unaccounted) == (0.0, 0.0, 0.0, 0.0)


def test_chains_of_different_months_are_refused() -> None:
    with pytest.raises(ValueError, match="same closed months"):
        effect("a", [CLOSED], [OWN])
