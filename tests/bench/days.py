"""Do single days tell the truth: coverage of intervals and rate of the overall test, no fault on.

`python -m tests.bench days [--days 2000] [--seed 1]`: days of the demo site's truth, each observed
anew with fresh draws of every error, are integrated, ingested and reconciled one by one. Printed:
how often the 95 % interval holds the truth, pooled by class, and how often the overall test rejects
at 5 %, each with a 95 % confidence interval (Wilson). The demo months themselves are not judged.
"""

from __future__ import annotations

import argparse
import math
import sys
from collections import Counter
from concurrent.futures import ProcessPoolExecutor
from datetime import UTC, datetime
from functools import partial
from multiprocessing import get_context
from pathlib import Path
from typing import TYPE_CHECKING

from recon import __version__
from recon.declare.site_file import read_versions
from recon.demo.shapes import QUANTITIES
from recon.demo.simulate import simulate_days
from recon.findings import Statistic
from recon.flowsheet.balances import Amount, Stock, Unknown
from recon.ingest.build import ingest_month, with_references
from recon.ingest.given import SiteVersion
from recon.reconcile.read import reconcile
from recon.solve.standard import standard_engine

if TYPE_CHECKING:
    from collections.abc import Iterator

    from recon.demo.simulate import DayObserved
    from recon.reconcile.answer import Answer, Estimate

Z95 = 1.959963984540054
SITE = Path(__file__).resolve().parents[2] / "config" / "demo" / "site.toml"
Tally = Counter[str]


def wilson(hits: int, trials: int) -> tuple[float, float]:
    """Give the 95 % confidence interval of a rate (Wilson 1927)."""
    if trials == 0:
        return 0.0, 1.0
    rate, z2 = hits / trials, Z95**2
    centre = (rate + z2 / (2 * trials)) / (1 + z2 / trials)
    half = Z95 / (1 + z2 / trials) * math.sqrt(rate * (1 - rate) / trials + z2 / (4 * trials**2))
    return centre - half, centre + half


def tally(share: int, *, days: int, seed: int, shares: int) -> Tally:
    """Judge one share of the days; every share observes a truth and draws of its own."""
    (declared,) = read_versions(SITE)
    site = declared.site
    version = SiteVersion(digest=declared.digest, site=site)
    engine = standard_engine()
    counts: Tally = Counter()
    mine = days // shares + (1 if share < days % shares else 0)
    for observed in simulate_days(site, days=mine, seed=seed + 1000 * share):
        month = ingest_month([version], [observed.day], observed.tag_days, observed.records)
        first = reconcile(month.problem, engine)
        month = with_references(month, _fitted(first))
        answer = reconcile(month.problem, engine)
        counts["days"] += 1
        if isinstance(answer.test, Statistic):
            counts["tested"] += 1
            counts["rejected"] += answer.test.p_value < 0.05
        for name, inside in _judged(answer, _truth(observed)):
            counts[f"{name} judged"] += 1
            counts[f"{name} inside"] += inside
    return counts


def _fitted(answer: Answer) -> dict[tuple[str, int], float]:
    return {
        (m.measurement.name, m.measurement.period): m.reconciled
        for m in answer.measurements
        if m.reconciled is not None
    }


def _truth(observed: DayObserved) -> dict[Unknown, float]:
    """What truly flowed on a day, and stood at both its ends [t]."""
    true: dict[Unknown, float] = {}
    i, truth = observed.index, observed.truth
    for stream in truth.site.streams:
        for q, value in zip(QUANTITIES, truth.amounts(stream.name)[i], strict=True):
            true[Amount(1, stream.name, q)] = float(value)
    for node in truth.site.nodes:
        if node.stock:
            for boundary in (0, 1):
                row = truth.at_cuts(node.name)[i + boundary]
                for q, value in zip(QUANTITIES, row, strict=True):
                    true[Stock(boundary, node.name, q)] = float(value)
    return true


def _judged(answer: Answer, truth: dict[Unknown, float]) -> Iterator[tuple[str, bool]]:
    for estimate in answer.estimates:
        if estimate.value is None or not estimate.u or estimate.at_bound:
            continue
        true = _true(estimate, truth)
        if true is not None:
            name = "grades" if estimate.fraction else "amounts"
            if isinstance(estimate.unknown, Stock):
                name = f"stock {name}"
            yield name, abs(estimate.value - true) <= Z95 * estimate.u


def _true(estimate: Estimate, truth: dict[Unknown, float]) -> float | None:
    whole = truth[estimate.unknown]
    if not estimate.fraction:
        return whole
    mass = truth[estimate.unknown._replace(quantity="mass")]
    return whole / mass if mass > 0 else None


def main(arguments: list[str]) -> int:
    """Run the command."""
    parser = argparse.ArgumentParser(prog="python -m tests.bench days", description=__doc__)
    parser.add_argument("--days", type=int, default=2000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--workers", type=int, default=2)
    asked = parser.parse_args(arguments)
    counts: Tally = Counter()
    work = partial(tally, days=asked.days, seed=asked.seed, shares=asked.workers)
    if asked.workers == 1:
        counts += work(0)
    else:
        with ProcessPoolExecutor(asked.workers, mp_context=get_context("spawn")) as pool:
            for part in pool.map(work, range(asked.workers)):
                counts += part
    when = datetime.now(UTC).date().isoformat()
    print(
        f"single days of the demo site, faults off; {when}, seed {asked.seed}, recon {__version__}"
    )
    print(f"days {counts['days']}, overall test possible on {counts['tested']}")
    low, high = wilson(counts["rejected"], counts["tested"])
    rate = counts["rejected"] / max(counts["tested"], 1)
    print(f"overall test rejects at 5 %: {rate:.4f}   95 % interval {low:.4f} to {high:.4f}")
    print("coverage of the 95 % intervals, bounds not active:")
    for name in ("amounts", "grades", "stock amounts", "stock grades"):
        judged, inside = counts[f"{name} judged"], counts[f"{name} inside"]
        if judged:
            low, high = wilson(inside, judged)
            print(
                f"  {name:<14}{inside / judged:.4f}   {low:.4f} to {high:.4f} "
                f"(as if independent)   of {judged}"
            )
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
