"""The truth of the invented site: it closes, it is physical, and it is the same each time."""

from __future__ import annotations

import numpy as np
import pytest

from recon.demo.clock import make_grid
from recon.demo.shapes import MASS, QUANTITIES
from recon.demo.simulate import simulate
from tests.demo.made import demo_site, hourly


def worst(imbalances: dict[tuple[str, str], np.ndarray]) -> float:
    return max(float(np.abs(v).max()) for v in imbalances.values())


def test_every_balance_of_the_truth_closes_on_every_day_with_leaks_in_it() -> None:
    simulation = simulate(demo_site(), months=2, interval=5, seed=4, faults="on")
    found = simulation.truth.imbalances()
    conserved = {(n.name, q) for n in demo_site().nodes for q in n.conserves}
    assert set(found) == conserved
    assert all(len(v) == 61 for v in found.values())
    assert worst(found) < 1e-9
    assert simulation.truth.lost_by_day("cleaners")[-1, MASS] > 10.0


@pytest.mark.parametrize("seed", [2, 3, 11])
def test_amounts_and_stocks_are_never_negative_and_components_fit_into_the_mass(seed: int) -> None:
    truth = hourly(seed=seed).truth
    assert worst(truth.imbalances()) < 1e-9
    for stream in demo_site().streams:
        flow = truth.flow[stream.name]
        assert flow.min() >= 0.0, stream.name
        assert flow[:, [QUANTITIES.index(q) for q in stream.carries]].sum() > 0, stream.name
        if "mass" in stream.carries:
            assert (flow[:, 1:].sum(axis=1) <= flow[:, MASS] + 1e-9).all(), stream.name
        else:
            assert not flow[:, MASS].any()
    for node, stock in truth.stock.items():
        conserves = next(n.conserves for n in demo_site().nodes if n.name == node)
        held = stock[:, [QUANTITIES.index(q) for q in conserves]]
        assert held.min() > 0.0, node


def test_key_figures_lie_inside_the_ranges_of_the_trade() -> None:
    """Ranges: common practice, as in handbooks of copper extraction; from memory."""
    truth = hourly().truth
    total = {s.name: truth.amounts(s.name).sum(axis=0) for s in demo_site().streams}

    def cu(*streams: str) -> float:
        return float(sum(total[s][1] for s in streams))

    def grade(stream: str, q: str) -> float:
        return float(total[stream][QUANTITIES.index(q)] / total[stream][MASS])

    assert 0.85 < cu("final concentrate") / cu("mill feed") < 0.93
    assert 0.75 < cu("slag concentrate") / cu("slag concentrate", "slag tails") < 0.88
    assert 0.55 < grade("tapped matte", "Cu") < 0.70
    assert 1.1 < grade("furnace slag", "Fe") / grade("furnace slag", "SiO2") < 1.6
    assert 1.6 < grade("converter slag", "Fe") / grade("converter slag", "SiO2") < 2.3
    assert 0.985 < grade("blister", "Cu") < 0.995
    assert 0.990 < grade("anodes", "Cu") < 0.996
    assert 0.9999 < grade("cathode", "Cu") < 1.0
    sulfur_in = sum(total[s][3] for s in ("filter cake", "custom A", "custom B"))
    assert 0.95 < total["acid"][3] / sulfur_in < 0.999


def test_the_two_streams_leaving_the_dust_bins_are_of_one_composition_each_day() -> None:
    truth = hourly().truth
    one, other = truth.amounts("recycled dust"), truth.amounts("sold dust")
    both = (one[:, MASS] > 0) & (other[:, MASS] > 0)
    assert both.sum() >= 10
    np.testing.assert_allclose(
        one[both] / one[both][:, :1], other[both] / other[both][:, :1], rtol=1e-12
    )


def test_streams_stop_for_whole_days() -> None:
    truth = hourly().truth
    for stream in ("custom B", "crushed reverts", "slag concentrate", "sold dust"):
        stood = truth.amounts(stream)[:, MASS] == 0.0
        assert 3 <= stood.sum() < 60, stream


def test_the_day_on_which_clocks_go_forward_has_23_hours() -> None:
    grid = make_grid(demo_site(), months=2, interval=5)
    hours = dict(zip((d.isoformat() for d in grid.days), grid.day_hours, strict=True))
    assert hours["2025-03-29"] == 23.0
    assert sum(h != 24.0 for h in hours.values()) == 1


@pytest.mark.parametrize(
    ("months", "interval", "said"), [(0, 5, "months: 1 or more"), (1, 7, "divide an hour")]
)
def test_lengths_that_cannot_be_are_refused(months: int, interval: int, said: str) -> None:
    with pytest.raises(ValueError, match=said):
        make_grid(demo_site(), months=months, interval=interval)


def test_the_same_seed_gives_the_same_bits_and_another_seed_others() -> None:
    first = hourly(months=1)
    again = simulate(demo_site(), months=1, interval=60, seed=1, faults="off")
    other = hourly(months=1, seed=2)
    assert first.records == again.records
    for a, b, c in zip(first.series, again.series, other.series, strict=True):
        assert a.value.tobytes() == b.value.tobytes()
        assert a.at.tobytes() == b.at.tobytes()
        assert a.tag.startswith("XS") or a.value.tobytes() != c.value.tobytes()
    for stream, flow in first.truth.flow.items():
        assert flow.tobytes() == again.truth.flow[stream].tobytes()
