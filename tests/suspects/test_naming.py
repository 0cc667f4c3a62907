"""The fault is named, with its size, its group and its balances; bounds never silence it."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from recon.flowsheet.balances import Amount
from recon.reconcile.answer import Answer
from recon.reconcile.problem import Measurement, MeasurementKind, Part, Problem
from recon.reconcile.read import reconcile
from recon.solve.closed_form import ClosedForm
from recon.suspects.alarm import Alarm, raise_alarm
from recon.suspects.beam import Evidence, Gram, search
from recon.suspects.explain import explain, setting_of
from recon.suspects.naming import Suspect, name_suspects
from recon.suspects.prior import log_odds_of
from recon.suspects.signatures import signatures_of
from recon.suspects.words import RAISE_WITH_OWNER, advice_for, sentence_on
from tests.bench.sites import RECYCLE_ENDS, flow_network
from tests.networks import EXCHANGER_ENDS, metered, network

BIASED = dict(zip(EXCHANGER_ENDS, [101.91, 68.45, 34.65, 64.20, 36.44, 98.88], strict=True))
RECYCLE = {"1": 100.0, "2": 130.0, "3": 150.0, "4": 120.0, "5": 30.0, "6": 100.0, "7": 20.0}


def named(problem: Problem, level: float = 0.05) -> tuple[Answer, Alarm, tuple[Suspect, ...]]:
    answer = reconcile(problem, ClosedForm())
    alarm = raise_alarm(answer.tests, level)
    return answer, alarm, name_suspects(answer, alarm)


def recycle(changed: dict[str, float], typical: bool = False) -> Problem:
    problem = metered(
        network(RECYCLE_ENDS), {**RECYCLE, **changed}, u={k: 0.02 * v for k, v in RECYCLE.items()}
    )
    if not typical:
        return problem
    return replace(
        problem,
        measurements=tuple(replace(m, typical=RECYCLE[m.name[1:]]) for m in problem.measurements),
    )


def test_six_streams_with_a_bias_name_stream_two_first() -> None:
    """Same verdict as Narasimhan and Jordache 2000, ch. 7 (from memory)."""
    _, _, suspects = named(metered(network(EXCHANGER_ENDS), BIASED))
    assert len(suspects) == 1
    suspect = suspects[0]
    assert (suspect.kind, suspect.names[0]) == ("meter", "F2")
    assert suspect.size == pytest.approx(3.925, abs=1e-3)
    assert suspect.u == pytest.approx(1.5**0.5, abs=1e-6)
    assert suspect.balances[0][0] == "1: exchanger mass"
    assert sum(a.share for a in suspect.alternatives) >= 0.9


def test_no_alarm_names_nobody() -> None:
    _, alarm, suspects = named(recycle({}))
    assert (alarm.raised, suspects) == (False, ())


@pytest.mark.parametrize("typical", [False, True])
def test_a_dead_meter_that_reads_zero_is_named(typical: bool) -> None:
    _, _, suspects = named(recycle({"4": 0.0}, typical))
    assert [s.names[0] for s in suspects] == ["F4"]
    assert suspects[0].certainty == "likely"
    assert suspects[0].size == pytest.approx(-120.0, abs=8)


def test_two_faults_in_a_recycle_are_both_named() -> None:
    _, _, suspects = named(recycle({"3": 190.0, "6": 80.0}))
    groups = [set(s.names) for s in suspects]
    assert any("F3" in g for g in groups)
    assert any("F6" in g for g in groups)
    assert len(groups) == 2


def test_an_exact_class_is_named_whole() -> None:
    """A leak at the last node and the meter that leaves it for outside have one signature."""
    _, _, suspects = named(recycle({"6": 140.0}))
    (suspect,) = suspects
    assert {"F6", "D"} <= set(suspect.names)
    assert {a.kind for a in suspect.alternatives if a.name in {"F6", "D"}} == {"meter", "leak"}


def test_the_order_of_readings_does_not_matter() -> None:
    problem = recycle({"3": 190.0, "6": 80.0})
    shuffled = replace(problem, measurements=problem.measurements[::-1])
    one, other = named(problem)[2], named(shuffled)[2]
    assert [s.names for s in one] == [s.names for s in other]
    assert [s.size for s in one] == pytest.approx([s.size for s in other])


def assayed(grades: dict[str, dict[str, float]], flows: dict[str, float]) -> Problem:
    quantities = ("mass", "Cu", "Fe", "S", "SiO2")
    sheet = network(
        {"feed": (None, "cell"), "conc": ("cell", None), "tail": ("cell", None)}, quantities
    )
    measurements = [
        Measurement(
            name=f"{s} mass",
            period=1,
            kind=MeasurementKind.METER,
            parts=(Part(of=((Amount(1, s, "mass"), 1.0),)),),
            value=v,
            u=0.01 * v,
        )
        for s, v in flows.items()
    ]
    measurements += [
        Measurement(
            name=f"{s} {q}",
            period=1,
            kind=MeasurementKind.ASSAY,
            parts=(Part(of=((Amount(1, s, q), 1.0),), over=((Amount(1, s, "mass"), 1.0),)),),
            value=v,
            u=0.02 * v,
            unit="%",
            unit_factor=0.01,
            sampler=f"{s} sampler",
        )
        for s, row in grades.items()
        for q, v in row.items()
    ]
    return Problem(flowsheets=(sheet,), measurements=tuple(measurements))


FLOWS = {"feed": 1000.0, "conc": 100.0, "tail": 900.0}
GRADES = {
    "feed": {"Cu": 0.030, "Fe": 0.100, "S": 0.080, "SiO2": 0.500},
    "conc": {"Cu": 0.255, "Fe": 0.280, "S": 0.305, "SiO2": 0.080},
    "tail": {"Cu": 0.005, "Fe": 0.080, "S": 0.055, "SiO2": 49.2 / 90},
}


def test_a_sample_taker_that_shifts_every_assay_is_named_as_one_fault() -> None:
    """Copper, iron and sulfur up, silica down: the usual shape of a coarse sample's error."""
    shift = {"Cu": 1.25, "Fe": 1.25, "S": 1.25, "SiO2": 0.85}
    wrong = {**GRADES, "feed": {q: v * shift[q] for q, v in GRADES["feed"].items()}}
    _, _, suspects = named(assayed(wrong, FLOWS))
    assert [(s.kind, s.names[0]) for s in suspects] == [("sampler", "feed sampler")]
    signs = {p.name: np.sign(p.size) for p in suspects[0].parts}
    assert signs == {"feed Cu": 1, "feed Fe": 1, "feed S": 1, "feed SiO2": -1}


