"""The least squares problem around one point, standardised and scaled.

Every engine and every uncertainty works on a ``Local``: data rows in units of their standard
uncertainties, unknowns in units of their typical size, equality rows scaled to length one. Solved
unscaled, such problems end "optimal" tens of standard uncertainties away from the optimum.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from scipy import sparse

from recon.reconcile.state import Readings

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from recon.reconcile.state import State

    Vector = NDArray[np.float64]

STANDING = 1e-7
"""A denominator below this share of its typical size stands: the ratio has no value."""


@dataclass(frozen=True, kw_only=True)
class Point:
    """
    Where the problem is looked at.

    Attributes
    ----------
    x : ndarray
        Amounts, stocks, shares, shape (n,) [t or -].
    beta : ndarray
        Offsets in standard uncertainties of their draws, shape (g,).
    """

    x: Vector
    beta: Vector


@dataclass(frozen=True, kw_only=True)
class Local:
    """
    The problem around a point, in steps ``d`` of scaled unknowns, then offsets; N = n + g.

    Minimise ``|data @ d - misfit|^2`` subject to ``equal @ d = gap`` and ``bound @ d >= room``.

    Attributes
    ----------
    data : csr_array
        Derivative of standardised readings, then of the draws' priors, shape (m + g, N).
    misfit : ndarray
        Standardised misfit at the point, shape (m + g,).
    equal, gap : csr_array, ndarray
        Equalities of unit length: balances and relations, common compositions, held figures,
        ratios that stand; shape (p, N).
    bound, room : csr_array, ndarray
        Inequalities of unit length, shape (q, N).
    equal_names, bound_names : tuple of str
    scale : ndarray
        Size of each unknown, shape (N,); 1 for offsets.
    held_rows : ndarray
        Row of ``equal`` of each held reading, shape (h,), and ``held_pull``: change of ``gap``
        per unit [t or 1] of the held value.
    standing : ndarray
        Which fit readings have a ratio that stands, shape (m,).
    """

    data: sparse.csr_array
    misfit: Vector
    equal: sparse.csr_array
    gap: Vector
    bound: sparse.csr_array
    room: Vector
    equal_names: tuple[str, ...]
    bound_names: tuple[str, ...]
    scale: Vector
    held_rows: NDArray[np.intp]
    held_pull: Vector
    standing: NDArray[np.bool_]


def local(state: State, point: Point, scale: Vector, *, alike: bool = True) -> Local:
    """
    Linearise a problem.

    Parameters
    ----------
    state : State
    point : Point
    scale : ndarray
        Typical size of each unknown, shape (n,) [t or -], all positive.
    alike : bool
        Whether common compositions are stated; the convex start leaves them out.

    Returns
    -------
    Local
    """
    n, g = len(state.columns), state.draws
    x = point.x
    columns = sparse.diags_array(scale)
    data, misfit, standing = _data_rows(state, point, scale)
    ties = _standing_ties(state.fit, standing)
    equal = [(state.equalities @ columns, state.right - state.equalities @ x, state.equality_names)]
    if alike and len(state.alike):
        equal.append(_alike_rows(state, x, scale))
    if ties:
        rows = sparse.csr_array(sparse.vstack([row for row, _ in ties]))
        equal.append((rows @ columns, -(rows @ x), tuple(name for _, name in ties)))
    before = sum(block[0].shape[0] for block in equal)
    held, held_gap, pull = _held_rows(state.held, x)
    equal.append((held @ columns, held_gap, tuple(m.name for m in state.held.measurements)))
    matrix = sparse.csr_array(sparse.vstack([block[0] for block in equal]))
    lengths = _lengths(matrix)
    bound = sparse.csr_array(state.bounds @ columns)
    bound_lengths = _lengths(bound)
    wide = np.concatenate([scale, np.ones(g)])
    return Local(
        data=data,
        misfit=misfit,
        equal=_widen(sparse.csr_array(sparse.diags_array(1 / lengths) @ matrix), n + g),
        gap=np.concatenate([block[1] for block in equal]) / lengths,
        bound=_widen(sparse.csr_array(sparse.diags_array(1 / bound_lengths) @ bound), n + g),
        room=(state.floors - state.bounds @ x) / bound_lengths,
        equal_names=tuple(name for block in equal for name in block[2]),
        bound_names=state.bound_names,
        scale=wide,
        held_rows=np.arange(before, matrix.shape[0], dtype=np.intp),
        held_pull=pull / lengths[before:],
        standing=standing,
    )


def standing_parts(readings: Readings, x: Vector, scale: Vector) -> NDArray[np.bool_]:
    """Which parts have a denominator at zero, shape (k,)."""
    typical = abs(readings.over) @ scale
    low = readings.over @ x <= STANDING * typical
    return np.asarray(readings.ratio & (readings.tied | low))


def _data_rows(
    state: State, point: Point, scale: Vector
) -> tuple[sparse.csr_array, Vector, NDArray[np.bool_]]:
    fit, x, beta = state.fit, point.x, point.beta
    g = state.draws
    stopped = standing_parts(fit, x, scale)
    standing = np.asarray((abs(fit.gather) @ stopped.astype(np.float64)) > 0)
    safe = _without_standing(fit, stopped)
    model = safe.model(x)
    stretch = 1.0 + fit.relative @ beta
    keep = np.where(standing, 0.0, 1.0) / fit.u
    slope = sparse.diags_array(keep * stretch) @ safe.gradient(x) @ sparse.diags_array(scale)
    drift = sparse.diags_array(keep) @ safe.offsets(x)
    misfit = keep * (fit.value - model * stretch - fit.absolute @ beta)
    prior = sparse.hstack([sparse.csr_array((g, len(state.columns))), sparse.eye_array(g)])
    data = sparse.csr_array(sparse.vstack([sparse.hstack([slope, drift]), prior]))
    return data, np.concatenate([misfit, -beta]), standing


def _without_standing(fit: Readings, stopped: NDArray[np.bool_]) -> Readings:
    """The same readings with standing ratios replaced by zero, so nothing divides by zero."""
    if not stopped.any():
        return fit
    running = sparse.diags_array(np.where(stopped, 0.0, 1.0))
    return replace(
        fit,
        of=sparse.csr_array(running @ fit.of),
        over=sparse.csr_array(running @ fit.over),
        ratio=fit.ratio & ~stopped,
    )


def _standing_ties(
    fit: Readings, standing: NDArray[np.bool_]
) -> list[tuple[sparse.csr_array, str]]:
    """State ``of = c over`` for ratios that stand, c the weighted mean of their assays."""
    groups: dict[tuple[object, object], list[int]] = {}
    for i in np.flatnonzero(standing):
        parts = fit.measurements[i].parts
        if len(parts) == 1 and not fit.tied[fit.gather[[i], :].indices[0]]:
            groups.setdefault((parts[0].of, parts[0].over), []).append(int(i))
    ties = []
    for members in groups.values():
        weights = 1 / fit.u[members] ** 2
        mean = float(np.average(fit.value[members], weights=weights))
        k = int(fit.gather[[members[0]], :].indices[0])
        ties.append(
            (
                sparse.csr_array(fit.of[[k], :] - mean * fit.over[[k], :]),
                f"{fit.measurements[members[0]].name} stands",
            )
        )
    return ties


def _alike_rows(
    state: State, x: Vector, scale: Vector
) -> tuple[sparse.csr_array, Vector, tuple[str, ...]]:
    amount, share, common = state.alike.T
    r = np.arange(len(state.alike))
    rows = sparse.csr_array(
        (
            np.concatenate([scale[amount], -x[common] * scale[share], -x[share] * scale[common]]),
            (np.concatenate([r, r, r]), np.concatenate([amount, share, common])),
        ),
        shape=(len(r), len(x)),
    )
    names = tuple(f"{state.columns[a]} follows the common composition" for a in amount)
    return rows, -(x[amount] - x[share] * x[common]), names


def _held_rows(held: Readings, x: Vector) -> tuple[sparse.csr_array, Vector, Vector]:
    """State ``of - value over = 0``, or the linearised sum of ratios, for each held reading."""
    single = np.array([len(m.parts) == 1 for m in held.measurements], dtype=np.bool_)
    if single.all():
        flat = sparse.csr_array(held.gather @ held.of)
        below = sparse.csr_array(held.gather @ held.over)
        has = np.asarray((held.gather @ held.ratio.astype(np.float64)) > 0)
        rows = sparse.csr_array(flat - sparse.diags_array(np.where(has, held.value, 0.0)) @ below)
        gap = np.where(has, 0.0, held.value) - rows @ x
        return rows, gap, np.where(has, below @ x, 1.0)
    gradient = held.gradient(x)
    return gradient, held.value - held.model(x), np.ones(len(held.measurements))


def _lengths(matrix: sparse.csr_array) -> Vector:
    lengths = np.sqrt(np.asarray((matrix.multiply(matrix)).sum(axis=1)).ravel())
    return np.where(lengths > 0, lengths, 1.0)


def _widen(matrix: sparse.csr_array, width: int) -> sparse.csr_array:
    rows = matrix.shape[0]
    return sparse.csr_array(
        sparse.hstack([matrix, sparse.csr_array((rows, width - matrix.shape[1]))])
    )
