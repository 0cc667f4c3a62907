"""Tag-days, tickets, assays and surveys of the five-node site, made from a truth that closes.

With ``errors=None`` every row is true, so the month must come back exactly. With ``Errors`` every
instrument has its declared random error and every shared source one offset a draw.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from datetime import UTC, date, datetime, timedelta
from typing import TYPE_CHECKING

import numpy as np

from recon.flowsheet.balances import Amount, Stock
from recon.ingest.rows import Record, RowKind, TagDay
from recon.plant_time import Calendar
from tests.fakes.five_nodes import (
    RUN,
    SULFUR_IN_ACID,
    SULFUR_IN_SO2,
    SULFUR_PER_NM3,
    five_node_site,
)

if TYPE_CHECKING:
    from recon.declare.site import Instrument, Site

MOISTURE = {"CONC": 0.085, "CHARGE": 0.082, "SHED": 0.083}
DENSITY = 1.95
ACID_STRENGTH = 0.985
FGAS_SO2 = 0.30
TAILGAS_SO2 = 900e-9
"""Tail gas, t SO2 per Nm3."""
LOADS = 10
GRADES = {
    "MATTE": {"Cu": 0.62, "Fe": 0.134, "S": 0.229},
    "SLAG": {"Cu": 0.015, "Fe": 0.41, "S": 0.005, "SiO2": 0.32},
    "CSLAG": {"Cu": 0.06, "Fe": 0.46, "S": 0.012, "SiO2": 0.24},
    "FLUX": {"Fe": 0.015, "SiO2": 0.92},
    "BLISTER": {"Cu": 0.989},
    "ANODE": {"Cu": 0.9935},
}
CONCENTRATE = {"Cu": 0.275, "Fe": 0.28, "S": 0.315, "SiO2": 0.08}


@dataclass(frozen=True, kw_only=True)
class Truth:
    """
    What truly happened.

    Attributes
    ----------
    days : tuple of date
    amounts : dict
        (day, stream, quantity) -> t.
    stocks : dict
        (day, quantity) of SHED at the day's **start** -> t; the last key is the day after.
    hours : dict
        Hours the furnace ran, by day.
    """

    days: tuple[date, ...]
    amounts: dict[tuple[date, str, str], float]
    stocks: dict[tuple[date, str], float]
    hours: dict[date, float]

    def unknowns(self, days: Sequence[date]) -> dict[Amount | Stock, float]:
        """Truth of a month's unknowns, period p being ``days[p - 1]``."""
        found: dict[Amount | Stock, float] = {}
        for p, day in enumerate(days, start=1):
            for (of, stream, quantity), value in self.amounts.items():
                if of == day:
                    found[Amount(p, stream, quantity)] = value
        for boundary, day in enumerate([*days, days[-1] + timedelta(days=1)]):
            for quantity in ("mass", *CONCENTRATE):
                found[Stock(boundary, "SHED", quantity)] = self.stocks[day, quantity]
        return found


def calendar_of(site: Site) -> Calendar:
    """Give the site's calendar."""
    return Calendar(zone=site.zone, day_cut=site.day_cut)


def day_span(first: date, last: date) -> tuple[date, ...]:
    """List days, both ends included."""
    return tuple(first + timedelta(days=i) for i in range((last - first).days + 1))


def truth_of(
    days: Sequence[date], *, seed: int = 0, standing: Sequence[date] = (), lost_cu: float = 0.0
) -> Truth:
    """
    Simulate the site; every balance closes to rounding.

    Parameters
    ----------
    standing : sequence of date
        Days on which the furnace and all after it stand.
    lost_cu : float
        Copper that leaves the shed each day without any stream [t]: a true loss.
    """
    random = np.random.default_rng(seed)
    calendar = calendar_of(five_node_site())
    amounts: dict[tuple[date, str, str], float] = {}
    stocks: dict[tuple[date, str], float] = {}
    stock = {"mass": 9000.0, **{q: 9000.0 * g for q, g in CONCENTRATE.items()}}
    for day in days:
        for quantity, value in stock.items():
            stocks[day, quantity] = value
        hours = calendar.hours(day)
        wobble = {q: g * (1 + 0.02 * random.standard_normal()) for q, g in CONCENTRATE.items()}
        receipt = 1100.0 * hours / 24 * (1 + 0.05 * random.standard_normal())
        charge = 1100.0 * hours / 24 * (1 + 0.05 * random.standard_normal())
        if day in standing:
            charge = 0.0
        flows = {"CONC": {"mass": receipt, **{q: receipt * g for q, g in wobble.items()}}}
        flows["CHARGE"] = {q: charge * v / stock["mass"] for q, v in stock.items()}
        flows.update(_smelt(flows["CHARGE"], random))
        for stream, carried in flows.items():
            for quantity, value in carried.items():
                amounts[day, stream, quantity] = value
        stock = {q: v + flows["CONC"][q] - flows["CHARGE"][q] for q, v in stock.items()}
        stock["Cu"] -= lost_cu
    after = days[-1] + timedelta(days=1)
    for quantity, value in stock.items():
        stocks[after, quantity] = value
    return Truth(
        days=tuple(days),
        amounts=amounts,
        stocks=stocks,
        hours={d: 0.0 if d in standing else calendar.hours(d) for d in days},
    )


