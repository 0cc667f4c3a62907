"""What a signed month hands to the year to date and the running sum of later months."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from decimal import Decimal


@dataclass(frozen=True, kw_only=True)
class YearLeaf:
    """
    A signed month's number that later months add: table, row and column.

    Attributes
    ----------
    month : str
        ``2026-01``.
    table, row, column : str
        Stable names; table ``running`` holds what the running sum's uncertainty needs.
    value : float
        As printed [t], but for table ``running``.
    """

    month: str
    table: str
    row: str
    column: str
    value: float


@dataclass(frozen=True, kw_only=True)
class Booked:
    """
    Late data of closed months, booked in this one: the four numbers of a component [t].

    ``delta_opening + delta_net_in - delta_closing = delta_unaccounted``. Only the closing part
    enters stock (``OpeningStock.booked``); the unaccounted part is a line of its own.
    """

    boundary: str
    quantity: str
    item: str
    delta_opening: float = 0.0
    delta_net_in: float = 0.0
    delta_closing: float = 0.0

    @property
    def delta_unaccounted(self) -> float:
        """Unaccounted of earlier months, booked now [t]."""
        return self.delta_opening + self.delta_net_in - self.delta_closing


NOT_DETERMINED = "not determined"
"""Table under which a month notes that it has no figure for a row, so no total includes it."""


class Year:
    """
    Leaves of earlier months, by month, table, row and column.

    Parameters
    ----------
    leaves : iterable of YearLeaf
        Of signed months, or drafts standing in, at most the last twelve or the year's.
    month : str
        The open month; later leaves are left out.
    """

    def __init__(self, leaves: Iterable[YearLeaf], month: str) -> None:
        self._value = {
            (leaf.month, leaf.table, leaf.row, leaf.column): leaf.value
            for leaf in leaves
            if leaf.month < month
        }
        self.months = tuple(sorted({key[0] for key in self._value}))
        self.this_year = tuple(m for m in self.months if m[:4] == month[:4])

    def value(self, month: str, table: str, row: str, column: str) -> float | None:
        """Give a leaf, or None."""
        return self._value.get((month, table, row, column))

    def columns(self, month: str, table: str, row: str) -> dict[str, float]:
        """Give all leaves of a row."""
        return {
            column: value
            for (m, t, r, column), value in self._value.items()
            if (m, t, r) == (month, table, row)
        }

    def total(self, table: str, row: str, column: str, own: Decimal) -> Decimal | str:
        """
        Add this year's earlier months to the open one; or say which month has no figure.

        A month that knows nothing of the row adds nothing: the stream did not exist then.
        """
        total = own
        for month in self.this_year:
            if self.value(month, NOT_DETERMINED, f"{table} {row}", column) is not None:
                return f"{month} states no figure"
            total += Decimal(repr(self.value(month, table, row, column) or 0.0))
        return total
