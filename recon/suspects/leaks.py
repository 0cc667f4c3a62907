"""Leaks and open balances: what a residual would look like if matter went missing at a node."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import sparse
from scipy.linalg import LinAlgError, cho_factor, cho_solve
from scipy.sparse.linalg import splu

from recon.flowsheet.balances import Amount, balance_rows
from recon.flowsheet.network import MASS
from recon.suspects.candidates import COPPER

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from recon.flowsheet.network import Flowsheet, Stream
    from recon.reconcile.linearise import Local
    from recon.reconcile.state import State

    Vector = NDArray[np.float64]

DENSE = 1_500
"""Up to so many equalities they are solved as a dense system."""
MET = 1e-7
"""A balance that cannot be opened alone, because others imply it, misses by more than this."""
SAME = 1e-6
"""Two compositions whose parts differ by less than this are one."""
LEAK_SLABS = (0.05, 0.3)
"""Plausible leaks, small and large, as shares of what passes through the node."""


@dataclass(frozen=True, kw_only=True)
class Balances:
    """
    The node balances of a problem and what opening each by one tonne does to the data.

    Attributes
    ----------
    names : tuple of str
    effect : ndarray
        Shift of standardised data per tonne lost, shape (m + g, B); zero for a balance that
        others imply, which cannot be opened alone.
    """

    names: tuple[str, ...]
    effect: Vector


@dataclass(frozen=True, kw_only=True)
class Leak:
    """
    One way of losing matter at a node: a place, a composition, and the balances it opens.

    Attributes
    ----------
    node : str
    period : int
    rows : tuple of (int, float)
        Balance and tonnes lost there per tonne of the leading quantity.
    leading : str
        Quantity its size is stated in.
    throughput : float
        What passes through the node [t of the leading quantity].
    copper : float or None
        Copper per tonne of the leading quantity [t/t].
    """

    node: str
    period: int
    rows: tuple[tuple[int, float], ...]
    leading: str
    throughput: float
    copper: float | None


def balances_of(state: State, local: Local) -> Balances:
    """
    Open each node balance in turn.

    The truth lost ``l`` where the fit states ``in - out - change of stock = 0``; the residuals
    then move by ``P D E^+ l``, E the equalities, D the data rows, P what the fit leaves of them.
    The projection by P is the caller's.
    """
    names = tuple(row.name for row in balance_rows(state.problem.flowsheets))
    count = len(names)
    if count == 0:
        return Balances(names=(), effect=np.zeros((local.data.shape[0], 0)))
    n = len(state.columns)
    lengths = sparse.csr_array(state.equalities @ sparse.diags_array(local.scale[:n]))
    norms = np.sqrt(np.asarray(lengths.multiply(lengths).sum(axis=1)).ravel())[:count]
    opened = np.zeros((local.equal.shape[0], count))
    opened[np.arange(count), np.arange(count)] = 1 / np.where(norms > 0, norms, 1.0)
    moves = _moves(local.equal, opened)
    missed = np.abs(local.equal @ moves - opened).max(axis=0) * np.where(norms > 0, norms, 1.0)
    effect = np.asarray(local.data @ moves)
    effect[:, missed > MET] = 0.0
    return Balances(names=names, effect=effect)


def _moves(equal: sparse.csr_array, right: Vector) -> Vector:
    """Moves of least length that meet ``equal @ move = right``, one a column."""
    square = sparse.csc_array(equal @ equal.T)
    if equal.shape[0] > DENSE:
        tiny = sparse.eye_array(equal.shape[0], format="csc") * 1e-12
        return np.asarray(equal.T @ splu(sparse.csc_matrix(square + tiny)).solve(right))
    try:
        factor = cho_factor(square.toarray())
        diagonal = np.diag(factor[0])
        if diagonal.min() > 1e-6 * diagonal.max():
            return np.asarray(equal.T @ cho_solve(factor, right))
    except LinAlgError:
        pass
    return np.asarray(np.linalg.lstsq(equal.toarray(), right, rcond=1e-11)[0])


def leaks_of(state: State, x: Vector) -> list[Leak]:
    """List one leak a node and distinct composition touching it, conserved quantities only."""
    amounts = {c: float(v) for c, v in zip(state.columns, x, strict=True) if isinstance(c, Amount)}
    row_of = {row.name: i for i, row in enumerate(balance_rows(state.problem.flowsheets))}
    result: list[Leak] = []
    for period, sheet in enumerate(state.problem.flowsheets, start=1):
        for node in sheet.nodes:
            seen: list[dict[str, float]] = []
            for stream in (*sheet.entering(node.name), *sheet.leaving(node.name)):
                conserved = [q for q in node.conserves if q in stream.carries]
                parts = _composition(amounts, period, stream, conserved)
                if not parts or any(_alike(parts, other) for other in seen):
                    continue
                seen.append(parts)
                leading = next(iter(parts))
                result.append(
                    Leak(
                        node=node.name,
                        period=period,
                        rows=tuple(
                            (row_of[f"{period}: {node.name} {q}"], v) for q, v in parts.items()
                        ),
                        leading=leading,
                        throughput=_throughput(amounts, period, sheet, node.name, leading),
                        copper=parts.get(COPPER),
                    )
                )
    return result


def _composition(
    amounts: Mapping[Amount, float], period: int, stream: Stream, conserved: list[str]
) -> dict[str, float]:
    """Conserved quantities per tonne of the leading one: dry mass, else copper, else the most."""
    found = {q: amounts[Amount(period, stream.name, q)] for q in conserved}
    found = {q: v for q, v in found.items() if v > 0}
    if not found:
        return {}
    leading = next((q for q in (MASS, COPPER) if q in found), max(found, key=lambda q: found[q]))
    rest = {q: v / found[leading] for q, v in sorted(found.items()) if q != leading}
    return {leading: 1.0, **rest}


def _alike(one: dict[str, float], other: dict[str, float]) -> bool:
    return one.keys() == other.keys() and all(abs(one[q] - other[q]) <= SAME for q in one)


def _throughput(
    amounts: Mapping[Amount, float], period: int, sheet: Flowsheet, node: str, quantity: str
) -> float:
    return max(
        sum(
            max(amounts[Amount(period, s.name, quantity)], 0.0)
            for s in side
            if quantity in s.carries
        )
        for side in (sheet.entering(node), sheet.leaving(node))
    )
