"""Instruments of the invented site err exactly as the site file declares."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Iterator
from functools import cache

import numpy as np
from scipy.stats import chi2

from recon.declare.site import Instrument
from recon.demo.clock import make_grid
from recon.demo.offsets import calibration_days, draw_offsets
from recon.demo.serving import multiplier, true_values
from recon.demo.shapes import MASS, QUANTITIES
from recon.demo.simulate import DayObserved, simulate_days
from recon.demo.sizes import Sizes
from recon.demo.truth import Truth, run_plant
from recon.ingest.rows import RowKind, Series
from recon.units import unit
from tests.demo.made import demo_site, instrument

DAYS = 61
SURE = 1e-5
"""Tests of chance fail once in so many honest runs; seeds are fixed."""


@cache
def observed() -> tuple[Truth, dict[str, np.ndarray], tuple[DayObserved, ...]]:
    grid = make_grid(demo_site(), months=2, interval=60)
    offsets = draw_offsets(demo_site(), grid=grid, seed=5)
    piece = {
        i.tag: (i.chain[0].value or 0.0) / (1.0 + float(offsets.relative(i)[0]))
        for i in demo_site().instruments
        if i.unit == "pieces"
    }
    truth = run_plant(demo_site(), grid=grid, seed=5, piece=piece)
    return (
        truth,
        true_values(demo_site(), grid, 5),
        tuple(simulate_days(demo_site(), days=DAYS, seed=5)),
    )


def within_chance(z: Iterable[float], names: str) -> None:
    """Check a sum of squares of standard normal draws against the chi-square law, both tails."""
    values = np.array(list(z))
    total = float(np.sum(values**2))
    n = len(values)
    assert n > 10, names
    assert chi2.ppf(SURE / 2, n) < total < chi2.ppf(1 - SURE / 2, n), (names, n, total / n)


def test_shared_errors_have_their_declared_standard_deviation_and_are_drawn_when_declared() -> None:
    site = demo_site()
    grid = make_grid(site, months=2, interval=60)
    declared = {s.name: s for s in site.sources}
    z = []
    for seed in range(60):
        offsets = draw_offsets(site, grid=grid, seed=seed)
        z += [d.value / declared[d.source].u for d in offsets.draws]
        starts = defaultdict(list)
        for d in offsets.draws:
            starts[d.source].append(d.first)
        for source in site.sources:
            expected = {
                "day": list(range(61)),
                "throughout": [0],
                "calibration": [0, *calibration_days(source.calibrated_by or "", grid)],
            }[source.lasts]
            assert starts[source.name] == expected, source.name
    within_chance(z, "shared errors")


def amount_of(series: Series, truth: Truth, index: int) -> float:
    """Integrate one day of a rate, or take a totaliser's difference."""
    if len(series.value) == truth.grid.first[index + 1] - truth.grid.first[index]:
        return float(series.value.sum() * truth.grid.hours)
    return float(series.value[-1] - series.value[0])


def meter_z(
    day: DayObserved, truth: Truth, sizes: Sizes, serving: dict[str, np.ndarray]
) -> Iterator[tuple[str, float]]:
    """Give each meter's error of a day beyond its shared errors, in declared uncertainties."""
    read = {s.tag: s for s in day.series}
    samples = {
        f"{r.subject} {r.item}": r.value
        for r in day.records
        if r.kind is RowKind.ASSAY and r.value is not None
    }
    span = slice(*truth.grid.span(day.index, day.index))
    for i in demo_site().instruments:
        if i.stream is None or i.kind not in ("rate", "totaliser"):
            continue
        true = truth.amounts(i.stream)[day.index, QUANTITIES.index(i.quantity or "")]
        if true == 0.0:
            continue
        raw = amount_of(read[i.tag], truth, day.index)
        if raw < 0:
            raw += i.modulus or 0.0
        second: dict[str, np.ndarray] = {}
        shared = 1.0 + float(day.offsets.relative(i)[day.index])
        for step in i.chain:
            if step.tag is None:
                continue
            other = instrument(step.tag)
            factor = unit(other.unit).factor
            value = read[step.tag].value.mean() if step.tag in read else samples[step.tag]
            second[step.tag] = np.array([value * factor])
            mean = serving[step.tag][span].mean()
            off = day.offsets.absolute(other)[day.index] * factor
            off += day.offsets.relative(other)[day.index] * mean
            one = multiplier(i, {step.tag: np.array([mean])})
            shifted = multiplier(i, {step.tag: np.array([mean + off])})
            shared *= float(np.ravel(shifted)[0] / np.ravel(one)[0])
        amount = raw * float(np.ravel(multiplier(i, second))[0])
        yield i.tag, (amount - true * shared) / float(sizes.of_amount(i)[day.index])


