"""What could be seen, ahead of any fault: in a day, since the last survey, in a month.

Over n days the random part of a reading falls as 1/sqrt(n); shared errors do not, nor does a
survey's, which instead is spread over the days between surveys: ``Sigma_s + Sigma_r / n``.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from scipy import sparse

from recon.suspects.alarm import calibrate
from recon.suspects.signatures import BLIND, NEAR, WEAK, signatures_at

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from recon.reconcile.answer import Answer
    from recon.reconcile.linearise import Local
    from recon.reconcile.solver import Engine
    from recon.reconcile.state import State
    from recon.suspects.signatures import Signatures

    Vector = NDArray[np.float64]

Z_POWER = 0.8416212335729143
"""Normal quantile of the power stated for the smallest visible fault, 0.80."""


@dataclass(frozen=True, kw_only=True)
class Seen:
    """
    What could be seen of one instrument, source or node over a span.

    Attributes
    ----------
    kind, name : str
    days : int
        Length of the span [d].
    share : float
        Share of the variance of its error that is left in its residual [-]; for a leak, of no
        meaning and NaN.
    smallest : float or None
        Smallest constant fault that the alarm finds with power 0.80 [unit; t/d for a leak]; None
        where nothing checks it.
    relative : float or None
        The same by the reading, or by what passes through the node [-].
    identifiable : float or None
        Smallest fault that is also told from its nearest other class [unit]; None where an exact
        partner makes that impossible.
    unit : str
    state : str
        cannot be checked, blind, weak, seen.
    partners : tuple of str
        Those that can never be told from it, and ``near``: those told from it only when large.
    """

    kind: str
    name: str
    days: int
    share: float
    smallest: float | None
    relative: float | None
    identifiable: float | None
    unit: str
    state: str
    partners: tuple[str, ...]
    near: tuple[str, ...]


def visibility(
    answer: Answer,
    engine: Engine,
    *,
    days: int,
    level: float,
    surveyed: bool = False,
    lasting: Mapping[str, float] | None = None,
) -> tuple[Seen, ...]:
    """
    State what could be seen over a span of like days.

    Parameters
    ----------
    answer : Answer
        Of one day, with its stocks measured at both boundaries where a survey is possible.
    engine : Engine
        Factorises the pooled problem.
    days : int
        Length of the span [d]; 1 for a day.
    level : float
        Plant-wide false-alarm rate the alarm over the span would have [-].
    surveyed : bool
        Whether stocks are surveyed at both ends of the span; else they are free.
    lasting : mapping, optional
        How long one draw of a source lasts [d], where shorter than the span.

    Returns
    -------
    tuple of Seen
        Readings in their order, then sources, then nodes.
    """
    state = answer.test_state
    pooled = pool(state, answer.test_local, days=days, surveyed=surveyed, lasting=lasting or {})
    tests = engine.sensitivities(pooled)
    signatures = signatures_at(tests, state, pooled, answer.solution.point.x)
    rows = [_unseen(m.kind.value, m.name, days, m.unit) for m in state.fit.measurements]
    rows += [_unseen("source", d.source, days, "") for d in state.problem.draws]
    if tests.degrees_of_freedom <= 0:
        return tuple(rows)
    limit = calibrate(tests, level, basis=signatures.basis).largest
    leaks = []
    for candidate in signatures.candidates:
        if len(candidate.columns) > 1:
            continue
        k = candidate.columns[0]
        column = signatures.columns[k]
        row = column.shift[0][0] if column.shift else None
        stretch = 1.0 if row is None else _stretch(state, row, days)
        length = float(signatures.length[k]) * stretch
        share = float(signatures.length[k]) ** 2 if row is not None else float("nan")
        seen = _seen(signatures, k, candidate.kind, candidate.name, days, share, length, limit)
        if row is None:
            leaks.append(seen)
        else:
            rows[row] = seen
    return (*rows, *leaks)


def pool(
    state: State,
    local: Local,
    *,
    days: int,
    surveyed: bool,
    lasting: Mapping[str, float],
) -> Local:
    """Restate a day's problem for the mean of so many like days."""
    weights = []
    for row, m in enumerate(state.fit.measurements):
        if m.kind.value == "stock":
            weights.append(float(days) if surveyed else 0.0)
        else:
            weights.append(_stretch(state, row, days))
    for draw in state.problem.draws:
        weights.append(float(np.sqrt(max(days / lasting.get(draw.source, np.inf), 1.0))))
    away = np.array([w == 0.0 for w in weights[: len(state.fit.measurements)]], dtype=np.bool_)
    return replace(
        local,
        data=sparse.csr_array(sparse.diags_array(np.array(weights)) @ local.data),
        misfit=np.zeros_like(local.misfit),
        standing=local.standing | away,
    )


