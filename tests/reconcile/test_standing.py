"""A stream that stands has no fraction, and the fit goes on without its assays."""

from __future__ import annotations

import pytest

from recon.flowsheet.balances import Amount, Row
from recon.flowsheet.network import Flowsheet, Node, Stream
from recon.reconcile.problem import Measurement, MeasurementKind, Part, Problem
from recon.reconcile.read import STREAM_STANDS, reconcile
from recon.reconcile.state import state_of
from recon.solve.closed_form import ClosedForm
from recon.solve.convex import Convex
from tests.networks import network


def test_a_ratio_whose_denominator_is_zero_is_set_aside_and_said() -> None:
    sheet = network({"in": (None, "tee"), "a": ("tee", None), "b": ("tee", None)}, ("mass", "Cu"))

    def meter(stream: str, value: float) -> Measurement:
        of = ((Amount(1, stream, "mass"), 1.0),)
        return Measurement(
            name=stream,
            period=1,
            kind=MeasurementKind.METER,
            parts=(Part(of=of),),
            value=value,
            u=1.0,
        )

    def assay(stream: str, value: float) -> Measurement:
        part = Part(of=((Amount(1, stream, "Cu"), 1.0),), over=((Amount(1, stream, "mass"), 1.0),))
        return Measurement(
            name=f"{stream} Cu",
            period=1,
            kind=MeasurementKind.ASSAY,
            parts=(part,),
            value=value,
            u=0.001,
        )

    problem = Problem(
        flowsheets=(sheet,),
        measurements=(
            meter("in", 100.0),
            meter("a", 103.0),
            meter("b", -4.0),
            assay("in", 0.3),
            assay("a", 0.3),
            assay("b", 0.2),
        ),
    )
    answer = reconcile(problem, ClosedForm())
    fraction = next(e for e in answer.estimates if e.unknown == Amount(1, "b", "Cu") and e.fraction)
    assert (fraction.value, fraction.reason) == (None, STREAM_STANDS)
    row = next(m for m in answer.measurements if m.measurement.name == "b Cu")
    assert (row.reconciled, row.redundant) == (None, False)


def test_a_stream_tied_to_zero_has_no_composition_and_no_bounds_of_its_own() -> None:
    """Two streams of one composition, one of them standing: the other takes everything."""
    quantities = ("mass", "Cu")
    sheet = Flowsheet(
        quantities=quantities,
        nodes=(Node(name="bin", conserves=quantities, same_composition=True),),
        streams=(
            Stream(name="in", source=None, target="bin", carries=quantities),
            Stream(name="a", source="bin", target=None, carries=quantities),
            Stream(name="b", source="bin", target=None, carries=quantities),
        ),
    )
    problem = Problem(
        flowsheets=(sheet,),
        measurements=(
            Measurement(
                name="in",
                period=1,
                kind=MeasurementKind.METER,
                parts=(Part(of=((Amount(1, "in", "mass"), 1.0),)),),
                value=100.0,
                u=1.0,
            ),
            Measurement(
                name="in Cu",
                period=1,
                kind=MeasurementKind.ASSAY,
                parts=(
                    Part(
                        of=((Amount(1, "in", "Cu"), 1.0),),
                        over=((Amount(1, "in", "mass"), 1.0),),
                    ),
                ),
                value=0.25,
                u=0.01,
            ),
        ),
        relations=tuple(
            Row(name=f"b {q} stands", form=((Amount(1, "b", q), 1.0),)) for q in quantities
        ),
    )
    state = state_of(problem)
    assert len(state.alike) == 0
    assert not [name for name in state.bound_names if "stream b" in name]
    for engine in (ClosedForm(), Convex()):
        answer = reconcile(problem, engine)
        found = {(e.unknown, e.fraction): e.value for e in answer.estimates}
        assert found[Amount(1, "a", "Cu"), False] == pytest.approx(25.0)
        assert found[Amount(1, "b", "Cu"), False] == pytest.approx(0.0, abs=1e-9)
        assert found[Amount(1, "b", "Cu"), True] is None


def test_an_assay_of_a_stream_tied_to_zero_is_set_aside_from_the_start() -> None:
    """Its sample covers a day on which nothing flowed: no value, and nothing is moved by it."""
    sheet = network({"in": (None, "tee"), "a": ("tee", None), "b": ("tee", None)}, ("mass", "Cu"))

    def reading(stream: str, quantity: str, value: float, u: float) -> Measurement:
        of = ((Amount(1, stream, quantity), 1.0),)
        over = ((Amount(1, stream, "mass"), 1.0),) if quantity != "mass" else None
        return Measurement(
            name=f"{stream} {quantity}",
            period=1,
            kind=MeasurementKind.METER if over is None else MeasurementKind.ASSAY,
            parts=(Part(of=of, over=over),),
            value=value,
            u=u,
        )

    problem = Problem(
        flowsheets=(sheet,),
        measurements=(
            reading("in", "mass", 100.0, 1.0),
            reading("a", "mass", 99.0, 1.0),
            reading("in", "Cu", 0.30, 0.01),
            reading("a", "Cu", 0.30, 0.01),
            reading("b", "Cu", 0.99, 0.001),
        ),
        relations=tuple(
            Row(name=f"b {q} stands", form=((Amount(1, "b", q), 1.0),)) for q in ("mass", "Cu")
        ),
    )
    answer = reconcile(problem, ClosedForm())
    row = next(m for m in answer.measurements if m.measurement.name == "b Cu")
    assert (row.reconciled, row.redundant, row.standardised) == (None, False, None)
    assert answer.objective == pytest.approx(0.5)
    assert answer.degrees_of_freedom == 2
