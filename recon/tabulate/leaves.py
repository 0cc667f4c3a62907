"""What a signed month hands to the year to date and the running sum of later months."""

from __future__ import annotations

from dataclasses import dataclass


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