def test_meters_with_what_serves_their_chains_err_as_declared() -> None:
    truth, serving, days = observed()
    by_tag: dict[str, list[float]] = defaultdict(list)
    sizes = Sizes(truth)
    for day in days:
        for tag, z in meter_z(day, truth, sizes, serving):
            by_tag[tag].append(z)
    assert len(by_tag) >= 25
    within_chance([z for zs in by_tag.values() for z in zs], "meters together")
    for tag, zs in by_tag.items():
        within_chance(zs, tag)


def test_assays_err_as_declared_and_stages_share_the_sampling_error() -> None:
    truth, _, days = observed()
    sizes = Sizes(truth)
    declared = {
        (i.point, i.analyte): i
        for i in demo_site().instruments
        if i.kind == "assay" and i.stream is not None
    }
    whole: dict[str, list[float]] = defaultdict(list)
    between: list[float] = []
    for day in days:
        rows: dict[tuple[str, str, str], dict[str, float]] = defaultdict(dict)
        spans = {}
        for r in day.records:
            if r.kind is RowKind.ASSAY and (r.subject, r.item) in declared:
                assert r.value is not None
                rows[r.document, r.subject, r.item][r.stage] = r.value
                spans[r.document] = (r.true_from, r.true_to)
        for (document, point, analyte), stages in rows.items():
            i = declared[point, analyte]
            first, last = spans[document]
            begin = truth.grid.step_of(first)
            steps = slice(begin, begin + round((last - first).total_seconds() / 3600))
            flow = truth.flow[i.stream or ""][steps].sum(axis=0)
            true = flow[QUANTITIES.index(analyte)] / flow[MASS] / unit(i.unit).factor
            ran = min(
                float(steps.stop - steps.start), float(sizes.hours(i.stream or "")[day.index])
            )
            parts = sizes.of_assay(i, sizes.grade(i), ran)
            expected = true * (1.0 + day.offsets.relative(i)[day.index])
            for value in stages.values():
                u = np.linalg.norm([parts.sampling, parts.preparation, parts.analysis])
                whole[i.tag].append(float((value - expected) / u))
            if {"rapid", "final"} <= set(stages):
                u = np.sqrt(2.0) * np.hypot(parts.preparation, parts.analysis)
                between.append((stages["rapid"] - stages["final"]) / u)
    assert len(whole) >= 70
    single = [
        z for tag, zs in whole.items() if instrument_stages(tag, declared.values()) == 1 for z in zs
    ]
    within_chance(single, "assays of one stage")
    within_chance(between, "differences between stages")
    for tag, zs in whole.items():
        if instrument_stages(tag, declared.values()) == 1:
            within_chance(zs, tag)


def instrument_stages(tag: str, instruments: Iterable[Instrument]) -> int:
    return next(len(i.stages) for i in instruments if i.tag == tag)


def test_tickets_of_a_day_err_as_declared() -> None:
    truth, serving, days = observed()
    sizes = Sizes(truth)
    z = []
    for day in days:
        sums: dict[str, float] = defaultdict(float)
        for r in day.records:
            if r.kind is RowKind.TICKET:
                sums[r.subject] += r.value or 0.0
        for tag, raw in sums.items():
            i = next(k for k in demo_site().instruments if k.tag == tag)
            if any(step.by == "moisture" and step.tag for step in i.chain):
                continue  # dried by a sample: with the meters' kind of chain
            true = truth.amounts(i.stream or "")[day.index, MASS]
            per_unit = float(np.ravel(multiplier(i, serving))[0])
            shared = 1.0 + float(day.offsets.relative(i)[day.index])
            u = float(sizes.of_amount(i)[day.index])
            if tag != "PS-410":  # its u is of the size of the tickets' last digit
                z.append((raw * per_unit - true * shared) / u)
    within_chance(z, "tickets")


def test_stocks_err_as_declared_and_opening_and_closing_share_their_density() -> None:
    truth, _, days = observed()
    z = []
    for day in days[1:60]:
        for r in day.records:
            if r.kind is not RowKind.SURVEY or r.subject not in ("flash furnace", "converters"):
                continue
            i = next(
                k
                for k in demo_site().instruments
                if k.kind == "survey" and (k.node, k.analyte) == (r.subject, r.item)
            )
            step = truth.grid.step_of(r.true_from)
            true = float(truth.stock[r.subject][step][QUANTITIES.index(r.item)])
            shared = 1.0 + float(day.offsets.relative(i)[day.index])
            u = float(np.hypot(i.uncertainty.zero, i.uncertainty.relative * true))  # type: ignore[union-attr]
            z.append(((r.value or 0.0) - true * shared) / u)
    within_chance(z, "dips")
