"""The alarm keeps its stated level, and the single most likely group is named."""

from __future__ import annotations

import numpy as np
import pytest

from recon.reconcile.read import reconcile
from recon.solve.closed_form import ClosedForm
from recon.suspects.alarm import calibrate, raise_alarm, standardised
from recon.suspects.single import most_likely
from tests.networks import EXCHANGER_ENDS, metered, network

BIASED = dict(zip(EXCHANGER_ENDS, [101.91, 68.45, 34.65, 64.20, 36.44, 98.88], strict=True))


def test_a_bias_of_four_raises_the_alarm_and_names_the_meter() -> None:
    answer = reconcile(metered(network(EXCHANGER_ENDS), BIASED), ClosedForm())
    alarm = raise_alarm(answer.tests, 0.05)
    assert alarm.raised
    (suspect,) = most_likely(answer, alarm)
    assert (suspect.kind, suspect.names) == ("meter", ("F2",))
    assert suspect.size == pytest.approx(3.925, abs=1e-3)


@pytest.mark.parametrize("level", [0.05, 0.01])
def test_the_union_has_the_stated_level(level: float) -> None:
    """Fresh fault-free periods: the false-alarm rate lies within three standard errors."""
    tests = reconcile(metered(network(EXCHANGER_ENDS), BIASED), ClosedForm()).tests
    limits = calibrate(tests, level)
    random = np.random.default_rng(5)
    trials, false = 40_000, 0
    everything = np.arange(len(tests.leverage))
    projector = tests.residual_covariance(everything)
    from scipy.stats import chi2

    left = projector @ random.standard_normal((len(everything), trials))
    largest = np.abs(left / np.sqrt(tests.leverage)[:, None]).max(axis=0)
    p = chi2.sf(np.sum(left**2, axis=0), tests.degrees_of_freedom)
    false = int(np.sum((p < limits.common) | (largest > limits.largest)))
    assert false / trials == pytest.approx(level, abs=3 * (level / trials) ** 0.5 + 0.1 * level)


def test_nothing_redundant_gives_no_alarm_and_no_number() -> None:
    answer = reconcile(metered(network(EXCHANGER_ENDS), {"1": 100.0}), ClosedForm())
    alarm = raise_alarm(answer.tests, 0.05)
    assert (alarm.raised, alarm.global_p, alarm.limit) == (False, None, None)
    assert np.all(standardised(answer.tests) == 0.0)
