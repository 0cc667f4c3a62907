"""Beside the signed balance: what the fit says of the same boundary, closing by construction."""

from __future__ import annotations

from dataclasses import dataclass, field
from decimal import Decimal
from typing import TYPE_CHECKING

from recon.flowsheet.balances import Amount, Stock, Unknown
from recon.tabulate.accounts import leaf_decimals_of
from recon.tabulate.boundaries import row_name, table_name
from recon.tabulate.rounding import footed, printed

if TYPE_CHECKING:
    from collections.abc import Sequence

    from recon.tabulate.accounts import Account
    from recon.tabulate.fitted import Fit
    from recon.tabulate.month import Month, Sheet, Span

STOCKS = ("fitted_opening", "fitted_closing")
SIGNS = {
    "fitted_opening": 1,
    "fitted_receipts": 1,
    "fitted_products": -1,
    "fitted_discards": -1,
    "fitted_closing": -1,
}


@dataclass
class Line:
    """One fitted sum: its unknowns, their printed leaves, and whether any cannot be found."""

    unknowns: list[Unknown] = field(default_factory=list)
    leaves: list[Decimal] = field(default_factory=list)
    missing: str = ""

    def add(self, unknown: Unknown, fit: Fit, decimals: int) -> None:
        """Add one unknown."""
        self.unknowns.append(unknown)
        if fit.value is None:
            self.missing = self.missing or fit.reason
        else:
            self.leaves.append(printed(fit.value, decimals))

    @property
    def footed(self) -> Decimal | None:
        """Sum of the printed leaves; None where one is missing."""
        return None if self.missing else footed(self.leaves)


def write_fitted_balances(sheet: Sheet, accounts: Sequence[Account]) -> None:
    """
    Write the fitted columns of both balance tables.

    The uncertainty of the month's sums is joint; a day's sums carry none here, their leaves do.
    """
    month = sheet.month
    for a in accounts:
        for span in month.spans[:-1]:
            _write(sheet, a, span, _lines(month, a, span), None)
    wholes = [_lines(month, a, month.whole) for a in accounts]
    fits = iter(
        month.fitted.ratios(
            [
                (tuple((u, 1.0) for u in line.unknowns), None)
                for lines in wholes
                for line in lines.values()
            ]
        )
    )
    for a, lines in zip(accounts, wholes, strict=True):
        _write(sheet, a, month.whole, lines, {name: next(fits) for name in lines})


def _lines(month: Month, a: Account, span: Span) -> dict[str, Line]:
    lines = {name: Line() for name in SIGNS}
    b, q = a.boundary, a.quantity
    for p in range(span.first, span.last + 1):
        site = month.sites[p - 1]
        for s in b.entering(site, q):
            fit = month.fitted.amount(p, s.name, q)
            lines["fitted_receipts"].add(Amount(p, s.name, q), fit, leaf_decimals_of(s.role, q))
        for s in b.leaving(site, q):
            name = "fitted_products" if s.role == "product" else "fitted_discards"
            fit = month.fitted.amount(p, s.name, q)
            lines[name].add(Amount(p, s.name, q), fit, leaf_decimals_of(s.role, q))
    for name, boundary, day in (
        ("fitted_opening", span.first - 1, span.first),
        ("fitted_closing", span.last, span.last),
    ):
        for n in b.stocks(month.sites[day - 1], q):
            fit = month.fitted.stock(boundary, n.name, q)
            lines[name].add(Stock(boundary, n.name, q), fit, leaf_decimals_of("", q))
    return lines


def _write(
    sheet: Sheet, a: Account, span: Span, lines: dict[str, Line], fits: dict[str, Fit] | None
) -> None:
    table, row = table_name(a.boundary), row_name(a.boundary, a.quantity)
    gap: Decimal | None = Decimal(0)
    for name, line in lines.items():
        total = line.footed
        fit = fits[name] if fits else None
        u = fit.u if fit and line.unknowns else None
        reason = f"part of it: {line.missing}" if line.missing else ""
        if span.day or name in STOCKS:
            sheet.number(table, span.name, row, name, total, u=u, basis="fitted", reason=reason)
        else:
            exact = fit.value if fit else None
            sheet.total(table, row, name, total, exact=exact, u=u, basis="fitted", reason=reason)
        gap = None if gap is None or total is None else gap + SIGNS[name] * total
    sheet.number(
        table,
        span.name,
        row,
        "fitted_imbalance",
        gap,
        basis="fitted",
        reason="" if gap is not None else "part of it cannot be found",
    )