def test_one_slipped_assay_is_named_with_its_unit_and_copper() -> None:
    wrong = {**GRADES, "feed": {**GRADES["feed"], "Cu": 0.039}}
    _, _, suspects = named(assayed(wrong, FLOWS))
    (suspect,) = suspects
    assert (suspect.kind, suspect.names[0], suspect.unit) == ("assay", "feed Cu", "%")
    assert suspect.size == pytest.approx(0.9, abs=0.1)
    assert suspect.copper == pytest.approx(9.0, abs=1.0)


def test_bounds_choose_among_explanations_but_never_silence() -> None:
    """Freed, the blamed meter would have to read below zero, and nothing else fits: still named."""
    sheet = network({"in": (None, "tee"), "a": ("tee", None), "b": ("tee", None)})
    problem = metered(sheet, {"in": 100.0, "a": 125.0, "b": 5.0}, u={"in": 0.5, "a": 0.5, "b": 0.5})
    answer, alarm, suspects = named(problem)
    assert alarm.raised
    assert suspects
    signatures = signatures_of(answer)
    setting = setting_of(signatures.candidates, signatures.columns, signatures.classes)
    tight = replace(setting, columns=tuple(replace(c, low=1e9, high=1e9) for c in setting.columns))
    evidence = Evidence(N=signatures.G.T @ signatures.z, M=signatures.G.T @ signatures.G)
    odds = log_odds_of(signatures, 0.05)
    free = explain(evidence, setting, odds)
    bound = explain(evidence, tight, odds)
    assert (free.bounded, bound.bounded) == (True, False)
    assert bound.blamed


