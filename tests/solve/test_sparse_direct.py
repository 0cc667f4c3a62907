"""The sparse engine against the dense closed form, and on a whole month."""

from __future__ import annotations

from functools import cache
from typing import TYPE_CHECKING

import numpy as np
import pytest

from recon.reconcile.accept import check
from recon.reconcile.read import reconcile
from recon.reconcile.state import state_of
from recon.solve.closed_form import ClosedForm
from recon.solve.sparse_direct import SparseDirect
from tests.months import Recipe, synthetic_month, with_errors

if TYPE_CHECKING:
    from recon.reconcile.problem import Problem
    from recon.reconcile.solver import Solution

FULL = Recipe(standing=1, alike=1, composites=2, held=True)
RECIPES = {"plain": (Recipe(), 0), "everything": (FULL, 1), "sparse readings": (Recipe(), 4)}
EACH = pytest.mark.parametrize("case", RECIPES)


@cache
def _problem(case: str) -> Problem:
    recipe, seed = RECIPES[case]
    month = synthetic_month(np.random.default_rng(seed), recipe)
    return with_errors(month, np.random.default_rng(1000 + seed))


@cache
def _solution(case: str) -> Solution:
    return SparseDirect().solve(state_of(_problem(case)))


@EACH
def test_the_optimum_is_that_of_the_closed_form(case: str) -> None:
    dense, ours = ClosedForm().solve(state_of(_problem(case))), _solution(case)
    assert check(ours).reasons == ()
    assert ours.objective == pytest.approx(dense.objective, rel=1e-10)
    apart = (
        np.concatenate([ours.point.x - dense.point.x, ours.point.beta - dense.point.beta])
        / ours.local.scale
    )
    assert np.abs(ours.local.data @ apart).max() < 1e-8


@EACH
def test_sensitivities_are_those_of_dense_factors(case: str) -> None:
    local = _solution(case).local
    ours, dense = SparseDirect().sensitivities(local), ClosedForm().sensitivities(local)
    assert ours.degrees_of_freedom == dense.degrees_of_freedom
    assert ours.leverage == pytest.approx(dense.leverage, abs=1e-7)
    assert ours.residuals == pytest.approx(dense.residuals, abs=1e-8)
    gradients = np.eye(len(local.scale))
    known = dense.determined(gradients)
    assert (ours.determined(gradients) == known).all()
    rows = dense.rows(gradients[known])
    assert ours.rows(gradients[known]) == pytest.approx(rows, rel=1e-6, abs=1e-8)
    assert ours.variances(gradients[known]) == pytest.approx(
        dense.variances(gradients[known]), rel=1e-6, abs=1e-10
    )
    assert ours.shared_rows(gradients[known]) == pytest.approx(
        rows[:, len(local.standing) :], rel=1e-6, abs=1e-8
    )
    some = np.arange(0, len(local.misfit), 7)
    assert ours.residual_covariance(some) == pytest.approx(
        dense.residual_covariance(some), abs=1e-7
    )


@EACH
def test_both_engines_read_the_same_answer(case: str) -> None:
    ours, dense = (reconcile(_problem(case), e) for e in (SparseDirect(), ClosedForm()))
    for a, b in zip(ours.estimates, dense.estimates, strict=True):
        assert (a.unknown, a.fraction, a.determined) == (b.unknown, b.fraction, b.determined)
        if a.determined:
            assert a.u == pytest.approx(b.u, rel=1e-5, abs=1e-9)
            assert a.value == pytest.approx(b.value, abs=1e-6 * (b.u or 0.0) + 1e-9)


@pytest.mark.long
def test_a_month_of_a_whole_site_is_solved() -> None:
    recipe = Recipe(
        days=31, nodes=15, streams=40, components=4, stocks=4, alike=1, surveyed=0.2, composites=3
    )
    month = synthetic_month(np.random.default_rng(3), recipe)
    solution = SparseDirect().solve(state_of(with_errors(month, np.random.default_rng(1003))))
    assert check(solution).reasons == ()
