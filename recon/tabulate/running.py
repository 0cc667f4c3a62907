"""How unaccounted adds up over months: the running sum with its joint uncertainty.

Stocks between months cancel in the sum, so what counts is the first opening, every flow and the
last closing. A calibration that lasts moves all its months the same way; errors of single readings
do not. Each month therefore leaves, beside its figures, what its uncertainty is made of.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from math import sqrt
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from recon.tabulate.accounts import Account
    from recon.tabulate.derived import Derived, Spread
    from recon.tabulate.month import Month, Sheet

RUNNING = "running"
IN_FORCE = "draws in force"
LIMIT_K = 2.0
"""Unaccounted beyond so many standard uncertainties is investigated (common practice)."""
POWER_Z = 1.6448536269514722
"""Normal quantile of 95 %: a loss this much beyond the limit shows with that probability."""
MONTHS = 12


def loss_not_shown(u: float) -> float:
    """
    Give the true loss [unit of u] that passes the limit of 2 u with 5 % probability.

    A larger loss shows more surely; a smaller one may well stay inside chance. The form is that
    of a detection limit, critical value plus the quantile of the wanted power (ISO 11929).

    Examples
    --------
    >>> round(loss_not_shown(100.0), 1)
    364.5
    """
    return (LIMIT_K + POWER_Z) * u


@dataclass(frozen=True, kw_only=True)
class Part:
    """Variance of its own and signed contributions of draws, by a name that outlives a month."""

    own: float
    draws: Mapping[str, float]


@dataclass(frozen=True, kw_only=True)
class Running:
    """
    A sum of unaccounted over months.

    Attributes
    ----------
    months : int
    value, u : float or None
        [t]
    reason : str
        Why there is none.
    """

    months: int
    value: float | None
    u: float | None
    reason: str = ""


def joint_u(first: Part, flows: Iterable[Part], last: Part) -> float:
    """
    Standard uncertainty of ``opening + sum of flows - closing`` over months [t].

    ``first`` and ``last`` are of the opening and the closing themselves; the closing's sign is
    turned here.
    """
    own = first.own + last.own
    draws = dict(first.draws)
    for part in flows:
        own += part.own
        for key, change in part.draws.items():
            draws[key] = draws.get(key, 0.0) + change
    for key, change in last.draws.items():
        draws[key] = draws.get(key, 0.0) - change
    return sqrt(own + sum(change**2 for change in draws.values()))


def draw_names(month: Month) -> tuple[str, ...]:
    """
    Name each draw so that it is known again in other months.

    A source that lasts throughout has one name. A draw between calibrations is named by the day
    it began; the first of a month is last month's, still in force, unless the month begins the
    record. A day's draw is that day's.
    """
    lasts = {s.name: s.lasts for site in month.sites for s in site.sources}
    before = month.year.months[-1] if month.year.months else ""
    kept: dict[str, str] = {}
    for column in month.year.columns(before, RUNNING, IN_FORCE):
        kept[column.rsplit("@", 1)[0]] = column
    names = []
    for draw in month.ingested.all_draws:
        kind = lasts.get(draw.source, "day")
        since = f"{draw.source}@{month.days[draw.first - 1].isoformat()}"
        if kind == "throughout":
            names.append(draw.source)
        elif kind == "calibration" and draw.first == 1:
            names.append(kept.get(draw.source, since))
        else:
            names.append(since)
    return tuple(names)


def leave_draws(sheet: Sheet, names: Iterable[str]) -> None:
    """Leave the draws in force at the month's end for the next month."""
    lasts = {s.name: s.lasts for s in sheet.month.sites[-1].sources}
    latest: dict[str, tuple[int, str]] = {}
    for draw, name in zip(sheet.month.ingested.all_draws, names, strict=True):
        if lasts.get(draw.source) == "calibration":
            latest[draw.source] = max(latest.get(draw.source, (0, "")), (draw.first, name))
    for _, name in latest.values():
        sheet.leaf(RUNNING, IN_FORCE, name, 1.0)


