"""Table 6: how far each node's measured balance is open, and that the fit closes it."""

from __future__ import annotations

from typing import TYPE_CHECKING

from recon.flowsheet.balances import Amount, Stock
from recon.tabulate.accounts import account
from recon.tabulate.boundaries import Boundary, boundaries_of

if TYPE_CHECKING:
    from recon.flowsheet.balances import Unknown
    from recon.tabulate.month import Month, Sheet, Span

TABLE = "node-closure"


def write_closure(sheet: Sheet) -> None:
    """
    Write every balance declared at a node, for each day and the month.

    A node that holds a stock is closed only over spans with a survey at both ends.
    """
    month = sheet.month
    for boundary in boundaries_of(month.sites):
        if boundary.kind != "node":
            continue
        for q in month.quantities:
            for span in month.spans:
                if _declared(month, boundary, q, span):
                    _write(sheet, boundary, q, span)


def _declared(month: Month, boundary: Boundary, q: str, span: Span) -> bool:
    """Whether the node conserves a quantity that it carries, on every day of the span."""
    return all(
        any(n.name == boundary.name and q in n.conserves for n in site.nodes)
        and bool(
            boundary.entering(site, q) or boundary.leaving(site, q) or boundary.stocks(site, q)
        )
        for site in month.sites[span.first - 1 : span.last]
    )


def _write(sheet: Sheet, boundary: Boundary, q: str, span: Span) -> None:
    month, row = sheet.month, f"{boundary.name} {q}"
    a = account(month.measured, boundary, q, span.first, span.last)
    u = month.measured.readings.uncertainty(a.unaccounted) if a.unaccounted else None
    sheet.number(
        TABLE,
        span.name,
        row,
        "raw_imbalance",
        a.unaccounted_footed,
        u=u,
        basis="computed",
        reason=a.reason,
    )
    z = float(a.unaccounted_footed) / u if a.unaccounted_footed is not None and u else None
    sheet.number(
        TABLE,
        span.name,
        row,
        "z",
        z,
        basis="computed",
        reason=a.reason or ("its uncertainty is zero" if z is None else ""),
    )
    form: list[tuple[Unknown, float]] = []
    for p in range(span.first, span.last + 1):
        site = month.sites[p - 1]
        form += [(Amount(p, s.name, q), 1.0) for s in boundary.entering(site, q)]
        form += [(Amount(p, s.name, q), -1.0) for s in boundary.leaving(site, q)]
    if boundary.stocks(month.sites[span.last - 1], q):
        form.append((Stock(span.last, boundary.name, q), -1.0))
    if boundary.stocks(month.sites[span.first - 1], q):
        form.append((Stock(span.first - 1, boundary.name, q), 1.0))
    left = month.fitted.plain(tuple(form))
    sheet.number(
        TABLE,
        span.name,
        row,
        "reconciled_imbalance",
        left,
        basis="fitted",
        reason="" if left is not None else "not part of the fit",
    )
