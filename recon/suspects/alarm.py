"""Do the residuals say that something is wrong: one alarm at a stated false-alarm rate.

The alarm is the union of the overall test and the largest single test. Both stand at one common
level, found by simulation so that the union has the stated level; half each would be too quiet.
"""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.stats import chi2, norm

from recon.reconcile.figures import REDUNDANT
from recon.suspects.signatures import classes_of, residual_basis

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from recon.reconcile.solver import Sensitivities

    Vector = NDArray[np.float64]

TRIALS = 20_000
"""Fault-free periods simulated; ``TRIALS_LARGE`` where a whole month makes each dear."""
TRIALS_LARGE = 8_000
LARGE = 200_000
"""Signatures times degrees of freedom above which a problem is large."""
SEED = 20_261_201
BLOCK = 2_000
KEPT = 128
_KNOWN: dict[tuple[str, float], Limits] = {}


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
    sidak : float
        Limit that would hold if the signatures were independent, for comparison only [-].
    """

    level: float
    common: float
    largest: float
    sidak: float


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


def calibrate(tests: Sensitivities, level: float, *, basis: Vector | None = None) -> Limits:
    """
    Find the limits by simulating fault-free periods; cached by the digest of the signatures.

    Parameters
    ----------
    tests : Sensitivities
        Of the problem without inequality bounds, with at least one degree of freedom.
    level : float
        Wanted false-alarm rate of the union, for example 0.05 [-].
    basis : ndarray, optional
        ``residual_basis(tests)`` where it is known already.

    Returns
    -------
    Limits
    """
    onto = residual_basis(tests) if basis is None else basis
    onto = onto[tests.leverage > REDUNDANT]
    key = (hashlib.sha256(np.ascontiguousarray(onto).tobytes()).hexdigest(), level)
    if key not in _KNOWN:
        while len(_KNOWN) >= KEPT:
            _KNOWN.pop(next(iter(_KNOWN)))
        _KNOWN[key] = _simulate(onto, level)
    return _KNOWN[key]


def sidak_limit(level: float, tests: int) -> float:
    """
    Limit of the largest of so many independent two-sided normal tests.

    Examples
    --------
    >>> round(sidak_limit(0.05, 4), 4), round(sidak_limit(0.05, 6), 4)
    (2.4909, 2.631)
    """
    each = -np.expm1(np.log1p(-level) / tests)
    return float(norm.isf(each / 2))


def _simulate(onto: Vector, level: float) -> Limits:
    """Simulate white residuals in the space they live in; one signature of each class is enough."""
    unit = (onto / np.linalg.norm(onto, axis=1)[:, None]).T
    _, first = np.unique(classes_of(unit), return_index=True)
    one_each = unit[:, np.sort(first)].T
    freedom = onto.shape[1]
    large = one_each.size > LARGE
    trials = TRIALS_LARGE if large else TRIALS
    kind = np.float32 if large else np.float64
    rows = one_each.astype(kind)
    random = np.random.default_rng(SEED)
    largest, total = np.empty(trials), np.empty(trials)
    for begin in range(0, trials, BLOCK):
        z = random.standard_normal((freedom, BLOCK))
        largest[begin : begin + BLOCK] = np.abs(rows @ z.astype(kind)).max(axis=0)
        total[begin : begin + BLOCK] = np.sum(z * z, axis=0)
    p_overall = chi2.sf(total, freedom)
    p_largest = np.empty(trials)
    p_largest[np.argsort(-largest)] = (np.arange(trials) + 1) / trials
    common = float(np.quantile(np.minimum(p_overall, p_largest), level))
    return Limits(
        level=level,
        common=common,
        largest=float(np.quantile(largest, 1 - common)),
        sidak=sidak_limit(level, len(one_each)),
    )


def raise_alarm(
    tests: Sensitivities,
    level: float,
    *,
    basis: Vector | None = None,
    limits: Limits | None = None,
) -> Alarm:
    """
    Test one fit at a stated plant-wide false-alarm rate.

    Parameters
    ----------
    tests : Sensitivities
        Of the problem without inequality bounds.
    level : float
    basis : ndarray, optional
        ``residual_basis(tests)`` where it is known already.
    limits : Limits, optional
        Calibrated before, for the same site and a like day; else they are calibrated here.

    Examples
    --------
    See ``tests/suspects/test_alarm.py``: six streams, a bias of four on the second.
    """
    if tests.degrees_of_freedom <= 0:
        return Alarm(raised=False, level=level, global_p=None, largest=None, limit=None)
    known = limits or calibrate(tests, level, basis=basis)
    residuals = tests.residuals
    global_p = float(chi2.sf(float(residuals @ residuals), tests.degrees_of_freedom))
    largest = float(np.max(np.abs(standardised(tests))))
    return Alarm(
        raised=global_p < known.common or largest > known.largest,
        level=level,
        global_p=global_p,
        largest=largest,
        limit=known.largest,
    )