def _smelt(charge: dict[str, float], random: np.random.Generator) -> dict[str, dict[str, float]]:
    """Solve matte, slags, fluxes and blister from the Cu, Fe and SiO2 of both vessels."""
    g = {
        s: {
            q: v * (1 + (0.001 if s == "BLISTER" else 0.01) * float(random.standard_normal()))
            for q, v in of.items()
        }
        for s, of in GRADES.items()
        if s != "ANODE"
    }
    g["CFLUX"] = dict(GRADES["FLUX"])
    names = ["MATTE", "SLAG", "FLUX", "CSLAG", "CFLUX", "BLISTER"]
    signs = {
        "furnace": {"MATTE": -1.0, "SLAG": -1.0, "FLUX": 1.0, "CSLAG": 1.0},
        "converter": {"MATTE": 1.0, "CSLAG": -1.0, "CFLUX": 1.0, "BLISTER": -1.0},
    }
    elements = ("Cu", "Fe", "SiO2")
    matrix = np.array(
        [
            [signs[v].get(s, 0.0) * g[s].get(q, 0.0) for s in names]
            for v in ("furnace", "converter")
            for q in elements
        ]
    )
    right = np.array([-charge[q] for q in elements] + [0.0] * 3)
    masses = dict(zip(names, np.linalg.solve(matrix, right).tolist(), strict=True))
    flows = {s: {"mass": m, **{q: m * v for q, v in g[s].items()}} for s, m in masses.items()}
    matte_s, cslag_s = flows["MATTE"]["S"], flows["CSLAG"]["S"]
    flows["FGAS"] = {"S": charge["S"] + cslag_s - matte_s - flows["SLAG"]["S"]}
    flows["CGAS"] = {"S": matte_s - cslag_s}
    gas = flows["FGAS"]["S"] + flows["CGAS"]["S"]
    flows["TAILGAS"] = {"S": 0.0025 * gas}
    flows["ACID"] = {"S": gas - flows["TAILGAS"]["S"]}
    copper = flows["BLISTER"]["Cu"]
    flows["ANODE"] = {"mass": copper / GRADES["ANODE"]["Cu"], "Cu": copper}
    return flows


@dataclass
class Errors:
    """Random and shared errors as the site declares them, drawn once each."""

    site: Site
    seed: int
    _offsets: dict[tuple[str, str], float] = field(default_factory=dict)

    def reading(self, tag: str, key: str, true: float, *, typical: float) -> float:
        """Spoil a true value [instrument's unit or the day's amount]."""
        instrument = next(i for i in self.site.instruments if i.tag == tag)
        value = true
        for shared in instrument.shared:
            source = next(s for s in self.site.sources if s.name == shared.source)
            draw = key[:10] if source.lasts == "day" else ""
            offset = shared.factor * self._offset(source.name, draw, source.u)
            value = value * (1 + offset) if source.relative else value + offset
        u = instrument.uncertainty
        if u is None:
            return value
        relative = u.relative**2 + u.sampling**2 + u.preparation**2 + u.analysis**2
        spread = float(np.hypot(u.zero, relative**0.5 * typical))
        return value + spread * self._normal(tag, key)

    def _offset(self, source: str, draw: str, u: float) -> float:
        if (source, draw) not in self._offsets:
            self._offsets[source, draw] = u * self._normal(source, draw)
        return self._offsets[source, draw]

    def _normal(self, *names: str) -> float:
        letters = [self.seed, *"|".join(names).encode()]
        return float(np.random.default_rng(letters).standard_normal())