def test_many_small_errors_are_raised_as_unexplained() -> None:
    """The overall test speaks while no signature stands out: nobody is blamed, the alarm stays."""
    case = flow_network(np.random.default_rng(1), streams=28, nodes=11, name="")
    signatures = signatures_of(reconcile(case.problem, ClosedForm()))
    odds = log_odds_of(signatures, 0.05)
    random = np.random.default_rng(0)
    unit = signatures.G / signatures.length
    z = np.full(11, 9.0)
    while np.abs(unit.T @ z).max() > 2.75:
        z = random.standard_normal(11)
        z *= 5.4 / np.linalg.norm(z)
    alarm = Alarm(raised=True, level=0.05, global_p=2e-3, largest=2.75, limit=3.1)
    (suspect,) = name_suspects(
        reconcile(case.problem, ClosedForm()),
        alarm,
        signatures=replace(signatures, z=z),
        log_odds=odds,
    )
    assert (suspect.kind, suspect.names, suspect.size) == ("unexplained", (), None)
    assert "no admissible set of faults explains the residuals" in suspect.note
    assert "Nothing was set aside" in sentence_on(suspect)


def test_the_beam_finds_what_trying_every_set_finds() -> None:
    """Exhaustive posterior over all sets of up to two choices of seven meters and their leaks."""
    signatures = signatures_of(reconcile(recycle({"3": 190.0, "6": 80.0}), ClosedForm()))
    setting = setting_of(signatures.candidates, signatures.columns, signatures.classes)
    choices, label = setting.choices, setting.label
    N, M = signatures.G.T @ signatures.z, signatures.G.T @ signatures.G
    odds = np.full(len(choices.owner), -4.0)
    found = search(Gram(Evidence(N=N, M=M), choices, label), odds, width=60, visited=400, depth=2)
    H = signatures.G[:, choices.column] * choices.scale
    count = len(choices.owner)
    best: tuple[float, tuple[int, ...]] = (0.0, ())
    for i in range(count):
        for j in range(i, count):
            if i != j and label[i] == label[j]:
                continue
            members = (i,) if i == j else (i, j)
            copies = [int(k) for choice in members for k in choices.copies(choice)]
            cover = np.eye(len(signatures.z)) + H[:, copies] @ H[:, copies].T
            weight = (
                -0.5 * signatures.z @ np.linalg.solve(cover, signatures.z)
                + 0.5 * signatures.z @ signatures.z
                - 0.5 * np.linalg.slogdet(cover)[1]
                - 4.0 * len(members)
            )
            if members in found:
                assert found[members] == pytest.approx(weight, abs=1e-6)
            best = max(best, (float(weight), members))
    assert max(found, key=lambda k: found[k]) == best[1]


def test_chance_is_blamed_as_rarely_as_the_level_says() -> None:
    """Fault-free draws on a recycle; the larger check is in the further tier."""
    answer = reconcile(recycle({}), ClosedForm())
    signatures = signatures_of(answer)
    setting = setting_of(signatures.candidates, signatures.columns, signatures.classes)
    odds = log_odds_of(signatures, 0.05)
    M = signatures.G.T @ signatures.G
    random = np.random.default_rng(12)
    blamed = 0
    trials = 600
    for _ in range(trials):
        z = random.standard_normal(len(signatures.z))
        blamed += bool(explain(Evidence(N=signatures.G.T @ z, M=M), setting, odds).blamed)
    assert blamed / trials == pytest.approx(0.05, abs=0.01 + 2 * (0.05 * 0.95 / trials) ** 0.5)


@pytest.mark.parametrize("service", ["protective", "nuclear", "molten metal", "acid"])
def test_no_field_instruction_is_given_where_a_service_can_hurt(service: str) -> None:
    _, _, suspects = named(recycle({"4": 0.0}))
    plain, guarded = sentence_on(suspects[0]), sentence_on(suspects[0], [service])
    assert "compare its zero and span" in plain
    assert RAISE_WITH_OWNER in guarded
    assert "compare its zero" not in guarded
    assert advice_for("meter", ["custody", service]) == RAISE_WITH_OWNER


def test_nothing_is_ever_called_healthy() -> None:
    _, _, suspects = named(recycle({"4": 0.0}))
    assert "healthy" not in sentence_on(suspects[0])