class Runner:
    """Strikes the running sums of one month; names of draws are worked out once."""

    def __init__(self, sheet: Sheet) -> None:
        self._sheet = sheet
        self._month = sheet.month
        self._names = draw_names(sheet.month)
        leave_draws(sheet, self._names)

    def leave(self, account: Account, row: str, table: str) -> None:
        """Leave what later months' running sums need of this account."""
        for name, number in self._pieces(account).items():
            if number is None:
                continue
            part = self.part(number)
            self._sheet.leaf(RUNNING, f"{table} {row}", f"{name} own", part.own)
            for key, change in part.draws.items():
                if change != 0.0:
                    self._sheet.leaf(RUNNING, f"{table} {row}", f"{name} draw {key}", change)
        surveyed = account.opening.number is not None and account.opening.basis != "by difference"
        self._sheet.leaf(RUNNING, f"{table} {row}", "opening surveyed", float(surveyed))

    def part(self, number: Derived) -> Part:
        """Split a number's variance by draws that other months know."""
        spread: Spread = self._month.measured.readings.spread(number)
        draws: dict[str, float] = {}
        for key, change in zip(self._names, spread.draws.tolist(), strict=True):
            draws[key] = draws.get(key, 0.0) + change
        return Part(own=spread.own, draws=draws)

    def over(self, account: Account, row: str, table: str, months: tuple[str, ...]) -> Running:
        """
        Sum unaccounted over earlier months and this one.

        ``opening of the first + all flows + booked flows - closing of this``, of printed figures;
        months of which one states no flow have no sum.
        """
        count = len(months) + 1
        pieces = self._pieces(account)
        flows, closing = pieces["flows"], pieces["closing"]
        if flows is None or closing is None or account.closing.basis == "by difference":
            return Running(months=count, value=None, u=None, reason=account.reason)
        year, where = self._month.year, f"{table} {row}"
        value = _printed(account, "flows") - _printed(account, "closing")
        parts = [self.part(flows)]
        for m in months:
            one = year.value(m, table, row, "net_in")
            if one is None:
                return Running(months=count, value=None, u=None, reason=f"{m} states no flows")
            value += one + (year.value(m, table, row, "booked_flows") or 0.0)
            parts.append(_kept(year.columns(m, RUNNING, where), "flows"))
        value += sum(
            b.delta_opening + b.delta_net_in
            for b in self._month.booked
            if b.boundary == account.boundary.name and b.quantity == account.quantity
        )
        if months:
            first = year.value(months[0], table, row, "opening")
            opening = _kept(year.columns(months[0], RUNNING, where), "opening")
        else:
            number = pieces["opening"]
            first = None if number is None else _printed(account, "opening")
            opening = Part(own=0.0, draws={}) if number is None else self.part(number)
        if first is None:
            begun = months[0] if months else self._month.name
            return Running(
                months=count, value=None, u=None, reason=f"{begun} states no opening stock"
            )
        return Running(
            months=count, value=value + first, u=joint_u(opening, parts, self.part(closing))
        )

    def since_surveyed(self, row: str, table: str) -> tuple[str, ...]:
        """Earlier months since the last boundary at which every place was surveyed."""
        months: list[str] = []
        for m in reversed(self._month.year.months):
            months.insert(0, m)
            if self._month.year.value(m, RUNNING, f"{table} {row}", "opening surveyed") == 1.0:
                return tuple(months)
        return tuple(months)

    def twelve_months(self, account: Account) -> float | None:
        """
        Standard uncertainty of twelve months' sum, each measured as this one was [t].

        Errors of readings and of draws that end add in squares, sources that last add up.
        """
        pieces = self._pieces(account)
        if any(number is None for number in pieces.values()):
            return None
        opening, flows, closing = (self.part(n) for n in pieces.values() if n is not None)
        lasting = {s.name for s in self._month.sites[-1].sources if s.lasts == "throughout"}
        variance = opening.own + MONTHS * flows.own + closing.own
        for key in {*opening.draws, *flows.draws, *closing.draws}:
            o, f, c = (part.draws.get(key, 0.0) for part in (opening, flows, closing))
            if key in lasting:
                variance += (o + MONTHS * f - c) ** 2
            else:
                variance += o**2 + MONTHS * f**2 + c**2
        return sqrt(variance)

    @staticmethod
    def _pieces(account: Account) -> dict[str, Derived | None]:
        return {
            "opening": account.opening.number,
            "flows": account.flows,
            "closing": account.closing.number,
        }


def _printed(account: Account, piece: str) -> float:
    if piece == "flows":
        parts = (account.receipts, account.products, account.discards)
        into, products, discards = (float(p.footed or 0) for p in parts)
        return into - products - discards
    return float((account.opening if piece == "opening" else account.closing).footed or 0)


def _kept(columns: Mapping[str, float], name: str) -> Part:
    lead = f"{name} draw "
    return Part(
        own=columns.get(f"{name} own", 0.0),
        draws={key.removeprefix(lead): v for key, v in columns.items() if key.startswith(lead)},
    )
