"""The invented truth of the five-node site closes."""

from __future__ import annotations

from datetime import date

from recon.flowsheet.balances import balance_rows
from recon.flowsheet.network import Flowsheet, Node, Stream
from tests.fakes.five_node_rows import five_node_month


def test_every_balance_of_the_true_month_closes() -> None:
    made = five_node_month(through=date(2026, 1, 10), standing=(date(2026, 1, 5),))
    sheet = Flowsheet(
        quantities=made.site.quantities,
        nodes=tuple(
            Node(name=n.name, conserves=n.conserves, stock=n.stock) for n in made.site.nodes
        ),
        streams=tuple(
            Stream(name=s.name, source=s.source, target=s.target, carries=s.carries)
            for s in made.site.streams
        ),
    )
    true = made.truth.unknowns(made.days)
    for row in balance_rows([sheet] * len(made.days)):
        assert abs(sum(true[u] * c for u, c in row.form)) < 1e-9, row.name


def test_the_site_before_its_first_error_runs_at_plant_like_rates() -> None:
    made = five_node_month(through=date(2026, 1, 2))
    day = made.days[0]
    assert 400 < made.truth.amounts[day, "MATTE", "mass"] < 650
    assert all(v >= 0 for v in made.truth.amounts.values())
