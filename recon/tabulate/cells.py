"""The printed cell: one number or word of a table, with its basis and how sure it is."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

BasisOf = Literal[
    "read", "corrected", "settled", "estimated", "fitted", "by difference", "computed", ""
]


@dataclass(frozen=True, kw_only=True)
class Cell:
    """
    One cell of a metal accounting table.

    Attributes
    ----------
    table : str
        Stable name of the table, for example ``site-balance``.
    period : str
        ``2026-01`` for a month, ``2026-01-17`` for a day, ``2026`` for the year to date.
    row, column : str
        Stable names; columns are listed in ``recon.tabulate.columns``.
    value : float or None
        Full double; print rounds, sums of leaves are of rounded leaves.
    text : str or None
        For cells of words.
    u : float or None
        Standard uncertainty [same unit].
    unit : str
    basis : str
        read, corrected, settled, estimated, fitted, by difference, computed.
    reason : str
        Why there is no value; never blank where value and text are None.
    """

    table: str
    period: str
    row: str
    column: str
    value: float | None = None
    text: str | None = None
    u: float | None = None
    unit: str = ""
    basis: BasisOf = ""
    reason: str = ""