def _stretch(state: State, row: int, days: int) -> float:
    """Standardised shift of a pooled datum by a constant fault of one of its own u."""
    if row >= len(state.fit.measurements) or state.fit.measurements[row].kind.value == "stock":
        return 1.0
    return float(np.sqrt(days))


def _unseen(kind: str, name: str, days: int, unit: str) -> Seen:
    return Seen(
        kind=kind,
        name=name,
        days=days,
        share=0.0,
        smallest=None,
        relative=None,
        identifiable=None,
        unit=unit,
        state="cannot be checked",
        partners=(),
        near=(),
    )


def _seen(
    signatures: Signatures,
    k: int,
    kind: str,
    name: str,
    days: int,
    share: float,
    length: float,
    limit: float,
) -> Seen:
    column = signatures.columns[k]
    cosine = np.abs(signatures.cosines(k))
    same = signatures.classes == signatures.classes[k]
    single = {c.columns[0]: c for c in signatures.candidates if len(c.columns) == 1}

    def names(mask: NDArray[np.bool_]) -> tuple[str, ...]:
        return tuple(
            f"leak at {single[i].name}" if single[i].kind == "leak" else single[i].name
            for i in np.flatnonzero(mask).tolist()
            if i != k and i in single
        )

    amplitude = (limit + Z_POWER) / length
    partners = names(same)
    rho = float(cosine[~same].max(initial=0.0))
    apart = max(limit + Z_POWER, Z_POWER / max((1 - rho) / 2, 1e-12) ** 0.5) / length
    whole = column.slabs[1] / 0.3 if kind == "leak" else abs(column.value)
    state = "seen"
    if kind != "leak" and share < WEAK:
        state = "blind" if share < BLIND else "weak"
    return Seen(
        kind=kind,
        name=name,
        days=days,
        share=share,
        smallest=amplitude * column.scale,
        relative=amplitude / whole if whole and kind != "source" else None,
        identifiable=None if partners else apart * column.scale,
        unit=column.unit,
        state=state,
        partners=partners,
        near=names((cosine > NEAR) & ~same),
    )


def changes(before: tuple[Seen, ...], after: tuple[Seen, ...]) -> tuple[str, ...]:
    """
    Say what an added, or set aside, instrument changes in what can be seen.

    Parameters
    ----------
    before, after : tuple of Seen
        The table without and with it, or the other way round.
    """
    known = {(s.kind, s.name): s for s in before}
    result = []
    for now in after:
        then = known.get((now.kind, now.name))
        if then is None:
            result.append(f"{now.name}: {_words(now)} (new)")
        elif then.state != now.state or set(then.partners) != set(now.partners):
            result.append(f"{now.name}: {_words(then)} -> {_words(now)}")
    gone = known.keys() - {(s.kind, s.name) for s in after}
    result += [f"{name}: no longer measured" for _, name in sorted(gone)]
    return tuple(result)


def _words(seen: Seen) -> str:
    if seen.smallest is None:
        return seen.state
    size = f"from {seen.smallest:.3g} {seen.unit}".rstrip()
    like = f", not to be told from {', '.join(seen.partners)}" if seen.partners else ""
    return f"{seen.state} {size}{like}"
