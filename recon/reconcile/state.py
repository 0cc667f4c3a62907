"""A problem as arrays: unknowns in columns, equalities and bounds in rows, readings as functions.

Columns are amounts and stocks, then, for each node with one common leaving composition, its
shares and common vector (``A[s, q] = share_s * common_q``, shares adding to one). Offsets of shared
sources follow, in units of their own standard uncertainty, so their prior is N(0, 1).
"""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal, NamedTuple

import numpy as np
from scipy import sparse

from recon.flowsheet.balances import (
    Amount,
    Linear,
    Row,
    Unknown,
    balance_rows,
    bound_rows,
    unknowns,
)
from recon.flowsheet.network import MASS

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from recon.reconcile.problem import Measurement, Problem

    Vector = NDArray[np.float64]


class Share(NamedTuple):
    """Share of a node's leaving composition taken by one stream [-]."""

    period: int
    node: str
    stream: str
    kind: Literal["share"] = "share"


class Common(NamedTuple):
    """Amount [t] of a quantity leaving a node together."""

    period: int
    node: str
    quantity: str
    kind: Literal["common"] = "common"


Column = Unknown | Share | Common


@dataclass(frozen=True, kw_only=True)
class Readings:
    """
    Measured functions as sparse arrays.

    Attributes
    ----------
    measurements : tuple of Measurement
        In row order, m of them.
    of, over : csr_array
        Numerators and denominators, shape (k, n), k parts [t].
    ratio : ndarray
        Which parts have a denominator, shape (k,).
    tied : ndarray
        Which of them relations tie to zero: the stream stands, whatever is tried; shape (k,).
    gather : csr_array
        Shares of parts in readings, shape (m, k).
    relative, absolute : csr_array
        Effect of a draw in units of its standard uncertainty, shape (m, g).
    value, u : ndarray
        Shape (m,) [t or 1]; u is NaN where a held figure is exact.
    """

    measurements: tuple[Measurement, ...]
    of: sparse.csr_array
    over: sparse.csr_array
    ratio: NDArray[np.bool_]
    tied: NDArray[np.bool_]
    gather: sparse.csr_array
    relative: sparse.csr_array
    absolute: sparse.csr_array
    value: Vector
    u: Vector

    def denominators(self, x: Vector) -> Vector:
        """Denominator of each part at x, 1 where there is none; shape (k,)."""
        return np.where(self.ratio, self.over @ x, 1.0)

    def model(self, x: Vector) -> Vector:
        """Give ``h(x)``, the readings without any error; shape (m,)."""
        return np.asarray(self.gather @ ((self.of @ x) / self.denominators(x)))

    def gradient(self, x: Vector) -> sparse.csr_array:
        """Give ``dh/dx``, shape (m, n)."""
        below = self.denominators(x)
        value = (self.of @ x) / below
        inner = sparse.diags_array(1 / below) @ self.of
        inner = inner - sparse.diags_array(np.where(self.ratio, value / below, 0.0)) @ self.over
        return sparse.csr_array(self.gather @ inner)

    def offsets(self, x: Vector) -> sparse.csr_array:
        """Give D, the change of each reading per standard uncertainty of each draw; (m, g)."""
        return sparse.csr_array(sparse.diags_array(self.model(x)) @ self.relative + self.absolute)


@dataclass(frozen=True, kw_only=True)
class State:
    """
    The arrays of one problem.

    Attributes
    ----------
    problem : Problem
    columns : tuple
        The n unknowns.
    index : dict
        Column of each unknown.
    fit, held : Readings
        Measurements in the objective, and those met exactly.
    equalities : csr_array
        Linear equalities, shape (p, n), and their right sides and names.
    bounds : csr_array
        Inequalities ``bounds @ x >= floors``, shape (q, n), and names.
    pinned : dict
        Value [t] of each column that a relation of one term ties to a number.
    alike : ndarray
        Rows (A column, share column, common column) of ``A - share * common = 0``, shape (r, 3).
    """

    problem: Problem
    columns: tuple[Column, ...]
    index: dict[Column, int]
    fit: Readings
    held: Readings
    equalities: sparse.csr_array
    right: Vector
    equality_names: tuple[str, ...]
    bounds: sparse.csr_array
    floors: Vector
    bound_names: tuple[str, ...]
    pinned: dict[int, float]
    alike: NDArray[np.intp]

    @property
    def draws(self) -> int:
        """Number of draws g."""
        return len(self.problem.draws)

    def vector(self, form: Linear) -> Vector:
        """Coefficients of a linear form over the columns, shape (n,)."""
        row = np.zeros(len(self.columns))
        for unknown, coefficient in form:
            row[self.index[unknown]] += coefficient
        return row


