"""Trials of a diagnosis against known faults: linear ones by the thousand, others solved anew."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass, field, replace
from types import SimpleNamespace
from typing import TYPE_CHECKING, cast

import numpy as np
from scipy.stats import chi2

from recon.reconcile.linearise import Local, Point, local
from recon.reconcile.read import reconcile
from recon.reconcile.state import State, state_of
from recon.solve.choose import FirstAccepted
from recon.solve.closed_form import ClosedForm
from recon.solve.convex import Convex
from recon.suspects.alarm import Limits, calibrate
from recon.suspects.explain import Explanation, Setting, setting_of
from recon.suspects.naming import best_explanation
from recon.suspects.prior import log_odds_of
from recon.suspects.signatures import Signatures, signatures_of

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from recon.reconcile.answer import Answer
    from tests.bench.sites import Case

    Vector = NDArray[np.float64]

VISIBLE = 6.0
SHORTEST = 1e-3
ENGINE = FirstAccepted([ClosedForm(), Convex()])


@dataclass(frozen=True, kw_only=True)
class Diagnosis:
    """What was said in one trial, in the trial's own signatures."""

    raised: bool
    signatures: Signatures
    setting: Setting
    log_odds: Vector
    found: Explanation | None
    seconds: float


@dataclass(frozen=True, kw_only=True)
class Fault:
    """A planted fault: the column it moves and its amplitude."""

    candidate: int
    amplitude: float


@dataclass(frozen=True, kw_only=True)
class Bench:
    """
    A case with everything calibrated at its truth.

    ``diagnose`` takes standardised errors of the readings and planted faults.
    """

    name: str
    signatures: Signatures
    setting: Setting
    limits: Limits
    log_odds: Vector
    diagnose: Callable[[Vector, list[Fault]], Diagnosis]
    level: float


def bench_of(case: Case, *, level: float, linear: bool) -> Bench:
    """Calibrate at the truth, as a site would at its usual operating point."""
    answer = reconcile(case.problem, ClosedForm())
    signatures = signatures_of(answer)
    limits = calibrate(answer.tests, level, basis=signatures.basis)
    setting = setting_of(signatures.candidates, signatures.columns, signatures.classes)
    odds = log_odds_of(signatures, level)
    bench = Bench(
        name=case.name,
        signatures=signatures,
        setting=setting,
        limits=limits,
        log_odds=odds,
        diagnose=lambda _e, _f: _never(),
        level=level,
    )
    run = _linear(bench, answer) if linear else _solved(bench, answer)
    return replace(bench, diagnose=run)


def _never() -> Diagnosis:
    raise RuntimeError("not ready")


def _linear(bench: Bench, answer: Answer) -> Callable[[Vector, list[Fault]], Diagnosis]:
    """Readings are linear in the unknowns, so signatures stay and z follows from the errors."""
    base = bench.signatures
    measured = answer.test_state.fit.measurements
    meters = [c.shift[0][0] if c.shift else -1 for c in base.columns]
    true = np.array([measured[r].value / (measured[r].u or 1.0) if r >= 0 else 0.0 for r in meters])
    is_meter = np.array(meters) >= 0

    def run(errors: Vector, faults: list[Fault]) -> Diagnosis:
        z = base.basis.T @ errors
        moved = errors.copy()
        for fault in faults:
            column = base.candidates[fault.candidate].columns[0]
            z = z + base.G[:, column] * fault.amplitude
            for row, shift in base.columns[column].shift:
                moved[row] += shift * fault.amplitude
        value = true + np.where(is_meter, moved[np.maximum(meters, 0)], 0.0)
        began = time.process_time()
        freed = base.G.T @ z / base.length**2
        size = np.maximum(np.abs(value), np.abs(value - freed))
        columns = tuple(
            replace(c, slabs=(0.2 * max(s, 1.0), max(s, 1.0)), value=v) if meter else c
            for c, s, v, meter in zip(
                base.columns, size.tolist(), value.tolist(), is_meter, strict=True
            )
        )
        signatures = replace(base, z=z, columns=columns)
        return _said(bench, signatures, began)

    return run


