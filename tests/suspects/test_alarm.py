"""The alarm keeps its stated level, at five and at one per cent, and costs little."""

from __future__ import annotations

import time

import numpy as np
import pytest
from scipy.stats import chi2

from recon.reconcile.read import reconcile
from recon.solve.closed_form import ClosedForm
from recon.suspects.alarm import _simulate, calibrate, raise_alarm, sidak_limit, standardised
from recon.suspects.signatures import residual_basis
from tests.networks import EXCHANGER_ENDS, metered, network, random_network, with_noise

BIASED = dict(zip(EXCHANGER_ENDS, [101.91, 68.45, 34.65, 64.20, 36.44, 98.88], strict=True))


def test_a_bias_of_four_raises_the_alarm() -> None:
    answer = reconcile(metered(network(EXCHANGER_ENDS), BIASED), ClosedForm())
    assert raise_alarm(answer.tests, 0.05).raised
    assert raise_alarm(answer.tests, 0.01).raised


@pytest.mark.parametrize("level", [0.05, 0.01])
def test_the_union_has_the_stated_level(level: float) -> None:
    """Fresh fault-free periods: the false-alarm rate lies within three standard errors.

    Both the limits (20,000 trials) and this check (40,000) are simulated.
    """
    tests = reconcile(metered(network(EXCHANGER_ENDS), BIASED), ClosedForm()).tests
    limits = calibrate(tests, level)
    random = np.random.default_rng(5)
    trials = 40_000
    everything = np.arange(len(tests.leverage))
    projector = tests.residual_covariance(everything)
    left = projector @ random.standard_normal((len(everything), trials))
    largest = np.abs(left / np.sqrt(tests.leverage)[:, None]).max(axis=0)
    p = chi2.sf(np.sum(left**2, axis=0), tests.degrees_of_freedom)
    false = int(np.sum((p < limits.common) | (largest > limits.largest)))
    error = (level * (1 - level) * (1 / trials + 1 / 20_000)) ** 0.5
    assert false / trials == pytest.approx(level, abs=3 * error)


def test_the_simulated_limit_lies_below_the_one_for_independent_tests() -> None:
    tests = reconcile(metered(network(EXCHANGER_ENDS), BIASED), ClosedForm()).tests
    alone = calibrate(tests, 0.05)
    assert alone.common < 0.05
    assert alone.sidak == pytest.approx(2.6310, abs=5e-5)


def test_nothing_redundant_gives_no_alarm_and_no_number() -> None:
    answer = reconcile(metered(network(EXCHANGER_ENDS), {"1": 100.0}), ClosedForm())
    alarm = raise_alarm(answer.tests, 0.05)
    assert (alarm.raised, alarm.global_p, alarm.limit) == (False, None, None)
    assert np.all(standardised(answer.tests) == 0.0)


def test_limits_are_remembered_and_the_same_again() -> None:
    random = np.random.default_rng(3)
    problem = with_noise(random_network(random, nodes=6, metered_share=1.0).problem, random)
    tests = reconcile(problem, ClosedForm()).tests
    basis = residual_basis(tests)
    first = calibrate(tests, 0.05, basis=basis)
    assert calibrate(tests, 0.05, basis=basis) is first
    assert _simulate(basis, 0.05) == first


def test_calibrating_130_candidates_takes_less_than_three_tenths_of_a_second() -> None:
    random = np.random.default_rng(4)
    basis = np.linalg.qr(random.standard_normal((130, 29)))[0]
    spent = []
    for _ in range(3):
        begun = time.process_time()
        _simulate(basis, 0.05)
        spent.append(time.process_time() - begun)
    assert min(spent) < 0.3


def test_sidak_limits_are_the_tabulated_ones() -> None:
    """Two-sided at 0.05: 2.4909 for four tests, 2.6310 for six. From memory, recomputed."""
    assert sidak_limit(0.05, 4) == pytest.approx(2.4909, abs=5e-5)
    assert sidak_limit(0.05, 6) == pytest.approx(2.6310, abs=5e-5)
