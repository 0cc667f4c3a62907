"""A month that can be followed on paper: a shed with one receipt, one product, one discard.

Nodes: SHED (stock) feeds MILL, which makes CONC (product) and TAIL (discard). Amounts are written
down by the test; nothing is simulated.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from datetime import date, time, timedelta

from recon.declare.site import (
    ErrorSource,
    Instrument,
    Section,
    Site,
    SiteFigure,
    SiteNode,
    SiteStream,
    Term,
    Uncertainty,
    Use,
)
from recon.flowsheet.balances import Amount, Stock
from recon.flowsheet.network import MASS, Flowsheet, Node, Stream
from recon.ingest.given import OpeningStock
from recon.ingest.measured import Correction, IngestedMonth, Measured
from recon.reconcile.answer import Answer
from recon.reconcile.problem import (
    Draw,
    Effect,
    Measurement,
    MeasurementKind,
    Part,
    Problem,
)
from recon.reconcile.read import reconcile
from recon.solve.closed_form import ClosedForm
from recon.tabulate.leaves import Booked, YearLeaf
from recon.tabulate.tables import Tables, tables_of

FIRST = date(2026, 1, 1)
BOTH = (MASS, "Cu")


def shed_site(*, sources: Sequence[ErrorSource] = (), roll_limit_days: float = 1.0) -> Site:
    """A shed with one receipt and one product; copper is metered directly."""
    return Site(
        name="shed",
        zone="UTC",
        valid_from=FIRST,
        day_cut=time(6),
        quantities=BOTH,
        sections=(Section(name="yard"),),
        nodes=(
            SiteNode(
                name="SHED",
                section="yard",
                conserves=BOTH,
                stock=True,
                roll_limit_days=roll_limit_days,
            ),
        ),
        streams=(
            SiteStream(name="IN", target="SHED", carries=BOTH, role="receipt"),
            SiteStream(name="OUT", source="SHED", carries=BOTH, role="product"),
        ),
        instruments=tuple(
            Instrument(
                tag=f"{place} {q}", kind="tickets", unit="t", uncertainty=Uncertainty(zero=1)
            )
            for place in ("IN", "OUT", "SHED")
            for q in BOTH
        ),
        sources=tuple(sources),
    )


def mill_site() -> Site:
    """A shed, then a mill with concentrate and tailings; grades are assayed."""
    return Site(
        name="mill",
        zone="UTC",
        valid_from=FIRST,
        day_cut=time(6),
        quantities=BOTH,
        sections=(Section(name="yard"), Section(name="concentrator")),
        nodes=(
            SiteNode(name="SHED", section="yard", conserves=BOTH, stock=True),
            SiteNode(name="MILL", section="concentrator", conserves=BOTH),
        ),
        streams=(
            SiteStream(name="ORE", target="SHED", carries=BOTH, role="receipt"),
            SiteStream(name="FEED", source="SHED", target="MILL", carries=BOTH),
            SiteStream(name="CONC", source="MILL", carries=BOTH, role="product"),
            SiteStream(name="TAIL", source="MILL", carries=BOTH, role="discard"),
        ),
        instruments=tuple(
            Instrument(
                tag=f"{place} {q}",
                kind="tickets",
                unit="t" if q == MASS else "%",
                stages=("final",) if q == MASS else ("provisional", "final"),
                uncertainty=Uncertainty(zero=1),
            )
            for place in ("ORE", "FEED", "CONC", "TAIL", "SHED")
            for q in BOTH
        ),
        figures=(
            SiteFigure(
                name="Cu recovery",
                of=(Term(stream="CONC", quantity="Cu"),),
                over=(Term(stream="FEED", quantity="Cu"),),
            ),
        ),
    )


def flowsheet(site: Site) -> Flowsheet:
    """The network of a site."""
    return Flowsheet(
        quantities=site.quantities,
        nodes=tuple(Node(name=n.name, conserves=n.conserves, stock=n.stock) for n in site.nodes),
        streams=tuple(
            Stream(name=s.name, source=s.source, target=s.target, carries=s.carries)
            for s in site.streams
        ),
    )


@dataclass
class Paper:
    """Collects what was measured in a month and states it."""

    site: Site
    days: int = 2
    first: date = FIRST
    draws: tuple[Draw, ...] = ()
    measured: list[Measured] = field(default_factory=list)
    not_running: tuple[tuple[date, str], ...] = ()

    def day(self, period: int) -> date:
        """Plant day of a period."""
        return self.first + timedelta(days=period - 1)

    def amount(
        self,
        period: int,
        stream: str,
        value: float,
        *,
        quantity: str = "Cu",
        u: float | None = 1.0,
        shared: Mapping[int, float] | None = None,
        relative: bool = True,
        tag: str = "",
        use: Use = "fit",
        moisture: float | None = None,
        estimated: bool = False,
        stage: str = "",
        corrections: tuple[Correction, ...] = (),
        set_aside: bool = False,
    ) -> None:
        """An amount of a stream [t]."""
        tag = tag or f"{stream} {quantity}"
        self.measured.append(
            Measured(
                measurement=Measurement(
                    name=tag,
                    period=period,
                    kind=MeasurementKind.METER,
                    parts=(Part(of=((Amount(period, stream, quantity), 1.0),)),),
                    value=value,
                    u=u,
                    held=use == "held",
                    effects=_effects(shared, relative),
                ),
                tag=tag,
                day=self.day(period),
                stream=stream,
                quantity=quantity,
                basis="amount",
                use=use,
                moisture=moisture,
                estimated=estimated,
                stage=stage,
                corrections=corrections,
                set_aside=set_aside,
            )
        )

    def grade(
        self,
        periods: Sequence[int],
        stream: str,
        percent: float,
        *,
        quantity: str = "Cu",
        u: float = 0.01,
        shared: Mapping[int, float] | None = None,
        stage: str = "final",
        name: str = "",
        estimated: bool = False,
    ) -> None:
        """An assay [%] of a sample over some days."""
        tag = f"{stream} {quantity}"
        self.measured.append(
            Measured(
                measurement=Measurement(
                    name=name or tag,
                    period=periods[-1],
                    kind=MeasurementKind.ASSAY,
                    parts=(
                        Part(
                            of=tuple((Amount(p, stream, quantity), 1.0) for p in periods),
                            over=tuple((Amount(p, stream, MASS), 1.0) for p in periods),
                        ),
                    ),
                    value=percent / 100,
                    u=u / 100,
                    unit="%",
                    unit_factor=0.01,
                    effects=_effects(shared, True),
                ),
                tag=tag,
                day=self.day(periods[-1]),
                stream=stream,
                quantity=quantity,
                basis="fraction",
                use="fit",
                stage=stage,
                estimated=estimated,
            )
        )

    def stock(
        self,
        boundary: int,
        value: float,
        *,
        quantity: str = "Cu",
        node: str = "SHED",
        u: float = 5.0,
        shared: Mapping[int, float] | None = None,
        relative: bool = True,
        rolled_hours: float = 0.0,
        estimated: bool = False,
    ) -> None:
        """A survey [t] at a boundary."""
        tag = f"{node} {quantity}"
        period = max(boundary, 1)
        self.measured.append(
            Measured(
                measurement=Measurement(
                    name=f"{tag} {'opening' if boundary == 0 else 'closing'}",
                    period=period,
                    kind=MeasurementKind.STOCK,
                    parts=(Part(of=((Stock(boundary, node, quantity), 1.0),)),),
                    value=value,
                    u=u,
                    effects=_effects(shared, relative),
                ),
                tag=tag,
                day=self.day(period),
                node=node,
                boundary="opening" if boundary == 0 else "closing",
                quantity=quantity,
                basis="amount",
                use="fit",
                rolled_hours=rolled_hours,
                estimated=estimated,
            )
        )

    def ingested(self) -> IngestedMonth:
        """Hand the month on as ingest does."""
        sheet = flowsheet(self.site)
        return IngestedMonth(
            days=tuple(self.day(p) for p in range(1, self.days + 1)),
            problem=Problem(
                flowsheets=(sheet,) * self.days,
                measurements=tuple(
                    m.measurement for m in self.measured if m.use != "compare" and not m.set_aside
                ),
                draws=self.draws,
            ),
            measured=tuple(self.measured),
            findings=(),
            not_running=self.not_running,
        )

    def answer(self) -> Answer:
        """Reconcile the month."""
        return reconcile(self.ingested().problem, ClosedForm())

    def tables(
        self,
        *,
        opening: Sequence[OpeningStock] = (),
        opening_signed: bool = True,
        year: Sequence[YearLeaf] = (),
        booked: Sequence[Booked] = (),
    ) -> Tables:
        """State the month."""
        return tables_of(
            sites=(self.site,) * self.days,
            ingested=self.ingested(),
            answer=self.answer(),
            opening=opening,
            opening_signed=opening_signed,
            year=year,
            booked=booked,
        )


def _effects(shared: Mapping[int, float] | None, relative: bool) -> tuple[Effect, ...]:
    return tuple(
        Effect(draw=draw, factor=factor, relative=relative)
        for draw, factor in (shared or {}).items()
    )


def simple_month(
    *,
    opening: float = 1000.0,
    into: float = 500.0,
    out: float = 480.0,
    closing: float = 1010.0,
    first: date = FIRST,
) -> Paper:
    """Two days that add up to the figures given; copper and a dry mass of four times as much."""
    paper = Paper(site=shed_site(), first=first)
    for q, times in (("Cu", 1.0), (MASS, 4.0)):
        paper.stock(0, opening * times, quantity=q)
        for p in (1, 2):
            paper.amount(p, "IN", into / 2 * times, quantity=q)
            paper.amount(p, "OUT", out / 2 * times, quantity=q)
        paper.stock(2, closing * times, quantity=q)
    return paper