def _said(bench: Bench, signatures: Signatures, began: float) -> Diagnosis:
    setting = setting_of(signatures.candidates, signatures.columns, signatures.classes)
    data = np.array([bool(c.shift) for c in signatures.columns])
    largest = float(np.abs(signatures.T[data]).max())
    z = signatures.z
    raised = (
        largest > bench.limits.largest or float(chi2.sf(float(z @ z), len(z))) < bench.limits.common
    )
    found = None
    if raised:
        found, _ = best_explanation(signatures, setting, bench.log_odds, bench.level)
    return Diagnosis(
        raised=raised,
        signatures=signatures,
        setting=setting,
        log_odds=bench.log_odds,
        found=found,
        seconds=time.process_time() - began,
    )


def _solved(bench: Bench, answer: Answer) -> Callable[[Vector, list[Fault]], Diagnosis]:
    """
    Solve each trial's non-linear problem, then diagnose.

    From the truth without bounds, which is fast; where that runs into a vanishing mass, by the
    service's own engines with their bounds.
    """
    state, scale = answer.test_state, answer.test_local.scale[: len(answer.test_state.columns)]
    truth = answer.solution.point
    around = answer.test_local
    equal = around.equal.toarray()
    _, s, vt = np.linalg.svd(equal, full_matrices=True)
    null = vt[int(np.sum(s > 1e-10 * s[0])) :].T
    inverse = np.linalg.pinv(equal)

    def run(errors: Vector, faults: list[Fault]) -> Diagnosis:
        shifted, lost = errors.copy(), np.zeros(equal.shape[0])
        for fault in faults:
            column = bench.signatures.columns[
                bench.signatures.candidates[fault.candidate].columns[0]
            ]
            for row, shift in column.shift:
                shifted[row] += shift * fault.amplitude
            if not column.shift:
                lost += fault.amplitude * _opened(bench, answer, fault.candidate)
        moved = truth.x + scale * (inverse @ lost)[: len(scale)]
        value = state.fit.model(moved) + shifted[: len(state.fit.u)] * state.fit.u
        measured = tuple(
            replace(m, value=float(v)) for m, v in zip(state.fit.measurements, value, strict=True)
        )
        problem = replace(state.problem, measurements=measured)
        here = state_of(problem)
        try:
            point, near = _descend(here, truth, scale, null, inverse)
            fitted = SimpleNamespace(
                tests=ClosedForm().sensitivities(near),
                test_state=here,
                test_local=near,
                solution=SimpleNamespace(point=point),
            )
        except ArithmeticError:
            fitted = cast("SimpleNamespace", reconcile(problem, ENGINE))
        began = time.process_time()
        signatures = signatures_of(cast("Answer", fitted))
        return _said(_fitting(bench, signatures), signatures, began)

    return run


def _fitting(bench: Bench, signatures: Signatures) -> Bench:
    """Odds in the order of this trial's choices; a leak may vanish or appear with compositions."""
    if [c.name for c in signatures.candidates] == [c.name for c in bench.signatures.candidates]:
        return bench
    from recon.suspects.prior import relative_odds

    setting = setting_of(signatures.candidates, signatures.columns, signatures.classes)
    return replace(bench, log_odds=float(bench.log_odds.max()) + relative_odds(setting))


def _opened(bench: Bench, answer: Answer, candidate: int) -> Vector:
    """Gap of the scaled equalities per tonne of a leak."""
    from recon.suspects.leaks import leaks_of

    state, around = answer.test_state, answer.test_local
    n = len(state.columns)
    rows = state.equalities.toarray() * around.scale[:n]
    lengths = np.linalg.norm(rows, axis=1)
    leaks = [c for c in bench.signatures.candidates if c.kind == "leak"]
    which = leaks.index(bench.signatures.candidates[candidate])
    shown = [
        leak
        for leak in leaks_of(state, answer.solution.point.x)
        if any(c.name == leak.node for c in leaks)
    ]
    matching = [leak for leak in shown if leak.node == leaks[which].name]
    place = [c for c in leaks if c.name == leaks[which].name].index(leaks[which])
    gap = np.zeros(around.equal.shape[0])
    for row, part in matching[place].rows:
        gap[row] += part / lengths[row]
    return gap


