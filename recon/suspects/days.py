"""What each day says of every suspect, in coordinates that survive a missing reading.

A whitened residual has no fixed coordinates: they change when a reading is missing or a stream
stops. ``N = G'z`` and ``M = G'G`` do not; they are kept by the suspect's name. For the question
"has it moved?" residuals are whitened with the random part alone, so whatever is constant (a shared
source, a certificate's error) is a constant of the data and goes with the baseline.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from scipy import sparse

from recon.suspects.signatures import signatures_at

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from recon.reconcile.answer import Answer
    from recon.reconcile.linearise import Local
    from recon.reconcile.solver import Engine

    Vector = NDArray[np.float64]

Key = tuple[str, str]
"""Kind and name of a suspect."""
RANK = 1e-9


@dataclass(frozen=True, kw_only=True)
class DayEvidence:
    """
    One day's information on single suspects, per printed unit of fault.

    Attributes
    ----------
    day : int
    keys : tuple of (kind, name)
    N, M : ndarray
        ``G'z``, shape (C,), and ``G'G``, shape (C, C), of the random part.
    """

    day: int
    keys: tuple[Key, ...]
    N: Vector
    M: Vector


@dataclass(frozen=True, kw_only=True)
class Baseline:
    """
    What was constant over a span of days without a fault.

    Attributes
    ----------
    keys : tuple of (kind, name)
    days : int
    M : ndarray
        Summed information, shape (C, C); ``inverse`` its pseudo-inverse: the variance of
    constant : ndarray
        the constant faults that the span's residuals amount to, shape (C,) [printed units].
    persistence : float
        Correlation of one day's statistics with the next day's, pooled over suspects [-].
    """

    keys: tuple[Key, ...]
    days: int
    M: Vector
    inverse: Vector
    constant: Vector
    persistence: float


def day_evidence(answer: Answer, engine: Engine, *, day: int) -> DayEvidence:
    """
    Read one day's information off its own fit.

    Parameters
    ----------
    answer : Answer
        Of that day alone.
    engine : Engine
        Factorises the problem with the shared sources held still.
    day : int
    """
    state = answer.test_state
    still = random_part(answer.test_local, len(state.fit.measurements), answer.solution.point.beta)
    signatures = signatures_at(engine.sensitivities(still), state, still, answer.solution.point.x)
    single = [c for c in signatures.candidates if len(c.columns) == 1 and c.kind != "source"]
    columns = [c.columns[0] for c in single]
    scale = np.array([signatures.columns[k].scale for k in columns])
    G = signatures.G[:, columns] / scale if columns else np.zeros((len(signatures.z), 0))
    return DayEvidence(
        day=day,
        keys=tuple(_distinct([(c.kind, c.name) for c in single])),
        N=G.T @ signatures.z,
        M=G.T @ G,
    )


def _distinct(keys: list[Key]) -> list[Key]:
    """Number leaks of several compositions at one node."""
    seen: dict[Key, int] = {}
    result = []
    for kind, name in keys:
        seen[kind, name] = seen.get((kind, name), 0) + 1
        again = seen[kind, name]
        result.append((kind, name if again == 1 else f"{name} ({again})"))
    return result


def random_part(local: Local, readings: int, beta: Vector) -> Local:
    """Hold every shared offset at zero: residuals of the random part, constants left in."""
    if not len(beta):
        return local
    wide = local.data.shape[1]
    drift = local.data[:readings, wide - len(beta) :]
    still = sparse.csr_array(
        sparse.diags_array(np.r_[np.ones(wide - len(beta)), np.zeros(len(beta))])
    )
    top = local.data[:readings] @ still
    misfit = local.misfit.copy()
    misfit[:readings] += drift @ beta
    misfit[readings:] = 0.0
    return replace(
        local,
        data=sparse.csr_array(sparse.vstack([top, local.data[readings:]])),
        misfit=misfit,
    )


def aligned(
    days: Sequence[DayEvidence], keys: Sequence[Key] | None = None
) -> tuple[tuple[Key, ...], list[tuple[Vector, Vector]]]:
    """Lay days out over one list of suspects; who is missing on a day says nothing that day."""
    every = (
        tuple(keys) if keys is not None else tuple(dict.fromkeys(k for d in days for k in d.keys))
    )
    place = {key: i for i, key in enumerate(every)}
    result = []
    for day in days:
        kept = [(i, place[k]) for i, k in enumerate(day.keys) if k in place]
        rows = np.array([i for i, _ in kept], dtype=np.intp)
        to = np.array([j for _, j in kept], dtype=np.intp)
        N, M = np.zeros(len(every)), np.zeros((len(every), len(every)))
        N[to] = day.N[rows]
        M[np.ix_(to, to)] = day.M[np.ix_(rows, rows)]
        result.append((N, M))
    return every, result


def baseline_of(days: Sequence[DayEvidence]) -> Baseline:
    """
    Learn what is constant from fault-free days.

    Parameters
    ----------
    days : sequence of DayEvidence
        At least two, in time order.

    Notes
    -----
    Any constant error of the readings is a constant vector t of faults with ``E[N_d] = M_d t``
    whatever was missing on a day, so t is estimated by least squares over the span. Persistence is
    the lag-one correlation of the standardised statistics after t is taken out.
    """
    if len(days) < 2:
        raise ValueError("a baseline needs at least two days")
    keys, laid = aligned(days)
    total = np.sum([M for _, M in laid], axis=0)
    inverse = pseudo_inverse(total)
    constant = inverse @ np.sum([N for N, _ in laid], axis=0)
    d = np.array([_statistics(N - M @ constant, M) for N, M in laid])
    seen = np.all(d != 0.0, axis=0)
    moved = d[:, seen]
    lag = float(np.sum(moved[1:] * moved[:-1])) / max(float(np.sum(moved**2)), 1e-300)
    # Taking the mean out of n days lowers a lag-one correlation by about 1/n.
    return Baseline(
        keys=keys,
        days=len(days),
        M=total,
        inverse=inverse,
        constant=constant,
        persistence=min(max(lag + 1 / len(days), 0.0), 0.95),
    )


def pseudo_inverse(M: Vector) -> Vector:
    """Invert information on what it is information about."""
    size = np.sqrt(np.where(np.diag(M) > 0, np.diag(M), 1.0))
    values, vectors = np.linalg.eigh(M / np.outer(size, size))
    keep = values > RANK * max(float(values.max(initial=0.0)), 1e-300)
    onto = vectors[:, keep] / size[:, None]
    return np.asarray((onto / values[keep]) @ onto.T)


def _statistics(N: Vector, M: Vector) -> Vector:
    spread = np.sqrt(np.maximum(np.diag(M), 0.0))
    return np.where(spread > 0, N / np.where(spread > 0, spread, 1.0), 0.0)
