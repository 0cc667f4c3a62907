"""What each possible fault would look like in the residuals, and which look alike.

With every reading's independent error and every draw's offset as a datum of variance one, the
residuals are ``r = P e`` with P a projector. In an orthonormal basis Q of its range they are
``z = Q'r ~ N(G b, I)``: white, with one column of G for each direction in which the data can be
wrong. Inequality bounds take no part.
"""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
from scipy import sparse
from scipy.linalg.lapack import dpstrf
from scipy.sparse.csgraph import connected_components

from recon.suspects.candidates import SLABS, Candidate, Column, reading_columns, sampler_groups
from recon.suspects.leaks import LEAK_SLABS, balances_of, leaks_of

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from recon.reconcile.answer import Answer
    from recon.reconcile.linearise import Local
    from recon.reconcile.solver import Sensitivities
    from recon.reconcile.state import State

    Vector = NDArray[np.float64]

ALIKE = 1e-7
"""Two signatures whose cosine misses one by less than this cannot be told apart."""
NEAR = 0.95
"""Above this cosine they can be told apart only by a large fault."""
BLIND = 0.02
"""A datum that keeps less than this share of its variance in its residual shows next to nothing."""
WEAK = 0.1
UNSEEN = 1e-6
"""A leak whose largest plausible size moves the residuals by less than this is not a suspect."""
BLOCK = 512


@dataclass(frozen=True, kw_only=True)
class Signatures:
    """
    Suspects and their signatures in one fit.

    Attributes
    ----------
    basis : ndarray
        Q, orthonormal, shape (m + g, f), f degrees of freedom.
    z : ndarray
        Whitened residual, shape (f,).
    G : ndarray
        Signatures per amplitude one, shape (f, C).
    columns : tuple of Column
    candidates : tuple of Candidate
    balances : tuple of str
        Names of node balances, and ``openings``: signature of a tonne lost there, (f, B).
    """

    basis: Vector
    z: Vector
    G: Vector
    columns: tuple[Column, ...]
    candidates: tuple[Candidate, ...]
    balances: tuple[str, ...]
    openings: Vector

    @cached_property
    def length(self) -> Vector:
        """Length of each signature, shape (C,)."""
        return np.asarray(np.sqrt(np.sum(self.G**2, axis=0)))

    @cached_property
    def T(self) -> Vector:  # noqa: N802
        """Maximum-power statistic of each direction, shape (C,); positive = reads high, or lost."""
        return np.asarray(self.G.T @ self.z / self.length)

    @cached_property
    def classes(self) -> NDArray[np.intp]:
        """Label of each direction; the same for those whose signatures are parallel, shape (C,)."""
        return classes_of(self.G / self.length)

    @cached_property
    def digest(self) -> str:
        """Digest of the signatures and plausible sizes."""
        slabs = np.array([c.slabs for c in self.columns])
        text = hashlib.sha256(np.ascontiguousarray(self.G).tobytes())
        text.update(slabs.tobytes())
        text.update(repr([c.columns for c in self.candidates]).encode())
        return text.hexdigest()

    def cosines(self, column: int) -> Vector:
        """Cosine of every signature with one, shape (C,)."""
        unit = self.G[:, column] / self.length[column]
        return np.asarray(unit @ self.G / self.length)


def signatures_of(answer: Answer, *, leaks: bool = True) -> Signatures:
    """
    Work out every suspect's signature at the printed solution.

    Parameters
    ----------
    answer : Answer
        With at least one degree of freedom.
    leaks : bool
        Whether matter lost at a node is a suspect.

    Notes
    -----
    With several periods each reading is a suspect in its own period, and a fault that lasts
    through all of them, in proportion to the reading, is a suspect of its own.
    """
    return signatures_at(
        answer.tests, answer.test_state, answer.test_local, answer.solution.point.x, leaks=leaks
    )


def signatures_at(
    tests: Sensitivities, state: State, local: Local, x: Vector, *, leaks: bool = True
) -> Signatures:
    """
    Work out signatures around a point.

    Parameters
    ----------
    tests : Sensitivities
        Of ``local``, without inequality bounds.
    state : State
    local : Local
    x : ndarray
        The point, shape (n,).
    leaks : bool
    """
    basis = residual_basis(tests)
    checked = tests.leverage
    known = checked > BLIND
    freed = np.where(known, tests.residuals / np.where(known, checked, 1.0), 0.0)
    columns: list[Column] = []
    candidates: list[Candidate] = []
    where = _add_readings(state, x, freed, checked, columns, candidates)
    _add_samplers(state, where, candidates)
    opened = balances_of(state, local) if leaks else None
    openings = basis.T @ opened.effect if opened is not None else np.zeros((basis.shape[1], 0))
    lasting = _lasting(state, where, columns)
    G = [_signature(basis, column) for column in columns]
    for name, kind, column in lasting:
        _append(columns, candidates, column, kind=kind, name=name, period=None)
        G.append(_signature(basis, column))
    if opened is not None:
        _add_leaks(state, x, openings, columns, candidates, G)
    return Signatures(
        basis=basis,
        z=basis.T @ tests.residuals,
        G=np.array(G).T.reshape(basis.shape[1], len(G)),
        columns=tuple(columns),
        candidates=tuple(candidates),
        balances=opened.names if opened is not None else (),
        openings=openings,
    )