def _descend(
    state: State, start: Point, scale: Vector, null: Vector, inverse: Vector
) -> tuple[Point, Local]:
    """Gauss-Newton without bounds, steps shortened where a mass that is assayed would vanish."""
    x = start.x.copy()
    for _ in range(30):
        near = local(state, Point(x=x, beta=start.beta), scale)
        data = near.data.toarray()
        first = inverse @ near.gap
        step = (
            first + null @ np.linalg.lstsq(data @ null, near.misfit - data @ first, rcond=None)[0]
        )
        if np.abs(data @ step).max() < 1e-7:
            return Point(x=x, beta=start.beta), near
        move = scale * step[: len(x)]
        below, change = state.fit.over @ x, state.fit.over @ move
        falling = state.fit.ratio & (change < 0)
        room = float(np.min(0.9 * below[falling] / -change[falling], initial=1.0))
        if room < SHORTEST:
            break
        x = x + room * move
    raise ArithmeticError("this trial did not come to rest")


@dataclass
class Tally:
    """Counts over trials with the same number of faults."""

    trials: int = 0
    raised: int = 0
    faults: int = 0
    found: int = 0
    visible: int = 0
    visible_found: int = 0
    near_visible: int = 0
    in_group: int = 0
    false: int = 0
    confident_false: int = 0
    all_visible: int = 0
    whole: int = 0
    lost: int = 0
    seconds: list[float] = field(default_factory=list)


def count(bench: Bench, tally: Tally, faults: list[Fault], said: Diagnosis) -> None:
    """Judge one trial, up to classes that cannot be told apart."""
    base = bench.signatures
    columns = [base.candidates[f.candidate].columns[0] for f in faults]
    delta = conditional(base.G[:, columns], np.array([f.amplitude for f in faults]))
    blamed = said.found.blamed if said.found is not None else ()
    names = [
        {
            (said.setting.candidates[k].kind, said.setting.candidates[k].name)
            for k in _class_of(said, b.candidate)
        }
        for b in blamed
    ]
    groups = {
        (said.setting.candidates[m.candidate].kind, said.setting.candidates[m.candidate].name)
        for b in blamed
        for m in b.group
    }
    true = [(base.candidates[f.candidate].kind, base.candidates[f.candidate].name) for f in faults]
    tally.trials += 1
    tally.raised += said.raised
    tally.seconds.append(said.seconds)
    for name, d in zip(true, delta, strict=True):
        hit = any(name in group for group in names)
        tally.faults += 1
        tally.found += hit
        tally.visible += d >= VISIBLE
        tally.visible_found += hit and d >= VISIBLE
        tally.near_visible += d >= 5
        tally.in_group += d >= 5 and name in groups
    for b, group in zip(blamed, names, strict=True):
        wrong = not group & set(true)
        tally.false += wrong
        tally.confident_false += wrong and b.probability > 0.8
    if faults and delta.min() >= VISIBLE:
        tally.all_visible += 1
        tally.whole += _same_span(said, base.G[:, columns])


def _class_of(said: Diagnosis, candidate: int) -> list[int]:
    """Every candidate that cannot be told from one."""
    own = said.setting.candidates[candidate].columns
    if len(own) > 1:
        return [candidate]
    classes = said.signatures.classes
    return [
        i
        for i, c in enumerate(said.setting.candidates)
        if len(c.columns) == 1 and classes[c.columns[0]] == classes[own[0]]
    ]


def _same_span(said: Diagnosis, true: Vector) -> bool:
    if said.found is None:
        return False
    columns = [k for b in said.found.blamed for k in said.setting.candidates[b.candidate].columns]
    if len(columns) != true.shape[1]:
        return False
    both = np.hstack([true, said.signatures.G[:, columns]])
    both = both / np.linalg.norm(both, axis=0)
    return bool(np.linalg.matrix_rank(both, tol=1e-5) == true.shape[1])


def conditional(G: Vector, amplitude: Vector) -> Vector:
    """Noncentrality of each fault given the others: |b| |g less its projection on theirs|."""
    result = np.empty(G.shape[1])
    for i in range(G.shape[1]):
        others = np.delete(G, i, axis=1)
        g = G[:, i]
        if others.shape[1]:
            g = g - others @ np.linalg.lstsq(others, g, rcond=None)[0]
        result[i] = abs(amplitude[i]) * np.linalg.norm(g)
    return result
