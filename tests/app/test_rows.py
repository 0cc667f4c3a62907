"""Rows that a run publishes."""

from __future__ import annotations

import json

import pytest

from recon.app.rows import figure_rows
from tests.tabulate.test_unaccounted import shared_density


def test_unaccounted_is_published_with_its_budget_by_instrument_and_source() -> None:
    paper = shared_density()
    rows = figure_rows(paper.ingested(), paper.answer(), paper.tables().figures)
    (row,) = [r for r in rows if r.name == "unaccounted Cu"]
    assert (row.period, row.basis) == ("2026-01", "computed")
    assert row.u == pytest.approx(72**0.5)
    budget = json.loads(row.budget)
    # density 36 of 72; both surveys 16 each, one instrument; four tickets of 1
    assert [(b["name"], b["source"]) for b in budget[:2]] == [
        ("survey density", True),
        ("SHED Cu", False),
    ]
    assert [b["share"] for b in budget[:2]] == pytest.approx([0.5, 32 / 72])
