"""What was measured, day by day: each stream's and stock's amounts, without any fitted value."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Collection, Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Literal

from recon.flowsheet.balances import Amount, Stock
from recon.flowsheet.network import MASS
from recon.tabulate.derived import Derived, Readings, combined, exact, readings_of

if TYPE_CHECKING:
    from recon.declare.site import Site
    from recon.ingest.given import OpeningStock
    from recon.ingest.measured import Correction, IngestedMonth, Measured

Basis = Literal["read", "settled", "corrected", "estimated", "by difference"]
WEAKEST: tuple[Basis, ...] = ("settled", "read", "corrected", "estimated", "by difference")
"""From the firmest to the weakest; a sum has the weakest basis among its terms."""
SET_ASIDE = "set aside"
MOVES = frozenset({"corrected reading", "override"})
"""Decisions that change a value; ``held`` only says how firmly it stands."""


@dataclass(frozen=True, kw_only=True)
class Stated:
    """
    One amount [t] of the measured chain.

    Attributes
    ----------
    number : Derived or None
    basis : str
    reason : str
        Why there is no number, or why it is by difference.
    provisional : bool
        Rests on a value that is estimated or not yet of its last stage.
    wet : Derived or None
        Wet mass [t] where a moisture was applied.
    take_on : bool
        A first opening stock, taken from the first survey.
    """

    number: Derived | None
    basis: Basis = "read"
    reason: str = ""
    provisional: bool = False
    wet: Derived | None = None
    take_on: bool = False


def weakest(bases: Collection[Basis]) -> Basis:
    """Give the weakest of several bases; ``read`` of none."""
    return max(bases, key=WEAKEST.index, default="read")


class AsMeasured:
    """
    The measured amounts of a month to date.

    Parameters
    ----------
    ingested : IngestedMonth
    sites : sequence of Site
        One a day.
    opening : sequence of OpeningStock
        Last month's closing stocks as printed, booked lines beside; empty at take-on.
    without : collection of str
        Decisions left out, for the bridge from what was read to what is stated.

    Notes
    -----
    Where several instruments measure one amount, one counts: a held one before one in the fit
    before one compared only, a real value before an estimated one, then the one declared first.
    A reading that is only compared is used where nothing else measures a boundary amount: a stack
    monitor states what the stack emits, and no fit moves it.
    """

    def __init__(
        self,
        ingested: IngestedMonth,
        sites: Sequence[Site],
        opening: Sequence[OpeningStock] = (),
        without: Collection[str] = (),
    ) -> None:
        self.days = ingested.days
        self.sites = tuple(sites)
        self._measured = ingested.measured
        self._without = frozenset(without)
        self._opening = {(o.node, o.quantity): o for o in opening}
        self._extra = {
            key: len(ingested.measured) + i for i, key in enumerate(sorted(self._opening))
        }
        self.readings: Readings = readings_of(
            (m.measurement for m in ingested.measured),
            ingested.all_draws,
            (self._opening[key].u or 0.0 for key in self._extra),
        )
        self._standing = set(ingested.not_running)
        self._order = {
            instrument.tag: place
            for site in reversed(self.sites)
            for place, instrument in enumerate(site.instruments)
        }
        self._last_stage = {
            instrument.tag: instrument.stages[-1]
            for site in self.sites
            for instrument in site.instruments
        }
        self._at = self._placed()
        self._known: dict[Amount | Stock, Stated] = {}

    def amount(self, period: int, stream: str, quantity: str) -> Stated:
        """State what a stream carried of a quantity on day ``period`` (1-based)."""
        return self._kept(Amount(period, stream, quantity))

    def stock(self, boundary: int, node: str, quantity: str) -> Stated:
        """State a stock at a day's boundary: 0 opens day 1, p closes day p."""
        if boundary == 0 and self._opening:
            return self._signed(node, quantity)
        stated = self._kept(Stock(boundary, node, quantity))
        return replace(stated, take_on=True) if boundary == 0 else stated

    def reading_named(self, place: int) -> tuple[str, int]:
        """Name a reading, and its period; a signed opening has period 0."""
        if place < len(self._measured):
            m = self._measured[place].measurement
            return m.name, m.period
        node, quantity = list(self._extra)[place - len(self._measured)]
        return f"signed opening {node} {quantity}", 0

    def _kept(self, unknown: Amount | Stock) -> Stated:
        if unknown not in self._known:
            self._known[unknown] = self._state(unknown)
        return self._known[unknown]

    def _state(self, unknown: Amount | Stock) -> Stated:
        if isinstance(unknown, Amount) and (
            (self.days[unknown.period - 1], unknown.stream) in self._standing
        ):
            return Stated(number=exact(0.0))
        direct = self._best(self._at.get((unknown, False), {}))
        if direct:
            return self._from_amount(direct[0])
        if unknown.quantity == MASS:
            return self._nothing(unknown)
        mass = self._kept(unknown._replace(quantity=MASS))
        covering = self._at.get((unknown, True), {})
        samples = self._best(covering)
        if mass.number is None:
            return Stated(number=None, reason=mass.reason) if samples else self._nothing(unknown)
        if samples:
            return self._from_samples(mass, {i: covering[i] for i in samples})
        if mass.number.value == 0.0:
            return replace(mass, number=exact(0.0), wet=None)
        return self._nothing(unknown)

    def _nothing(self, unknown: Amount | Stock) -> Stated:
        if isinstance(unknown, Amount):
            day = self.days[unknown.period - 1].isoformat()
            what = "dry mass is" if unknown.quantity == MASS else f"{unknown.quantity} is"
            return Stated(number=None, reason=f"{unknown.stream} {day}: {what} not measured")
        if unknown.boundary == 0:
            return Stated(number=None, reason=f"{unknown.node}: no opening {unknown.quantity}")
        day = self.days[unknown.boundary - 1].isoformat()
        return Stated(
            number=None, reason=f"{unknown.node}: {unknown.quantity} not surveyed at end of {day}"
        )

    def _signed(self, node: str, quantity: str) -> Stated:
        """Last month's printed closing, plus booked lines, with this month's covariance."""
        signed = self._opening.get((node, quantity))
        if signed is None:
            first = self._kept(Stock(0, node, quantity))
            return replace(first, take_on=True)
        if signed.value is None:
            return Stated(
                number=None,
                reason=f"{node}: last month states no {quantity}",
                basis="by difference",
            )
        measured = self._kept(Stock(0, node, quantity)).number
        slopes = measured.slopes if measured else {self._extra[node, quantity]: 1.0}
        take_on = signed.basis == "take-on"
        return Stated(
            number=Derived(signed.value + signed.booked, slopes),
            basis="read" if take_on else _basis_named(signed.basis),
            take_on=take_on,
        )

    def _from_amount(self, place: int) -> Stated:
        m = self._measured[place]
        number = Derived(self._value(m) or 0.0, {place: 1.0})
        wet = None
        if m.moisture is not None and m.quantity == MASS and m.moisture < 1.0:
            wet = number * (1.0 / (1.0 - m.moisture))
        return Stated(
            number=number,
            basis=self._basis(m),
            reason=self._too_far(m),
            provisional=self._open(m),
            wet=wet,
        )

    def _from_samples(self, mass: Stated, samples: Mapping[int, float]) -> Stated:
        """Measured mass by the mean of the samples that cover it, by the part each covers."""
        assert mass.number is not None
        taken = [self._measured[i] for i in samples]
        whole = sum(samples.values())
        grade = combined(
            (weight / whole, Derived(self._value(self._measured[i]) or 0.0, {i: 1.0}))
            for i, weight in samples.items()
        )
        return Stated(
            number=mass.number * grade,
            basis=weakest([mass.basis, *(self._basis(m) for m in taken)]),
            reason=next((r for r in (mass.reason, *(self._too_far(m) for m in taken)) if r), ""),
            provisional=mass.provisional or any(self._open(m) for m in taken),
        )

    def _best(self, places: Iterable[int]) -> list[int]:
        """Those readings, all of one instrument, that count."""
        usable = [i for i in places if self._counts(self._measured[i])]
        if not usable:
            return []
        chosen = min(usable, key=lambda i: self._rank(self._measured[i]))
        tag = self._measured[chosen].tag
        estimated = self._measured[chosen].estimated
        return [
            i
            for i in usable
            if self._measured[i].tag == tag and self._measured[i].estimated == estimated
        ]

    def _rank(self, m: Measured) -> tuple[bool, int, int, str]:
        use = ("held", "fit", "compare").index(m.use)
        return (m.estimated, use, self._order.get(m.tag, len(self._order)), m.tag)

    def _counts(self, m: Measured) -> bool:
        """Whether a reading stands: not set aside, and not made by a decision left out."""
        aside = m.set_aside and not any(
            c.kind == SET_ASIDE and c.decision in self._without for c in m.corrections
        )
        return not aside and self._value(m) is not None

    def _value(self, m: Measured) -> float | None:
        """
        Value with those decisions undone that are left out; None where one of them made it.

        Each decision scaled the value by after / before, the sums over what it touched (the day's
        tickets, the chain's moisture), so leaving it out scales back.
        """
        value = m.measurement.value
        touched: dict[str, list[Correction]] = defaultdict(list)
        for c in m.corrections:
            if c.decision in self._without and c.kind != SET_ASIDE:
                touched[c.decision].append(c)
        for steps in touched.values():
            if any(c.before is None for c in steps):
                return None
            before = sum(c.before or 0.0 for c in steps)
            after = sum(c.after or 0.0 for c in steps)
            value = value * before / after if after else before
        return value

    def _basis(self, m: Measured) -> Basis:
        if self._too_far(m):
            return "by difference"
        if m.estimated:
            return "estimated"
        if any(c.kind in MOVES and c.decision not in self._without for c in m.corrections):
            return "corrected"
        return "settled" if m.use == "held" or m.stage == "settled" else "read"

    def _too_far(self, m: Measured) -> str:
        """Say that a survey was rolled further than its place allows, where it was."""
        node = next((n for n in self.sites[-1].nodes if n.name == m.node), None)
        if node is None or abs(m.rolled_hours) <= 24.0 * node.roll_limit_days:
            return ""
        return (
            f"{m.node} was surveyed {abs(m.rolled_hours):.0f} h from the cut, further than a "
            f"survey may be rolled there ({24.0 * node.roll_limit_days:.0f} h)"
        )

    def _open(self, m: Measured) -> bool:
        last = self._last_stage.get(m.tag, m.stage)
        return m.estimated or (m.stage not in ("", last))

    def _placed(self) -> dict[tuple[Amount | Stock, bool], dict[int, float]]:
        """Which readings speak of each unknown, as an amount (False) or a fraction (True)."""
        placed: dict[tuple[Amount | Stock, bool], dict[int, float]] = defaultdict(dict)
        for i, m in enumerate(self._measured):
            fraction = m.basis == "fraction"
            covered = {
                unknown._replace(quantity=m.quantity): weight
                for part in m.measurement.parts
                for unknown, weight in (part.over if fraction and part.over else part.of)
            }
            if not fraction and len(covered) > 1:
                continue  # an amount over several days together states no single day
            for unknown, weight in covered.items():
                placed[unknown, fraction][i] = abs(weight)
        return placed


def _basis_named(word: str) -> Basis:
    return next((b for b in WEAKEST if b == word), "read")