def tag_days_of(truth: Truth, errors: Errors | None = None) -> tuple[TagDay, ...]:
    """Make every rate's and totaliser's day; run signals included."""
    calendar = calendar_of(five_node_site())
    found = []
    for day in truth.days:
        length, ran = calendar.hours(day), truth.hours[day]
        share = ran / length

        def amount(stream: str, quantity: str, day: date = day) -> float:
            return truth.amounts[day, stream, quantity]

        def spoil(
            tag: str, value: float, per_unit: float, day: date = day, share: float = share
        ) -> float:
            """Spoil an amount given in the instrument's raw unit x h."""
            if errors is None or share == 0.0:
                return value
            noisy = errors.reading(tag, day.isoformat(), value * per_unit, typical=value * per_unit)
            return noisy / per_unit

        # (raw amount [unit x h], t per raw unit)
        raw = {
            "CHARGE-WI": (amount("CHARGE", "mass") / (1 - MOISTURE["CHARGE"]), 1.0),
            "FLUX-WI": (amount("FLUX", "mass") / 3.6, 3.6),
            "CFLUX-WI": (amount("CFLUX", "mass") / 3.6, 3.6),
            "FGAS-FI": (amount("FGAS", "S") / (1e3 * SULFUR_PER_NM3), 1e3 * SULFUR_PER_NM3),
            "TAILGAS-FI": (amount("TAILGAS", "S") / (1e3 * SULFUR_IN_SO2), 1e3 * SULFUR_IN_SO2),
            "STACK-S": (amount("TAILGAS", "S") * 1e3, 1e-3),
            "ACID-FQ": (amount("ACID", "S") / (SULFUR_IN_ACID * ACID_STRENGTH), SULFUR_IN_ACID),
            "FGAS-QI": (100 * FGAS_SO2 * ran, 0.0),
            "TAILGAS-QI": (1e9 * TAILGAS_SO2 * ran, 0.0),
            RUN: (ran, 0.0),
        }
        for tag, (value, per_unit) in raw.items():
            noisy = spoil(tag, value, per_unit) if per_unit else value
            signal = tag == RUN
            covered = length if signal else ran
            found.append(
                TagDay(
                    tag=tag,
                    day=day,
                    chunk=f"chunk-{tag}-{day}",
                    amount=noisy,
                    covered_hours=covered,
                    day_hours=length,
                    running_hours=covered,
                    mean=noisy / covered if covered else None,
                    readings=round(12 * length),
                    bad=0,
                    last_known=calendar.end(day),
                )
            )
    return tuple(found)


def records_of(
    truth: Truth,
    errors: Errors | None = None,
    *,
    known_by: datetime | None = None,
    surveys: Sequence[date] = (),
) -> tuple[Record, ...]:
    """
    Make tickets, assays and surveys.

    Parameters
    ----------
    known_by : datetime or None
        Leave out what became known later; None gives everything.
    surveys : sequence of date
        Plant days at whose start the shed is surveyed; those within the truth only.
    """
    site = five_node_site()
    found = [
        *_tickets(truth, errors, site),
        *_samples(truth, errors, site),
        *_surveyed(truth, errors, site, surveys),
    ]
    return tuple(
        sorted(
            (r for r in found if known_by is None or r.known_at <= known_by),
            key=lambda r: (r.kind, r.natural_key),
        )
    )


def _tickets(truth: Truth, errors: Errors | None, site: Site) -> list[Record]:
    calendar, found = calendar_of(site), []
    for day in truth.days:
        start, length = calendar.start(day), calendar.hours(day)
        for instrument in site.instruments:
            if instrument.kind != "tickets" or instrument.stream is None:
                continue
            true = truth.amounts[day, instrument.stream, "mass"]
            if true == 0.0:
                continue
            wet = true / (1 - MOISTURE[instrument.stream]) if instrument.chain else true
            if errors is not None:
                wet = errors.reading(instrument.tag, day.isoformat(), wet, typical=wet)
            for k in range(LOADS):
                at = start + timedelta(hours=length * (k + 0.5) / LOADS)
                share = 1 + 0.04 * (k - (LOADS - 1) / 2) / LOADS
                found.append(
                    Record(
                        kind=RowKind.TICKET,
                        document=f"{instrument.tag}-{day:%y%m%d}-{k + 1:02d}",
                        subject=instrument.tag,
                        item="net",
                        true_from=at,
                        true_to=at,
                        known_at=at + timedelta(minutes=5),
                        value=wet * share / LOADS,
                        unit="t",
                        extra=(("carrier", f"unit {k + 1}"),),
                    )
                )
    return found