def state_of(problem: Problem) -> State:
    """Lay a problem out as arrays; the order of its streams and readings does not matter."""
    columns: list[Column] = list(unknowns(problem.flowsheets))
    fixed = _fixed(problem)
    zero = {unknown for unknown, value in fixed.items() if value == 0.0}
    alike, sums = _common_compositions(problem, columns, zero)
    index: dict[Column, int] = {column: i for i, column in enumerate(columns)}
    rows = [*balance_rows(problem.flowsheets), *problem.relations]
    equalities = _rows_matrix([row.form for row in rows], index)
    right = np.array([row.equals for row in rows])
    names = [row.name for row in rows]
    if sums:
        extra = np.zeros((len(sums), len(columns)))
        for i, (_, members) in enumerate(sums):
            extra[i, [index[m] for m in members]] = 1.0
        equalities = sparse.csr_array(sparse.vstack([equalities, sparse.csr_array(extra)]))
        right = np.concatenate([right, np.ones(len(sums))])
        names += [name for name, _ in sums]
    bounds = [row for row in bound_rows(problem.flowsheets) if not _settled(row, fixed)]
    matrix = _rows_matrix([row.form for row in bounds], index)
    floors = np.array([row.equals for row in bounds])
    shares = [c for c in columns if isinstance(c, Share)]
    if shares:
        unit = sparse.csr_array(
            (np.ones(len(shares)), (range(len(shares)), [index[c] for c in shares])),
            shape=(len(shares), len(columns)),
        )
        matrix = sparse.csr_array(sparse.vstack([matrix, unit]))
        floors = np.concatenate([floors, np.zeros(len(shares))])
    return State(
        problem=problem,
        columns=tuple(columns),
        index=index,
        fit=_readings(problem, [m for m in problem.measurements if not m.held], index, zero),
        held=_readings(problem, [m for m in problem.measurements if m.held], index, zero),
        equalities=equalities,
        right=right,
        equality_names=tuple(names),
        bounds=matrix,
        floors=floors,
        bound_names=(
            *(row.name for row in bounds),
            *(f"{c.period}: share of {c.stream} >= 0" for c in shares),
        ),
        pinned={index[u]: value for u, value in fixed.items() if u in index},
        alike=np.array(
            [[index[a], index[s], index[c]] for a, s, c in alike], dtype=np.intp
        ).reshape(-1, 3),
    )


def _fixed(problem: Problem) -> dict[Unknown, float]:
    """Unknowns that a relation of one term ties to a number, as for a stream that stands."""
    return {
        row.form[0][0]: row.equals / row.form[0][1]
        for row in problem.relations
        if len(row.form) == 1 and row.form[0][1] != 0.0
    }


def _settled(row: Row, fixed: Mapping[Unknown, float]) -> bool:
    """
    Whether relations alone settle that a bound holds: stating it again would leave its force free.

    A bound they break stays, so that the contradiction is named.
    """
    if any(unknown not in fixed for unknown, _ in row.form):
        return False
    return sum(c * fixed[unknown] for unknown, c in row.form) >= row.equals


def _common_compositions(
    problem: Problem, columns: list[Column], standing: Collection[Unknown]
) -> tuple[list[tuple[Amount, Share, Common]], list[tuple[str, list[Share]]]]:
    """
    Add shares and common vectors as columns; list the products and the sums of shares.

    A stream tied to zero has no composition and takes no part.
    """
    products: list[tuple[Amount, Share, Common]] = []
    sums: list[tuple[str, list[Share]]] = []
    for period, sheet in enumerate(problem.flowsheets, start=1):
        for node in sheet.nodes:
            leaving = [
                s
                for s in sheet.leaving(node.name)
                if not all(Amount(period, s.name, q) in standing for q in s.carries)
            ]
            if not node.same_composition or len(leaving) < 2:
                continue
            members = [Share(period, node.name, s.name) for s in leaving]
            carried = [q for q in sheet.quantities if any(q in s.carries for s in leaving)]
            columns.extend(members)
            columns.extend(Common(period, node.name, q) for q in carried)
            sums.append((f"{period}: {node.name} shares add to one", members))
            products.extend(
                (Amount(period, s.name, q), share, Common(period, node.name, q))
                for s, share in zip(leaving, members, strict=True)
                for q in s.carries
            )
    return products, sums


def _rows_matrix(forms: Sequence[Linear], index: dict[Column, int]) -> sparse.csr_array:
    entries = [(i, index[u], c) for i, form in enumerate(forms) for u, c in form]
    return _sparse(entries, (len(forms), len(index)))


def _sparse(entries: Sequence[tuple[int, int, float]], shape: tuple[int, int]) -> sparse.csr_array:
    if not entries:
        return sparse.csr_array(shape, dtype=np.float64)
    rows, cols, values = zip(*entries, strict=True)
    return sparse.csr_array((np.array(values, dtype=np.float64), (rows, cols)), shape=shape)


def _readings(
    problem: Problem,
    measurements: Iterable[Measurement],
    index: dict[Column, int],
    zero: Collection[Unknown],
) -> Readings:
    measured = tuple(measurements)
    parts = [(i, part) for i, m in enumerate(measured) for part in m.parts]
    of = _rows_matrix([part.of for _, part in parts], index)
    over = _rows_matrix([part.over or () for _, part in parts], index)
    gather = _sparse(
        [(i, k, part.share) for k, (i, part) in enumerate(parts)], (len(measured), len(parts))
    )
    effects = {
        kind: _sparse(
            [
                (i, e.draw, e.factor * problem.draws[e.draw].u)
                for i, m in enumerate(measured)
                for e in m.effects
                if e.relative is kind
            ],
            (len(measured), len(problem.draws)),
        )
        for kind in (True, False)
    }
    return Readings(
        measurements=measured,
        of=of,
        over=over,
        ratio=np.array([part.over is not None for _, part in parts], dtype=np.bool_),
        tied=np.array(
            [bool(part.over) and all(u in zero for u, _ in part.over or ()) for _, part in parts],
            dtype=np.bool_,
        ),
        gather=gather,
        relative=effects[True],
        absolute=effects[False],
        value=np.array([m.value for m in measured], dtype=np.float64),
        u=np.array([np.nan if m.u is None else m.u for m in measured], dtype=np.float64),
    )


def carries_mass(state: State, column: Column) -> bool:
    """Whether the stream or stock of a component column also has a dry mass in this problem."""
    if isinstance(column, Share | Common) or column.quantity == MASS:
        return False
    return column._replace(quantity=MASS) in state.index


__all__ = ["Column", "Common", "Readings", "Row", "Share", "State", "carries_mass", "state_of"]
