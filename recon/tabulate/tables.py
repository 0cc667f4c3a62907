"""The metal accounting tables of a month to date: start reading here.

Two chains stand side by side and are never mixed. The *measured* chain is what is signed: opening
as signed last month, what crossed the boundary as measured, closing as surveyed, and what is then
unaccounted, with the uncertainty that the measurements have (``accounts.py``). The *fitted* chain
is what is best known: reconciled figures, which close by construction (``fitted.py``). A true loss
shows as unaccounted metal, never as stock.

Every day's stream or stock is rounded once (``rounding.py``); every total adds printed leaves.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from recon.tabulate.as_measured import AsMeasured
from recon.tabulate.balance_table import headline, write_balances
from recon.tabulate.bridge import write_bridge
from recon.tabulate.budgets import unaccounted_figures
from recon.tabulate.closure_table import write_closure
from recon.tabulate.fitted import Fitted
from recon.tabulate.leaves import Booked, Year, YearLeaf
from recon.tabulate.measured_table import write_measured
from recon.tabulate.month import Month, Sheet
from recon.tabulate.recovery_table import write_recoveries
from recon.tabulate.stock_table import write_stocks
from recon.tabulate.stream_table import write_streams

if TYPE_CHECKING:
    from recon.declare.site import Site
    from recon.findings import Finding
    from recon.ingest.given import OpeningStock
    from recon.ingest.measured import IngestedMonth
    from recon.reconcile.answer import Answer, FigureValue
    from recon.tabulate.cells import Cell


@dataclass(frozen=True, kw_only=True)
class Tables:
    """
    What a month to date is stated as.

    Attributes
    ----------
    cells : tuple of Cell
        Every table of ``recon.tabulate.columns``, for days, the month and the year to date.
    figures : tuple of FigureValue
        The month's unaccounted metal of site and sections, with budgets.
    closing : tuple of OpeningStock
        Closing stocks as printed: next month's opening.
    leaves : tuple of YearLeaf
        For the year to date and running sums of later months.
    findings : tuple of Finding
    """

    cells: tuple[Cell, ...]
    figures: tuple[FigureValue, ...]
    closing: tuple[OpeningStock, ...]
    leaves: tuple[YearLeaf, ...]
    findings: tuple[Finding, ...]


def tables_of(
    *,
    sites: Sequence[Site],
    ingested: IngestedMonth,
    answer: Answer,
    opening: Sequence[OpeningStock] = (),
    opening_signed: bool = True,
    year: Sequence[YearLeaf] = (),
    booked: Sequence[Booked] = (),
) -> Tables:
    """
    State a month to date.

    Parameters
    ----------
    sites : sequence of Site
        The version in force on each day.
    ingested : IngestedMonth
    answer : Answer
        Of ``ingested.problem``.
    opening : sequence of OpeningStock
        Last month's closing as printed; empty in the first month, which opens with its first
        survey, marked take-on.
    opening_signed : bool
        False while last month is a draft.
    year : sequence of YearLeaf
        Of earlier months: those of this year for the year to date, up to eleven for the running
        sum.
    booked : sequence of Booked
        Prior-period lines booked in this month.

    Notes
    -----
    Pure and deterministic: the order of cells follows the site's declaration.
    """
    month = Month(
        days=ingested.days,
        sites=tuple(sites),
        ingested=ingested,
        measured=AsMeasured(ingested, sites, opening),
        fitted=Fitted(answer),
        opening=tuple(opening),
        opening_signed=opening_signed,
        year=Year(year, ingested.days[0].strftime("%Y-%m")),
        booked=tuple(booked),
    )
    sheet = Sheet(month=month)
    accounts = write_balances(sheet)
    write_bridge(sheet, accounts.values())
    write_streams(sheet)
    write_measured(sheet)
    write_closure(sheet)
    closing = write_stocks(sheet)
    write_recoveries(sheet)
    sheet.findings += headline(accounts, sheet)
    return Tables(
        cells=tuple(sheet.cells),
        figures=unaccounted_figures(month, accounts.values()),
        closing=closing,
        leaves=tuple(sheet.leaves),
        findings=tuple(sheet.findings),
    )
