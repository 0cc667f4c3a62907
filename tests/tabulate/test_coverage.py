"""Does the stated uncertainty of unaccounted hold: many noisy months against their truth."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from recon.declare.site import ErrorSource
from recon.ingest.measured import IngestedMonth
from recon.reconcile.problem import Draw
from recon.tabulate.accounts import account
from recon.tabulate.as_measured import AsMeasured
from recon.tabulate.boundaries import boundaries_of
from tests.tabulate.paper import Paper, shed_site

MONTHS = 2000
SEED = 20260101


def noisy(paper: Paper, random: np.random.Generator) -> IngestedMonth:
    """Spoil every reading by its own error and by its draws, as the measurement model says."""
    offsets = [random.normal(0, d.u) for d in paper.draws]
    month = paper.ingested()
    measured = []
    for m in month.measured:
        value = m.measurement.value
        for e in m.measurement.effects:
            value += e.factor * offsets[e.draw] * (m.measurement.value if e.relative else 1.0)
        value += random.normal(0, m.measurement.u or 0.0)
        measured.append(replace(m, measurement=replace(m.measurement, value=value)))
    return replace(month, measured=tuple(measured))


def true_month() -> Paper:
    """A month without loss: 1000 + 475.6 - 480.6 - 995 t, density, scale and method shared."""
    sources = [
        ErrorSource(name=name, u=u, relative=True)
        for name, u in (("density", 0.03), ("scale", 0.005), ("method", 0.006))
    ]
    paper = Paper(
        site=shed_site(sources=sources),
        draws=tuple(Draw(source=s.name, first=1, u=s.u) for s in sources),
    )
    paper.stock(0, 1000.0, u=6.0, shared={0: 1.0})
    paper.stock(2, 995.0, u=6.0, shared={0: 1.0})
    for p, (mass, percent) in enumerate(((1000.0, 25.0), (900.0, 25.0667)), start=1):
        paper.amount(p, "IN", mass, quantity="mass", u=8.0, shared={1: 1.0})
        paper.grade([p], "IN", percent, u=0.2, shared={2: 1.0})
    paper.amount(1, "OUT", 240.0, u=1.5, shared={1: 0.4})
    paper.amount(2, "OUT", 240.6003, u=1.5, shared={1: 0.4})
    return paper


def test_two_standard_uncertainties_cover_the_truth_in_about_95_percent_of_months() -> None:
    random = np.random.default_rng(SEED)
    paper = true_month()
    boundary = boundaries_of([paper.site])[0]
    values, u = np.zeros(MONTHS), np.zeros(MONTHS)
    for k in range(MONTHS):
        measured = AsMeasured(noisy(paper, random), (paper.site,) * 2)
        struck = account(measured, boundary, "Cu", 1, 2)
        assert struck.unaccounted is not None
        values[k] = struck.unaccounted.value
        u[k] = measured.readings.uncertainty(struck.unaccounted)
    true = 1000.0 + 250.0 + 225.6003 - 480.6003 - 995.0
    assert true == pytest.approx(0.0, abs=1e-9)
    z = values / u
    covered = float(np.mean(np.abs(z) <= 1.959964))
    # four binomial standard deviations about 95 % in 2000 months
    assert abs(covered - 0.95) < 4 * (0.95 * 0.05 / MONTHS) ** 0.5
    assert abs(float(np.std(z)) - 1.0) < 4 / (2 * MONTHS) ** 0.5
    assert abs(float(np.mean(z))) < 4 / MONTHS**0.5
