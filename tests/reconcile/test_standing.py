"""A stream that stands has no fraction, and the fit goes on without its assays."""

from __future__ import annotations

from recon.flowsheet.balances import Amount
from recon.reconcile.problem import Measurement, MeasurementKind, Part, Problem
from recon.reconcile.read import STREAM_STANDS, reconcile
from recon.solve.closed_form import ClosedForm
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
