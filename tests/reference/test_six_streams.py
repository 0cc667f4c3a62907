"""Heat exchanger with bypass. Narasimhan and Jordache, Data Reconciliation and Gross Error
Detection, Gulf, 2000, chapters 1 and 7. Status: from memory, recomputed."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import chi2, ncx2, norm

from recon.findings import Statistic
from recon.flowsheet.balances import Amount, balance_rows
from recon.reconcile.answer import Answer
from recon.reconcile.read import reconcile
from recon.reconcile.solver import Engine
from recon.solve.closed_form import ClosedForm
from recon.solve.convex import Convex
from recon.suspects.alarm import standardised
from tests.networks import EXCHANGER_ENDS, metered, network

CLEAN = [101.91, 64.45, 34.65, 64.20, 36.44, 98.88]
BIASED = [101.91, 68.45, 34.65, 64.20, 36.44, 98.88]

pytestmark = pytest.mark.reference


def answer_of(readings: list[float], engine: Engine) -> Answer:
    sheet = network(EXCHANGER_ENDS)
    return reconcile(metered(sheet, dict(zip(EXCHANGER_ENDS, readings, strict=True))), engine)


def amounts(answer: Answer) -> list[float]:
    return [round(e.value, 2) for e in answer.estimates if e.value is not None]


@pytest.mark.parametrize("engine", [ClosedForm(), Convex()], ids=lambda e: e.name)
def test_reconciled_flows_agree_to_two_decimals(engine: Engine) -> None:
    assert amounts(answer_of(CLEAN, engine)) == [100.22, 64.50, 35.72, 64.50, 35.72, 100.22]
    assert amounts(answer_of(BIASED, engine)) == [100.89, 65.83, 35.05, 65.83, 35.05, 100.89]


def test_global_statistic_of_the_biased_case() -> None:
    test = answer_of(BIASED, ClosedForm()).test
    assert isinstance(test, Statistic)
    assert round(test.value, 3) == 16.674
    assert test.degrees_of_freedom == 4
    assert test.value > round(float(chi2.isf(0.05, 4)), 3) == 9.488


def test_global_statistic_of_the_clean_case_is_not_rejected() -> None:
    """Own value 6.4075: a regression anchor, not a published figure."""
    test = answer_of(CLEAN, ClosedForm()).test
    assert isinstance(test, Statistic)
    assert round(test.value, 4) == 6.4075
    assert test.p_value > 0.05


def test_measurement_statistics_flag_stream_two_alone() -> None:
    """Own values; the verdict agrees with the book. Sidak value for six tests: from memory."""
    t = np.abs(standardised(answer_of(BIASED, ClosedForm()).tests))
    expected = [1.253322, 3.204749, 0.493980, 2.000417, 1.698313, 2.457655]
    np.testing.assert_allclose(t, expected, atol=1e-6)
    sidak = float(norm.isf((1 - 0.95 ** (1 / 6)) / 2))
    assert round(sidak, 4) == 2.6310
    assert [i for i, value in enumerate(t) if value > sidak] == [1]


def test_node_residuals_and_nodal_statistics() -> None:
    """Node residuals and nodal values as printed; the nodal test is recomputed from balances."""
    sheet = network(EXCHANGER_ENDS)
    residual, z = [], []
    for row in balance_rows([sheet]):
        coefficients = {u.stream: c for u, c in row.form if isinstance(u, Amount)}
        gap = sum(c * BIASED[int(s) - 1] for s, c in coefficients.items())
        residual.append(round(gap, 2))
        z.append(round(abs(gap) / len(coefficients) ** 0.5, 4))
    assert residual == [-1.19, 4.25, -1.79, 1.76]
    assert z == pytest.approx([0.6870, 3.0052, 1.2657, 1.0161], abs=2e-4)


def test_glr_equals_squared_statistic_and_the_fall_when_unmeasured() -> None:
    """Identity of Narasimhan and Mah 1987 and Crowe 1988 (from memory), recomputed to 1e-9."""
    whole = answer_of(BIASED, ClosedForm())
    t = standardised(whole.tests)
    for i, stream in enumerate(EXCHANGER_ENDS):
        readings = {s: v for s, v in zip(EXCHANGER_ENDS, BIASED, strict=True) if s != stream}
        without = reconcile(metered(network(EXCHANGER_ENDS), readings), ClosedForm())
        fall = whole.test_objective - without.test_objective
        assert fall == pytest.approx(t[i] ** 2, abs=1e-9)


@pytest.mark.parametrize(("size", "power"), [(2.0, 0.2194), (4.0, 0.7475), (6.0, 0.9863)])
def test_power_of_the_global_test(size: float, power: float) -> None:
    """Own values: noncentral chi-square with noncentrality two thirds of the squared bias."""
    leverage = answer_of(CLEAN, ClosedForm()).tests.leverage[1]
    found = float(ncx2.sf(chi2.isf(0.05, 4), 4, leverage * size**2))
    assert round(found, 4) == power


@pytest.mark.parametrize("engine", [ClosedForm(), Convex()], ids=lambda e: e.name)
def test_a_stream_that_nothing_determines_gets_no_number(engine: Engine) -> None:
    """Streams 3 and 5 unmeasured are found by balance; 2, 3, 4 and 5 unmeasured are not."""
    sheet = network(EXCHANGER_ENDS)
    readings = dict(zip(EXCHANGER_ENDS, CLEAN, strict=True))
    some = {s: readings[s] for s in ("1", "2", "6")}
    found = reconcile(metered(sheet, some), engine)
    assert all(e.determined for e in found.estimates)
    checked = {m.measurement.name: m.redundant for m in found.measurements}
    assert checked == {"F1": True, "F2": False, "F6": True}
    few = reconcile(metered(sheet, {s: readings[s] for s in ("1", "6")}), engine)
    missing = [
        e.unknown.stream for e in few.estimates if e.value is None and isinstance(e.unknown, Amount)
    ]
    assert missing == ["2", "3", "4", "5"]
