"""Do the residuals say that something is wrong: one alarm at a stated false-alarm rate.

The alarm is the union of the overall test and the largest single test. Both stand at one common
level, found by simulation so that the union has the stated level; half each would be too quiet.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.stats import chi2

from recon.reconcile.figures import REDUNDANT

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from recon.reconcile.solver import Sensitivities

    Vector = NDArray[np.float64]

TRIALS = 20_000
SEED = 20_261_201
BLOCK = 2_000


@dataclass(frozen=True, kw_only=True)
class Limits:
    """
    Calibrated limits of one network of readings.

    Attributes
    ----------
    level : float
        Stated false-alarm rate of the union [-].
    common : float
        Common level of the two tests [-].
    largest : float
        Limit of the largest absolute standardised residual [-].
    """

    level: float
    common: float
    largest: float


@dataclass(frozen=True, kw_only=True)
class Alarm:
    """The alarm of one fit; ``global_p`` and the limit are None where nothing can be tested."""

    raised: bool
    level: float
    global_p: float | None
    largest: float | None
    limit: float | None


def standardised(tests: Sensitivities) -> Vector:
    """Residuals by their own standard deviations, 0 where nothing is checked; shape (m + g,)."""
    checked = tests.leverage > REDUNDANT
    safe = np.where(checked, tests.leverage, 1.0)
    return np.where(checked, tests.residuals / np.sqrt(safe), 0.0)


def calibrate(tests: Sensitivities, level: float) -> Limits:
    """
    Find the limits by simulating fault-free periods.

    Parameters
    ----------
    tests : Sensitivities
        Of the problem without inequality bounds, with at least one degree of freedom.
    level : float
        Wanted false-alarm rate of the union, for example 0.05 [-].

    Returns
    -------
    Limits
    """
    leverage = tests.leverage
    checked = np.flatnonzero(leverage > REDUNDANT)
    onto = tests.residual_covariance(checked)
    spread = np.sqrt(leverage[checked])
    values, vectors = np.linalg.eigh(onto[checked])
    keep = values > 1e-9
    root = (vectors[:, keep] * np.sqrt(values[keep])) / spread[:, None]
    random = np.random.default_rng(SEED)
    largest, total = np.empty(TRIALS), np.empty(TRIALS)
    for first in range(0, TRIALS, BLOCK):
        z = random.standard_normal((int(keep.sum()), BLOCK))
        largest[first : first + BLOCK] = np.abs(root @ z).max(axis=0)
        total[first : first + BLOCK] = np.sum(z * values[keep][:, None] * z, axis=0)
    p_overall = chi2.sf(total, tests.degrees_of_freedom)
    order = np.argsort(-largest)
    p_largest = np.empty(TRIALS)
    p_largest[order] = (np.arange(TRIALS) + 1) / TRIALS
    common = float(np.quantile(np.minimum(p_overall, p_largest), level))
    return Limits(level=level, common=common, largest=float(np.quantile(largest, 1 - common)))


def raise_alarm(tests: Sensitivities, level: float) -> Alarm:
    """
    Test one fit at a stated plant-wide false-alarm rate.

    Examples
    --------
    See ``tests/suspects/test_alarm.py``: six streams, a bias of four on the second.
    """
    if tests.degrees_of_freedom <= 0:
        return Alarm(raised=False, level=level, global_p=None, largest=None, limit=None)
    limits = calibrate(tests, level)
    residuals = tests.residuals
    global_p = float(chi2.sf(float(residuals @ residuals), tests.degrees_of_freedom))
    largest = float(np.max(np.abs(standardised(tests))))
    return Alarm(
        raised=global_p < limits.common or largest > limits.largest,
        level=level,
        global_p=global_p,
        largest=largest,
        limit=limits.largest,
    )
