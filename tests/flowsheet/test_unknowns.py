"""Unknowns of different kinds never stand for one another, whatever their names."""

from __future__ import annotations

from recon.flowsheet.balances import unknowns
from recon.flowsheet.network import Flowsheet, Node, Stream
from recon.reconcile.problem import Problem
from recon.reconcile.state import state_of


def test_a_stream_and_a_stock_place_of_one_name_are_two_unknowns() -> None:
    sheet = Flowsheet(
        quantities=("mass",),
        nodes=(Node(name="shed", conserves=("mass",), stock=True),),
        streams=(Stream(name="shed", source="shed", target=None, carries=("mass",)),),
    )
    found = list(unknowns([sheet]))
    assert len(found) == len(set(found)) == 3


def test_a_stock_place_whose_streams_leave_with_one_composition_keeps_all_its_unknowns() -> None:
    quantities = ("mass", "Cu")
    sheet = Flowsheet(
        quantities=quantities,
        nodes=(Node(name="bins", conserves=quantities, stock=True, same_composition=True),),
        streams=(
            Stream(name="in", source=None, target="bins", carries=quantities),
            Stream(name="a", source="bins", target=None, carries=quantities),
            Stream(name="b", source="bins", target=None, carries=quantities),
        ),
    )
    state = state_of(Problem(flowsheets=(sheet,), measurements=()))
    assert len(state.index) == len(state.columns) == 2 * 2 + 3 * 2 + 2 + 2
