"""Stated uncertainties that are wrong are found, with limits that cover; right ones are let be."""

from __future__ import annotations

import numpy as np
import pytest

from recon.findings import NotApplicable
from recon.reconcile.answer import Answer
from recon.reconcile.read import reconcile
from recon.solve.closed_form import ClosedForm
from recon.suspects.review import Ratio, by_instrument, overall
from tests.networks import EXCHANGER_ENDS, metered, network

TRUE = dict(zip(EXCHANGER_ENDS, [100.0, 64.0, 36.0, 64.0, 36.0, 100.0], strict=True))


def days(random: np.random.Generator, count: int, worse: dict[str, float]) -> list[Answer]:
    return [
        reconcile(
            metered(
                network(EXCHANGER_ENDS),
                {
                    k: v + worse.get(k, 1.0) * float(random.standard_normal())
                    for k, v in TRUE.items()
                },
            ),
            ClosedForm(),
        )
        for _ in range(count)
    ]


def test_an_instrument_twice_as_bad_as_stated_is_found_and_a_factor_proposed() -> None:
    found = by_instrument(days(np.random.default_rng(1), 50, {"2": 2.0}))
    assert found[0].name == "F2"
    assert found[0].low ** 0.5 < 2.0 < found[0].high ** 0.5
    assert found[0].proposal == pytest.approx(2.0, rel=0.3)
    assert "as a recorded decision" in found[0].text


def test_right_uncertainties_are_let_be() -> None:
    fits = days(np.random.default_rng(2), 25, {})
    whole = overall([a.test_objective for a in fits], [a.degrees_of_freedom for a in fits])
    assert isinstance(whole, Ratio)
    assert whole.proposal is None
    assert whole.low < 1.0 < whole.high
    assert "agrees with 25 days" in whole.text


def test_limits_cover_the_truth_as_often_as_they_say() -> None:
    """Sums of squares drawn from their law: 95 % of limits hold the true ratio, here 1.21."""
    random = np.random.default_rng(3)
    cover = 0
    for _ in range(400):
        sums = 1.21 * random.chisquare(4, size=30)
        found = overall([float(s) for s in sums], [4] * 30)
        assert isinstance(found, Ratio)
        cover += found.low <= 1.21 <= found.high
    assert cover / 400 == pytest.approx(0.95, abs=0.035)


def test_nothing_redundant_gives_a_reason_and_no_number() -> None:
    assert isinstance(overall([0.0], [0]), NotApplicable)