def _samples(truth: Truth, errors: Errors | None, site: Site) -> list[Record]:
    calendar, found = calendar_of(site), []
    for day in truth.days:
        start, end = calendar.start(day), calendar.end(day)
        for instrument in site.instruments:
            if instrument.kind != "assay" or instrument.point is None:
                continue
            true = _true_assay(truth, day, instrument)
            if true is None:
                continue
            for stage, wait in zip(instrument.stages, (36, 240), strict=False):
                value = 100 * true
                if errors is not None:
                    key = f"{day} {stage}"
                    value = errors.reading(instrument.tag, key, value, typical=value)
                found.append(
                    Record(
                        kind=RowKind.ASSAY,
                        document=f"{instrument.point}-{day:%y%m%d}",
                        subject=instrument.point,
                        item=str(instrument.analyte),
                        true_from=start,
                        true_to=end,
                        known_at=end + timedelta(hours=wait),
                        value=value,
                        unit="%",
                        stage=stage,
                        extra=(("method", "plant method"),),
                    )
                )
    return found


def _true_assay(truth: Truth, day: date, instrument: Instrument) -> float | None:
    if instrument.analyte == "moisture":
        return MOISTURE[str(instrument.point)]
    if instrument.analyte == "H2SO4":
        return ACID_STRENGTH
    stream, quantity = str(instrument.stream), str(instrument.quantity)
    mass = truth.amounts[day, stream, "mass"]
    return truth.amounts[day, stream, quantity] / mass if mass else None


def _surveyed(
    truth: Truth, errors: Errors | None, site: Site, surveys: Sequence[date]
) -> list[Record]:
    calendar, found = calendar_of(site), []
    for day in surveys:
        at = calendar.start(day)
        mass = truth.stocks[day, "mass"]
        true = {
            "volume": (mass / (1 - MOISTURE["SHED"]) / DENSITY, "m3", "SHED volume"),
            "density": (DENSITY, "t/m3", "SHED density"),
            "moisture": (100 * MOISTURE["SHED"], "%", "SHED H2O"),
            **{q: (100 * truth.stocks[day, q] / mass, "%", f"SHED {q}") for q in CONCENTRATE},
        }
        for item, (exact, unit, tag) in true.items():
            value = exact
            if errors is not None:
                value = errors.reading(tag, day.isoformat(), exact, typical=exact)
            found.append(
                Record(
                    kind=RowKind.SURVEY,
                    document=f"SURVEY-{day:%y%m%d}",
                    subject="SHED",
                    item=item,
                    true_from=at,
                    true_to=at,
                    known_at=at + timedelta(hours=20),
                    value=value,
                    unit=unit,
                    stage="",
                    extra=(("surveyor", "crew A"),),
                )
            )
    return found


@dataclass(frozen=True, kw_only=True)
class Month:
    """A month to date of the five-node site, ready for ``ingest_month``."""

    site: Site
    truth: Truth
    days: tuple[date, ...]
    tag_days: tuple[TagDay, ...]
    records: tuple[Record, ...]


def five_node_month(
    *,
    month: date = date(2026, 1, 1),
    through: date | None = None,
    history: int = 30,
    seed: int = 1,
    noisy: bool = False,
    standing: Sequence[date] = (),
    known_by: datetime | None = None,
    lost_cu: float = 0.0,
) -> Month:
    """
    Make a month with ``history`` days before it, surveyed at both of its ends.

    ``known_by`` defaults to everything being known.
    """
    after = (month + timedelta(days=32)).replace(day=1)
    last = through or after - timedelta(days=1)
    days = day_span(month - timedelta(days=history), last)
    site = five_node_site()
    truth = truth_of(days, seed=seed, standing=standing, lost_cu=lost_cu)
    errors = Errors(site=site, seed=seed) if noisy else None
    surveys = [d for d in (month, after) if days[0] <= d <= last + timedelta(days=1)]
    return Month(
        site=site,
        truth=truth,
        days=day_span(month, last),
        tag_days=tag_days_of(truth, errors),
        records=records_of(truth, errors, known_by=known_by, surveys=surveys),
    )


def instant(text: str) -> datetime:
    """Read an ISO instant as UTC."""
    return datetime.fromisoformat(text).replace(tzinfo=UTC)
