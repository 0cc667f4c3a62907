"""The small site: its page adds up by hand, and the balance file agrees with the page."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest

from recon.app.solve_file import SolvedFile, solve_file
from recon.declare.balance_file import read_balance
from recon.declare.site_file import flowsheet_of, read_site
from recon.flowsheet.balances import Amount, balance_rows
from recon.flowsheet.network import Flowsheet
from recon.solve.closed_form import ClosedForm

CONFIG = Path(__file__).resolve().parents[2] / "config"
PAGE = CONFIG / "small" / "README.md"
BALANCE = CONFIG / "balances" / "small.toml"
QUANTITIES = ("mass", "Cu", "Fe", "S", "SiO2")


def round_truth() -> dict[Amount, float]:
    """Read the page's table."""
    amounts: dict[Amount, float] = {}
    for line in PAGE.read_text(encoding="utf-8").splitlines():
        cells = [c.strip() for c in line.strip("|").split("|")]
        if line.startswith("|") and len(cells) == 8 and re.search(r"\d", line) and cells[0]:
            for q, cell in zip(QUANTITIES, cells[3:], strict=True):
                if re.fullmatch(r"\d+", cell):
                    amounts[Amount(1, cells[0], q)] = float(cell)
    return amounts


def sheets() -> list[Flowsheet]:
    site = flowsheet_of(read_site(CONFIG / "small" / "site.toml").site)
    return [site, read_balance(BALANCE).problem.flowsheets[0]]


@pytest.fixture(scope="module")
def solved() -> SolvedFile:
    return solve_file(BALANCE, engine=ClosedForm(), level=0.05)


@pytest.mark.parametrize("which", [0, 1], ids=["site file", "balance file"])
def test_the_pages_round_numbers_close_every_balance_of_both_files(which: int) -> None:
    truth, sheet = round_truth(), sheets()[which]
    assert {(s.name, q) for s in sheet.streams for q in s.carries} == {
        (a.stream, a.quantity) for a in truth
    }
    rows = list(balance_rows([sheet]))
    assert len(rows) == 13
    for row in rows:
        assert sum(c * truth[u] for u, c in row.form if isinstance(u, Amount)) == 0.0, row.name


def test_the_balance_file_is_solved_close_to_the_round_truth_without_alarm(
    solved: SolvedFile,
) -> None:
    truth = round_truth()
    for estimate in solved.answer.estimates:
        assert estimate.determined
        assert estimate.value is not None
        assert estimate.u is not None
        assert isinstance(estimate.unknown, Amount)
        if not estimate.fraction:
            assert abs(estimate.value - truth[estimate.unknown]) < 2.5 * estimate.u, estimate
    assert not solved.alarm.raised


def test_blister_copper_is_what_the_page_works_out_by_hand(solved: SolvedFile) -> None:
    """Weighted mean of two independent values: JCGM 100:2008, 5.1 and H.2 give the rules used."""
    crane, u_crane = 303.0 * 0.990, np.hypot(3.0 * 0.990, 303.0 * 0.001)
    left = 256.1 + 40.0 * 0.975 + 5.0 * 0.20 + 1.0
    scrap = np.hypot(0.2 * 0.975, 40.0 * 0.002)
    slimes = np.hypot(0.1 * 0.20, 5.0 * 0.004)
    u_left = np.linalg.norm([0.1, scrap, slimes, 0.02])
    weight = np.array([u_crane**-2, u_left**-2])
    by_hand = float(weight @ [crane, left] / weight.sum())
    u = float(weight.sum() ** -0.5)
    assert (round(by_hand, 2), round(u, 3)) == (297.12, 0.235)
    page = PAGE.read_text(encoding="utf-8")
    assert "= 297.12 t,    u = 0.235 t" in page
    blister = next(
        e
        for e in solved.answer.estimates
        if e.unknown == Amount(1, "blister", "Cu") and not e.fraction
    )
    assert blister.value == pytest.approx(by_hand, abs=0.02)
    assert blister.u == pytest.approx(u, rel=0.01)
    assert f"prints {blister.value:.3f}" in page
