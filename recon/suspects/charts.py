"""Has something moved: charts over days for every suspect at once, at one plant-wide rate."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from recon.suspects.days import Baseline, aligned

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from recon.suspects.days import DayEvidence, Key

    Vector = NDArray[np.float64]

WEIGHT = 0.1
"""Weight of the newest day in a moving average; all good charts are within a few per cent of it."""
RUNS = 200
SEED = 20_261_203


@dataclass(frozen=True, kw_only=True)
class ChartDay:
    """
    State of all charts at the end of one day.

    Attributes
    ----------
    day : int
    scores : ndarray
        Weighted information by its standard deviation, baseline's share included, shape (C,) [-].
    leading : (kind, name)
        Suspect whose chart is farthest out; ``score`` its value.
    raised : bool
    """

    day: int
    scores: Vector
    leading: Key
    score: float
    raised: bool


def run_charts(
    days: Sequence[DayEvidence], baseline: Baseline, limit: float, *, weight: float = WEIGHT
) -> tuple[ChartDay, ...]:
    """
    Run the moving-average charts of all suspects.

    Parameters
    ----------
    days : sequence of DayEvidence
        After the baseline, in time order; a day may be missing.
    baseline : Baseline
    limit : float
        Of ``plant_limit`` [-].
    weight : float
    """
    keys, laid = aligned(days, baseline.keys)
    count = len(keys)
    N, V, B = np.zeros(count), np.zeros((count, count)), np.zeros((count, count))
    result = []
    for day, (n, m) in zip(days, laid, strict=True):
        N = (1 - weight) * N + weight * (n - m @ baseline.constant)
        V = (1 - weight) ** 2 * V + weight**2 * m
        B = (1 - weight) * B + weight * m
        spread = np.diag(V) + np.einsum("ij,jk,ki->i", B, baseline.inverse, B)
        safe = np.where(spread > 0, spread, 1.0)
        scores = np.where(spread > 0, N / np.sqrt(safe), 0.0)
        lead = int(np.argmax(np.abs(scores)))
        result.append(
            ChartDay(
                day=day.day,
                scores=scores,
                leading=keys[lead],
                score=float(scores[lead]),
                raised=bool(abs(scores[lead]) > limit),
            )
        )
    return tuple(result)


def plant_limit(
    baseline: Baseline,
    *,
    between_alarms: float,
    weight: float = WEIGHT,
    persistence: float | None = None,
) -> float:
    """
    Find the limit at which all charts together alarm once in so many fault-free days.

    Simulates the baseline's network with its correlations, the baseline's own error, and the
    persistence from day to day that it showed.

    Parameters
    ----------
    baseline : Baseline
    between_alarms : float
        Mean number of fault-free days from one alarm to the next [d].
    weight : float
    persistence : float, optional
        Instead of the baseline's.

    Notes
    -----
    A run starts afresh after an alarm; the mean time is days simulated by alarms counted.
    """
    phi = baseline.persistence if persistence is None else persistence
    daily = baseline.M / baseline.days
    values, vectors = np.linalg.eigh(_correlation(daily))
    keep = values > 1e-9
    root = vectors[:, keep] * np.sqrt(values[keep])
    freedom = int(keep.sum())
    random = np.random.default_rng(SEED)
    horizon = int(4 * between_alarms)
    constant = random.standard_normal((freedom, RUNS)) * np.sqrt(_mean_variance(baseline.days, phi))
    noise = random.standard_normal((freedom, RUNS))
    e, own, shared = np.zeros((freedom, RUNS)), 0.0, 0.0
    largest = np.empty((horizon, RUNS))
    for day in range(horizon):
        e = (1 - weight) * e + weight * (noise - constant)
        own = (1 - weight) ** 2 * own + weight**2
        shared = (1 - weight) * shared + weight
        spread = np.sqrt(own + shared**2 / baseline.days)
        largest[day] = np.abs(root @ e).max(axis=0) / spread
        fresh = random.standard_normal((freedom, RUNS))
        noise = phi * noise + np.sqrt(1 - phi**2) * fresh
    low, high = 1.0, 20.0
    for _ in range(40):
        middle = (low + high) / 2
        if _mean_run(largest, middle) < between_alarms:
            low = middle
        else:
            high = middle
    return high


def _mean_run(largest: Vector, limit: float) -> float:
    """Days to the first alarm, with runs that end without one counted by their length."""
    over = largest > limit
    hit = over.any(axis=0)
    length = np.where(hit, over.argmax(axis=0) + 1, largest.shape[0])
    return float(length.sum()) / max(int(hit.sum()), 1)


def _correlation(M: Vector) -> Vector:
    spread = np.sqrt(np.maximum(np.diag(M), 0.0))
    seen = spread > 0
    inner = M[np.ix_(seen, seen)]
    return np.asarray(inner / np.outer(spread[seen], spread[seen]))


def _mean_variance(days: int, phi: float) -> float:
    """Variance of the mean of so many days with a persistence."""
    lags = np.arange(1, days)
    return float((1 + 2 * np.sum((1 - lags / days) * phi**lags)) / days)


def cusum(series: Vector, *, slack: float, limit: float, start: float = 0.0) -> int | None:
    """
    Run a two-sided cumulative sum of a standardised series (Page 1954).

    Parameters
    ----------
    series : ndarray
        Shape (T,), unit variance.
    slack : float
        k, half the shift looked for [-].
    limit : float
        h [-].
    start : float
        Head start of both sums [-].

    Returns
    -------
    int or None
        Place of the first alarm, 1-based.
    """
    up = down = start
    for i, value in enumerate(series, start=1):
        up = max(0.0, up + float(value) - slack)
        down = max(0.0, down - float(value) - slack)
        if up > limit or down > limit:
            return i
    return None


def moving_average(series: Vector, *, weight: float, limit: float) -> int | None:
    """
    Run an exponentially weighted moving average with its steady-state limit (Lucas 1990).

    Parameters
    ----------
    series : ndarray
        Shape (T,), unit variance.
    weight, limit : float
        lambda and L [-].

    Returns
    -------
    int or None
        Place of the first alarm, 1-based.
    """
    spread = float(np.sqrt(weight / (2 - weight)))
    e = 0.0
    for i, value in enumerate(series, start=1):
        e += weight * (float(value) - e)
        if abs(e) > limit * spread:
            return i
    return None
