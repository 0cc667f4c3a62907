"""What late data change in closed months, booked in the open one: prior-period adjustments.

Closed figures never change. The earliest affected month and every later closed one are re-run in
order, twice, by today's software: with the new inputs, and with the signed and already booked ones.
The difference is the effect. Only what changes the last closed stock enters the open month's
opening; the rest is unaccounted metal of earlier months, a line of its own.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import date
from typing import Literal

Class = Literal["estimate", "error", ""]


@dataclass(frozen=True, kw_only=True)
class MonthBalance:
    """
    The measured chain of one month and component at the site's boundary [t].

    Attributes
    ----------
    month : date
    component : str
    opening, net_in, closing : float
        ``net_in`` is receipts less products and discards.
    """

    month: date
    component: str
    opening: float
    net_in: float
    closing: float

    @property
    def unaccounted(self) -> float:
        """Opening + in - out - closing [t]."""
        return self.opening + self.net_in - self.closing


@dataclass(frozen=True, kw_only=True)
class Adjustment:
    """
    One line of a prior-period adjustment for one component [t].

    Attributes
    ----------
    item : str
        The late row or restated document; ``"refit"`` and ``"software"`` for what remains.
    component : str
    first_month, last_month : date
        Earliest affected and last closed month.
    opening : float
        Change of the first affected month's opening; take-on stocks only.
    net_in : float
        Change of in less out over the closed months.
    closing : float
        Change of the last closed month's closing stock: the only part that enters stock.
    unaccounted : float
        Change of the closed months' unaccounted.
    kind : str
        *estimate* or *error*, as a named person classed it; "" until then.
    named_by : str
    """

    item: str
    component: str
    first_month: date
    last_month: date
    opening: float
    net_in: float
    closing: float
    unaccounted: float
    kind: Class = ""
    named_by: str = ""


@dataclass(frozen=True, kw_only=True)
class OpenMonth:
    """
    The open month with what was booked into it, one component [t].

    Attributes
    ----------
    signed_opening, booked_stock : float
        Last month's signed closing, digit for digit, and the booked changes of it.
    net_in, closing : float
    booked_unaccounted : float
        Unaccounted of earlier months, booked now.
    signed_before : float
        Signed unaccounted of the year's closed months.
    """

    signed_opening: float
    booked_stock: float
    net_in: float
    closing: float
    booked_unaccounted: float
    signed_before: float = 0.0

    @property
    def adjusted_opening(self) -> float:
        """Signed closing of the month before plus booked stock lines [t]."""
        return self.signed_opening + self.booked_stock

    @property
    def own_unaccounted(self) -> float:
        """The open month's own: adjusted opening + in - out - closing [t]."""
        return self.adjusted_opening + self.net_in - self.closing

    @property
    def year_to_date(self) -> float:
        """Signed + booked + own [t]."""
        return self.signed_before + self.booked_unaccounted + self.own_unaccounted


def effect(item: str, base: Sequence[MonthBalance], new: Sequence[MonthBalance]) -> Adjustment:
    """
    Give the effect of one item on a chain of closed months of one component.

    Parameters
    ----------
    item : str
    base : sequence of MonthBalance
        Re-run with signed and already booked inputs, from the earliest affected month to the last
        closed one.
    new : sequence of MonthBalance
        The same months re-run with the item's new value.

    Returns
    -------
    Adjustment
        With ``opening + net_in - closing = unaccounted``: a survey restated between two closed
        months nets to zero.

    Raises
    ------
    ValueError
        The two chains are empty or not of the same months and component.
    """
    if not base or [(b.month, b.component) for b in base] != [(n.month, n.component) for n in new]:
        raise ValueError("both chains must cover the same closed months of one component")
    return Adjustment(
        item=item,
        component=base[0].component,
        first_month=base[0].month,
        last_month=base[-1].month,
        opening=new[0].opening - base[0].opening,
        net_in=sum(n.net_in - b.net_in for b, n in zip(base, new, strict=True)),
        closing=new[-1].closing - base[-1].closing,
        unaccounted=sum(n.unaccounted - b.unaccounted for b, n in zip(base, new, strict=True)),
    )


def direct_and_refit(direct: Sequence[Adjustment], together: Adjustment) -> tuple[Adjustment, ...]:
    """
    List the items with their direct effects and one line for what they do only together.

    Parameters
    ----------
    direct : sequence of Adjustment
        Each item alone against the base.
    together : Adjustment
        All items at once against the base.
    """
    rest = Adjustment(
        item="refit",
        component=together.component,
        first_month=together.first_month,
        last_month=together.last_month,
        opening=together.opening - sum(d.opening for d in direct),
        net_in=together.net_in - sum(d.net_in for d in direct),
        closing=together.closing - sum(d.closing for d in direct),
        unaccounted=together.unaccounted - sum(d.unaccounted for d in direct),
    )
    return (*direct, rest)


def software_difference(
    signed: Sequence[MonthBalance],
    booked: Sequence[Adjustment],
    rerun: Sequence[MonthBalance],
) -> Adjustment:
    """
    Compare what was signed and booked with its re-run by today's software.

    Returns
    -------
    Adjustment
        Item ``software``; zero where the months re-perform. Anything else waits for a named
        person before it is booked.
    """
    found = effect("software", signed, rerun)
    return Adjustment(
        item="software",
        component=found.component,
        first_month=found.first_month,
        last_month=found.last_month,
        opening=found.opening - sum(b.opening for b in booked),
        net_in=found.net_in - sum(b.net_in for b in booked),
        closing=found.closing - sum(b.closing for b in booked),
        unaccounted=found.unaccounted - sum(b.unaccounted for b in booked),
    )


def open_month(
    *,
    signed: Sequence[MonthBalance],
    own: MonthBalance,
    booked: Sequence[Adjustment],
    year: Mapping[str, float] | None = None,
) -> OpenMonth:
    """
    State an open month: its signed opening, booked lines and own figures, one component.

    Parameters
    ----------
    signed : sequence of MonthBalance
        Closed months as signed, in order; the last one's closing is the opening.
    own : MonthBalance
        The open month as measured; its ``opening`` is not used.
    booked : sequence of Adjustment
        Lines booked into this month.
    year : mapping of str to float, optional
        Signed unaccounted of the year by component; the sum over ``signed`` where not given.
    """
    component = own.component
    before = sum(s.unaccounted for s in signed) if year is None else year.get(component, 0.0)
    return OpenMonth(
        signed_opening=signed[-1].closing,
        booked_stock=sum(b.closing for b in booked),
        net_in=own.net_in,
        closing=own.closing,
        booked_unaccounted=sum(b.unaccounted for b in booked),
        signed_before=before,
    )