def residual_basis(tests: Sensitivities) -> Vector:
    """
    Give an orthonormal basis of the space residuals live in, shape (m + g, f).

    The residuals' covariance is a projector, so the factor of its pivoted decomposition has f
    columns and, but for rounding, is such a basis already.
    """
    total = len(tests.leverage)
    covariance = np.empty((total, total), order="F")
    for first in range(0, total, BLOCK):
        rows = np.arange(first, min(first + BLOCK, total), dtype=np.intp)
        covariance[:, rows] = tests.residual_covariance(rows)
    factor, pivots, rank, _ = dpstrf(covariance, lower=1, tol=1e-9, overwrite_a=1)
    lower = np.tril(factor)[:, :rank]
    loose = np.empty_like(lower)
    loose[pivots - 1] = lower
    return np.asarray(np.linalg.qr(loose)[0]) if rank else loose


def classes_of(unit: Vector) -> NDArray[np.intp]:
    """
    Label parallel columns alike.

    Parameters
    ----------
    unit : ndarray
        Columns of length one, shape (f, C).
    """
    count = unit.shape[1]
    pairs: list[tuple[NDArray[np.intp], NDArray[np.intp]]] = []
    for first in range(0, count, BLOCK):
        cosine = np.abs(unit[:, first : first + BLOCK].T @ unit)
        rows, cols = np.nonzero(cosine >= 1 - ALIKE)
        pairs.append((rows + first, cols))
    rows = np.concatenate([p[0] for p in pairs]) if pairs else np.zeros(0, dtype=np.intp)
    cols = np.concatenate([p[1] for p in pairs]) if pairs else np.zeros(0, dtype=np.intp)
    graph = sparse.coo_array((np.ones(len(rows)), (rows, cols)), shape=(count, count))
    return np.asarray(connected_components(graph, directed=False)[1], dtype=np.intp)


def _signature(basis: Vector, column: Column) -> Vector:
    rows = [row for row, _ in column.shift]
    return np.asarray(np.array([v for _, v in column.shift]) @ basis[rows])


def _append(
    columns: list[Column],
    candidates: list[Candidate],
    column: Column,
    *,
    kind: str,
    name: str,
    period: int | None,
) -> None:
    candidates.append(Candidate(kind=kind, name=name, period=period, columns=(len(columns),)))
    columns.append(column)


def _add_readings(
    state: State,
    x: Vector,
    freed: Vector,
    checked: Vector,
    columns: list[Column],
    candidates: list[Candidate],
) -> dict[int, int]:
    """Add readings and draws; give the column of each datum that is checked."""
    where: dict[int, int] = {}
    measured = state.fit.measurements
    for row, column in enumerate(reading_columns(state, x, freed, checked)):
        if column is None:
            continue
        where[row] = len(columns)
        if row < len(measured):
            m = measured[row]
            kind, name, period = m.kind.value, m.name, m.period
        else:
            draw = state.problem.draws[row - len(measured)]
            kind, name, period = "source", draw.source, draw.first
        _append(columns, candidates, column, kind=kind, name=name, period=period)
    return where


def _add_samplers(state: State, where: dict[int, int], candidates: list[Candidate]) -> None:
    for name, period, rows in sampler_groups(state.fit.measurements):
        seen = tuple(where[r] for r in rows if r in where)
        if len(seen) > 1:
            candidates.append(Candidate(kind="sampler", name=name, period=period, columns=seen))


def _lasting(
    state: State, where: dict[int, int], columns: list[Column]
) -> list[tuple[str, str, Column]]:
    """Faults that last through all periods, as a share of each period's reading."""
    groups: dict[str, list[int]] = {}
    for row, m in enumerate(state.fit.measurements):
        if row in where and m.kind.value != "stock":
            groups.setdefault(m.name, []).append(row)
    result = []
    for name, rows in groups.items():
        if len(rows) < 2:
            continue
        own = [columns[where[r]] for r in rows]
        sizes = [c.slabs[1] for c in own]
        mean = float(np.mean([s * c.scale for s, c in zip(sizes, own, strict=True)]))
        copper = [c.copper for c in own]
        m = state.fit.measurements[rows[0]]
        column = Column(
            shift=tuple((r, s) for r, s in zip(rows, sizes, strict=True)),
            slabs=SLABS,
            scale=mean,
            unit=m.unit,
            copper=(
                None
                if any(c is None for c in copper)
                else float(np.mean([(c or 0.0) * s for c, s in zip(copper, sizes, strict=True)]))
            ),
            value=float(np.mean([c.value / s for c, s in zip(own, sizes, strict=True)])),
            low=0.0 if all(c.low == 0.0 for c in own) else -np.inf,
        )
        result.append((name, m.kind.value, column))
    return result


def _add_leaks(
    state: State,
    x: Vector,
    openings: Vector,
    columns: list[Column],
    candidates: list[Candidate],
    G: list[Vector],
) -> None:
    for leak in leaks_of(state, x):
        g = sum((v * openings[:, row] for row, v in leak.rows), np.zeros(openings.shape[0]))
        if float(np.linalg.norm(g)) * leak.throughput * LEAK_SLABS[1] <= UNSEEN:
            continue
        column = Column(
            shift=(),
            slabs=(LEAK_SLABS[0] * leak.throughput, LEAK_SLABS[1] * leak.throughput),
            scale=1.0,
            unit=f"t {'dry' if leak.leading == 'mass' else leak.leading}",
            copper=leak.copper,
            low=-leak.throughput,
            high=leak.throughput,
        )
        _append(columns, candidates, column, kind="leak", name=leak.node, period=leak.period)
        G.append(g)
