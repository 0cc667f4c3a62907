"""From an accepted solution to an answer people can use."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
from scipy import sparse
from scipy.stats import chi2

from recon.findings import NotApplicable, Statistic
from recon.flowsheet.balances import Amount, Stock, Unknown
from recon.flowsheet.network import MASS
from recon.reconcile.accept import BOUND, OPTIMUM, check
from recon.reconcile.answer import Answer, Estimate, Offset, Reconciled
from recon.reconcile.figures import REDUNDANT, figure_values, uncertainties
from recon.reconcile.linearise import STANDING, local, standing_parts
from recon.reconcile.state import Column, Readings, State, carries_mass, state_of

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from recon.reconcile.linearise import Local
    from recon.reconcile.problem import Problem
    from recon.reconcile.solver import Engine, Sensitivities, Solution

    Vector = NDArray[np.float64]

NULL = "The stated uncertainties explain every adjustment; no gross error."
STREAM_STANDS = "stream stands"


def reconcile(problem: Problem, engine: Engine) -> Answer:
    """
    Solve a problem and read the answer.

    Parameters
    ----------
    problem : Problem
    engine : Engine

    Raises
    ------
    SolveError
        No acceptable answer exists.
    """
    state = state_of(problem)
    solution = engine.solve(state)
    sensitivities = engine.sensitivities(solution.local)
    estimates = tuple(_estimates(state, solution, sensitivities))
    test_state, test_local = _test_problem(state, solution)
    tests = sensitivities if test_state is state else engine.sensitivities(test_local)
    residuals = tests.residuals
    objective = float(residuals @ residuals)
    freedom = tests.degrees_of_freedom
    return Answer(
        estimates=estimates,
        measurements=tuple(_reconciled(state, test_state, solution, tests)),
        offsets=tuple(_offsets(state, solution, sensitivities, tests)),
        figures=tuple(figure_values(state, solution, sensitivities, problem.figures)),
        objective=solution.objective,
        test=overall_test(objective, freedom),
        test_objective=objective,
        degrees_of_freedom=freedom,
        acceptance=check(solution),
        state=state,
        test_state=test_state,
        solution=solution,
        sensitivities=sensitivities,
        tests=tests,
        test_local=test_local,
    )


def overall_test(objective: float, degrees_of_freedom: int) -> Statistic | NotApplicable:
    """
    Test all residuals at once.

    Parameters
    ----------
    objective : float
        Sum of squared standardised residuals of the problem without inequality bounds [-].
    degrees_of_freedom : int
        Of the chi-square law it follows where nothing is wrong [-].

    Returns
    -------
    Statistic or NotApplicable
        ``NotApplicable`` where no balance is redundant.

    Examples
    --------
    >>> result = overall_test(16.674, 4)
    >>> round(result.p_value, 5)
    0.00224
    """
    if degrees_of_freedom <= 0:
        return NotApplicable(reason="no balance is redundant, so nothing can be tested")
    return Statistic(
        null=NULL,
        value=objective,
        degrees_of_freedom=degrees_of_freedom,
        p_value=float(chi2.sf(objective, degrees_of_freedom)),
    )


def _test_problem(state: State, solution: Solution) -> tuple[State, Local]:
    """The problem the tests come from: held figures with an uncertainty are measured ones."""
    if all(m.u is None for m in state.held.measurements):
        return state, solution.local
    freed = replace(
        state.problem,
        measurements=tuple(
            replace(m, held=m.held and m.u is None) for m in state.problem.measurements
        ),
    )
    test_state = state_of(freed)
    scale = solution.local.scale[: len(state.columns)]
    return test_state, local(test_state, solution.point, scale)


def _estimates(state: State, solution: Solution, sensitivities: Sensitivities) -> list[Estimate]:
    bound = _at_bound(state, solution)
    top = [i for i, c in enumerate(state.columns) if isinstance(c, Amount | Stock)]
    below = [-1] * len(top)
    for i in tuple(top):
        if carries_mass(state, state.columns[i]):
            top.append(i)
            below.append(state.index[_mass_of(state.columns[i])])
    over, mass = np.array(top, dtype=np.intp), np.array(below, dtype=np.intp)
    order = np.lexsort((mass >= 0, over))
    over, mass = over[order], mass[order]
    value, gradients = _values(solution, over, mass)
    stands = np.isnan(value)
    known = sensitivities.determined(gradients) & ~stands
    u = uncertainties(state, solution, sensitivities, gradients)
    result: list[Estimate] = []
    for k, (i, j) in enumerate(zip(over, mass, strict=True)):
        unknown = state.columns[i]
        assert isinstance(unknown, Amount | Stock)
        result.append(
            Estimate(
                unknown=unknown,
                fraction=bool(j >= 0),
                value=float(value[k]) if known[k] else None,
                u=float(u[k]) if known[k] else None,
                determined=bool(known[k]),
                at_bound=bool(bound[i]),
                reason="" if known[k] else STREAM_STANDS if stands[k] else "cannot be found",
            )
        )
    return result


def _mass_of(column: Column) -> Unknown:
    assert isinstance(column, Amount | Stock)
    return column._replace(quantity=MASS)


def _values(
    solution: Solution, over: NDArray[np.intp], mass: NDArray[np.intp]
) -> tuple[Vector, sparse.csr_array]:
    """Values, NaN where a stream stands, and scaled gradients (k, N) of amounts and fractions."""
    x, scale = solution.point.x, solution.local.scale
    k = np.arange(len(over))
    fraction = mass >= 0
    running = fraction & (x[mass] > STANDING * scale[mass])
    below = np.where(running, x[mass], 1.0)
    value = np.where(fraction & ~running, np.nan, x[over] / below)
    slope = np.where(fraction & ~running, 0.0, scale[over] / below)
    tilt = (-x[over] / below**2 * scale[mass])[running]
    return value, sparse.csr_array(
        (
            np.concatenate([slope, tilt]),
            (np.concatenate([k, k[running]]), np.concatenate([over, mass[running]])),
        ),
        shape=(len(k), len(scale)),
    )


def _at_bound(state: State, solution: Solution) -> NDArray[np.bool_]:
    """Which unknowns a bound holds, shape (n,)."""
    pressed = (solution.bound_force > OPTIMUM) & (solution.local.room > -BOUND)
    touched = abs(state.bounds).T @ pressed.astype(np.float64)
    return np.asarray(touched > 0)


def _reconciled(
    state: State, test_state: State, solution: Solution, tests: Sensitivities
) -> list[Reconciled]:
    tested = {(m.name, m.period): i for i, m in enumerate(test_state.fit.measurements)}
    residuals, leverage = tests.residuals, tests.leverage
    fit = {
        (m.name, m.period): value
        for readings in (state.fit, state.held)
        for m, value in zip(readings.measurements, _readings_at(readings, solution), strict=True)
    }
    result = []
    for m in state.problem.measurements:
        model, shared = fit[m.name, m.period]
        row = tested.get((m.name, m.period))
        left = float(leverage[row]) if row is not None else 0.0
        redundant = left > REDUNDANT
        result.append(
            Reconciled(
                measurement=m,
                u=None if m.u is None else float(np.hypot(m.u, shared)),
                reconciled=model,
                adjustment=None if model is None else model - m.value,
                standardised=(
                    float(residuals[row]) / left**0.5 if redundant and row is not None else None
                ),
                redundant=redundant,
            )
        )
    return result


def _readings_at(readings: Readings, solution: Solution) -> list[tuple[float | None, float]]:
    """Model value and shared uncertainty of each reading; None where its ratio stands."""
    if not readings.measurements:
        return []
    x = solution.point.x
    stopped = standing_parts(readings, x, solution.local.scale[: len(x)])
    stands = (abs(readings.gather) @ stopped.astype(np.float64)) > 0
    with np.errstate(divide="ignore", invalid="ignore"):
        model = readings.model(x)
        safe = np.where(stands, readings.value, model)
    scaled = np.abs(readings.relative.toarray() * safe[:, None] + readings.absolute.toarray()) ** 2
    shared = np.sqrt(scaled.sum(axis=1))
    return [
        (None if s else float(v), float(w)) for v, s, w in zip(model, stands, shared, strict=True)
    ]


def _offsets(
    state: State, solution: Solution, sensitivities: Sensitivities, tests: Sensitivities
) -> list[Offset]:
    g = state.draws
    if g == 0:
        return []
    n, wide = len(state.columns), len(solution.local.scale)
    gradients = sparse.csr_array(sparse.eye_array(g, wide, k=n))
    u = uncertainties(state, solution, sensitivities, gradients)
    residuals, leverage = tests.residuals[-g:], tests.leverage[-g:]
    return [
        Offset(
            draw=draw,
            offset=float(solution.point.beta[i]) * draw.u,
            u=float(u[i]) * draw.u,
            standardised=(
                -float(residuals[i]) / float(leverage[i]) ** 0.5
                if leverage[i] > REDUNDANT
                else None
            ),
        )
        for i, draw in enumerate(state.problem.draws)
    ]
