"""Signatures obey the identities of the literature, and parallel ones are found."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import chi2, ncx2

from recon.flowsheet.balances import Amount
from recon.reconcile.answer import Answer
from recon.reconcile.problem import (
    Draw,
    Effect,
    Measurement,
    MeasurementKind,
    Part,
    Problem,
)
from recon.reconcile.read import reconcile
from recon.solve.closed_form import ClosedForm
from recon.suspects.signatures import Signatures, signatures_of
from tests.networks import EXCHANGER_ENDS, metered, network, random_network, with_noise

BIASED = dict(zip(EXCHANGER_ENDS, [101.91, 68.45, 34.65, 64.20, 36.44, 98.88], strict=True))


def solved(problem: Problem) -> tuple[Answer, Signatures]:
    answer = reconcile(problem, ClosedForm())
    return answer, signatures_of(answer)


def column(signatures: Signatures, name: str, kind: str | None = None) -> int:
    return next(
        c.columns[0]
        for c in signatures.candidates
        if c.name == name and (kind is None or c.kind == kind)
    )


def test_six_streams_with_a_bias_give_the_printed_statistics() -> None:
    """Narasimhan and Jordache 2000, ch. 1 and 7 (global and nodal values from memory, recomputed).

    The six measurement values are own values; the verdict on stream 2 agrees with the book.
    """
    answer, signatures = solved(metered(network(EXCHANGER_ENDS), BIASED))
    assert answer.test_objective == pytest.approx(16.674, abs=5e-4)
    assert answer.test_objective > chi2.isf(0.05, 4) == pytest.approx(9.488, abs=5e-4)
    t = np.abs(signatures.T[:6])
    expected = [1.253322, 3.204749, 0.493980, 2.000417, 1.698313, 2.457655]
    assert t == pytest.approx(expected, abs=1e-6)


def test_whitened_residual_keeps_the_sum_of_squares_and_lengths_are_leverages() -> None:
    random = np.random.default_rng(2)
    answer, signatures = solved(
        with_noise(random_network(random, nodes=6, metered_share=0.9).problem, random)
    )
    assert signatures.z @ signatures.z == pytest.approx(answer.test_objective, rel=1e-9)
    readings = [c.columns[0] for c in signatures.candidates if c.kind == "meter"]
    rows = [signatures.columns[k].shift[0][0] for k in readings]
    assert signatures.length[readings] ** 2 == pytest.approx(answer.tests.leverage[rows])
    assert answer.tests.leverage.sum() == pytest.approx(answer.degrees_of_freedom)


def test_square_of_a_reading_s_statistic_is_the_fall_when_it_is_made_unmeasured() -> None:
    """Narasimhan and Mah 1987; Crowe 1988 (from memory, recomputed to 1e-9)."""
    problem = metered(network(EXCHANGER_ENDS), BIASED)
    answer, signatures = solved(problem)
    for i, m in enumerate(problem.measurements):
        rest = tuple(other for other in problem.measurements if other is not m)
        without = reconcile(replace(problem, measurements=rest), ClosedForm())
        fall = answer.test_objective - without.test_objective
        assert signatures.T[i] ** 2 == pytest.approx(fall, abs=1e-9)


def test_square_of_a_balance_s_statistic_is_the_fall_when_it_is_dropped() -> None:
    """Abstract of Can. J. Chem. Eng. 70 (1992) 1030-1036, source found; here to 1e-9."""
    problem = metered(network(EXCHANGER_ENDS), BIASED)
    answer, signatures = solved(problem)
    sheet = problem.flowsheets[0]
    for k, node in enumerate(sheet.nodes):
        nodes = tuple(n if n is not node else replace(n, conserves=()) for n in sheet.nodes)
        loose = replace(problem, flowsheets=(replace(sheet, nodes=nodes),))
        fall = answer.test_objective - reconcile(loose, ClosedForm()).test_objective
        g = signatures.openings[:, k]
        assert (g @ signatures.z) ** 2 / (g @ g) == pytest.approx(fall, abs=1e-9)


def test_nodal_residuals_are_the_printed_ones() -> None:
    """Same book: node residuals -1.19, 4.25, -1.79, 1.76 (from memory, recomputed)."""
    _, signatures = solved(metered(network(EXCHANGER_ENDS), BIASED))
    gram = signatures.openings.T @ signatures.openings
    found = np.linalg.solve(gram, signatures.openings.T @ signatures.z)
    assert found == pytest.approx([-1.19, 4.25, -1.79, 1.76], abs=1e-9)


@pytest.mark.parametrize(("bias", "power"), [(2, 0.2194), (4, 0.7475), (6, 0.9863)])
def test_power_of_the_overall_test_is_the_noncentral_chi_square_s(bias: int, power: float) -> None:
    """Own values of published-checks 1.2: noncentrality 2/3 of the squared bias, each stream."""
    _, signatures = solved(metered(network(EXCHANGER_ENDS), BIASED))
    limit = chi2.isf(0.05, 4)
    assert ncx2.sf(limit, 4, 2 / 3 * bias**2) == pytest.approx(power, abs=5e-5)
    trials = 40_000
    noise = np.random.default_rng(8).standard_normal((4, trials))
    for k in range(6):
        z = noise + bias * signatures.G[:, [k]]
        found = float(np.mean(np.sum(z**2, axis=0) > limit))
        assert found == pytest.approx(power, abs=4 * (power * (1 - power) / trials) ** 0.5)


def test_parallel_streams_cannot_be_told_apart() -> None:
    """Iordache, Mah and Tamhane 1985 (from memory)."""
    ends = {
        "in": (None, "A"),
        "p": ("A", "B"),
        "q": ("A", "B"),
        "out": ("B", None),
        "side": ("A", None),
    }
    readings = {"in": 100.0, "p": 40.0, "q": 32.0, "out": 70.0, "side": 29.0}
    _, signatures = solved(metered(network(ends), readings, u=1.0))
    label = signatures.classes
    assert label[column(signatures, "Fp")] == label[column(signatures, "Fq")]
    assert label[column(signatures, "Fp")] != label[column(signatures, "Fout")]
    assert abs(signatures.T[column(signatures, "Fp")]) == pytest.approx(
        abs(signatures.T[column(signatures, "Fq")])
    )


def test_a_leak_looks_like_a_bias_of_a_stream_between_its_node_and_outside() -> None:
    _, signatures = solved(metered(network(EXCHANGER_ENDS), BIASED))
    label = signatures.classes
    splitter, entering = column(signatures, "splitter", "leak"), column(signatures, "F1")
    assert label[splitter] == label[entering]
    assert signatures.T[splitter] == pytest.approx(signatures.T[entering])
    assert label[column(signatures, "exchanger", "leak")] != label[column(signatures, "F2")]


def test_a_leak_of_known_size_is_found_at_its_node() -> None:
    readings = {"1": 100.0, "2": 64.0, "3": 36.0, "4": 54.0, "5": 36.0, "6": 90.0}
    _, signatures = solved(metered(network(EXCHANGER_ENDS), readings))
    k = column(signatures, "exchanger", "leak")
    g = signatures.G[:, k]
    assert g @ signatures.z / (g @ g) == pytest.approx(10.0, abs=1e-9)
    assert signatures.z - 10.0 * g == pytest.approx(np.zeros(4), abs=1e-9)


def test_a_shared_source_is_a_suspect_with_the_sign_of_its_offset() -> None:
    """Two meters on one scale read 6 % high together; the two others are right."""
    sheet = network({"a": (None, "n"), "b": (None, "n"), "c": ("n", None), "d": ("n", None)})

    def meter(stream: str, value: float, shared: bool) -> Measurement:
        return Measurement(
            name=stream,
            period=1,
            kind=MeasurementKind.METER,
            parts=(Part(of=((Amount(1, stream, "mass"), 1.0),)),),
            value=value,
            u=0.5,
            effects=(Effect(draw=0, factor=1.0, relative=True),) if shared else (),
        )

    problem = Problem(
        flowsheets=(sheet,),
        measurements=(
            meter("a", 106.0, True),
            meter("b", 53.0, True),
            meter("c", 90.0, False),
            meter("d", 60.0, False),
        ),
        draws=(Draw(source="belt scale", first=1, u=0.01),),
    )
    _, signatures = solved(problem)
    k = column(signatures, "belt scale", "source")
    assert signatures.T[k] > 3
    size = signatures.T[k] / signatures.length[k] * signatures.columns[k].scale
    assert size == pytest.approx(0.06, rel=0.02)
