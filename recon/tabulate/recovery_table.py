"""Table 8: recoveries and captures, four ways side by side, each with its uncertainty."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from decimal import Decimal
from typing import TYPE_CHECKING

from recon.flowsheet.balances import Amount, Linear
from recon.flowsheet.network import MASS
from recon.tabulate.accounts import Account, account, first_few, leaf_decimals_of
from recon.tabulate.boundaries import Boundary
from recon.tabulate.derived import Derived, combined
from recon.tabulate.rounding import printed
from recon.tabulate.stream_table import PER_UNIT

if TYPE_CHECKING:
    from recon.declare.site import Site, SiteFigure, Term
    from recon.tabulate.month import Month, Sheet, Span

TABLE = "recoveries"


@dataclass(frozen=True, kw_only=True)
class Known:
    """A measured number with what its printed leaves give, or why there is none."""

    number: Derived | None
    value: float | None
    reason: str = ""


def write_recoveries(sheet: Sheet) -> None:
    """Write every declared figure for each day, the month and the year to date."""
    month = sheet.month
    figures = {f.name: f for site in month.sites for f in site.figures}
    asked = [(f, span) for f in figures.values() for span in month.spans]
    fits = month.fitted.ratios([(_form(f.of, span), _form(f.over, span)) for f, span in asked])
    for (f, span), fit in zip(asked, fits, strict=True):
        by = PER_UNIT.get(f.unit, 1.0)
        measured = _ratio(_terms(month, f.of, span), _terms(month, f.over, span))
        sums = [_block_sum(month, "fitted", terms, span) for terms in (f.of, f.over)]
        fitted = None
        if fit.value is not None and sums[0] is not None and sums[1]:
            fitted = float(sums[0] / sums[1]) * by
        for column, known in (
            ("measured", measured),
            ("built_up", _built_up(month, f, span)),
            ("two_product", _two_product(month, f, span)),
        ):
            _write(sheet, f, span, column, known)
        u = None if fit.u is None else fit.u * by
        sheet.number(
            TABLE,
            span.name,
            f.name,
            "fitted",
            fitted,
            u=u,
            unit=f.unit,
            basis="fitted",
            reason=fit.reason or "part of it cannot be found",
        )
        if fitted is not None and measured.value is not None:
            sheet.number(
                TABLE,
                span.name,
                f.name,
                "fitted_less_measured",
                fitted - measured.value * by,
                unit=f.unit,
                basis="computed",
            )
    for f in figures.values():
        _year(sheet, f)


def _form(terms: Sequence[Term], span: Span) -> Linear:
    return tuple(
        (Amount(p, t.stream, t.quantity), t.factor)
        for t in terms
        for p in range(span.first, span.last + 1)
    )


def _write(sheet: Sheet, f: SiteFigure, span: Span, column: str, known: Known) -> None:
    by = PER_UNIT.get(f.unit, 1.0)
    u = sheet.month.measured.readings.uncertainty(known.number) * by if known.number else None
    sheet.number(
        TABLE,
        span.name,
        f.name,
        column,
        None if known.value is None else known.value * by,
        u=u,
        unit=f.unit,
        basis="computed",
        reason=known.reason,
    )


def _terms(month: Month, terms: Sequence[Term], span: Span) -> Known:
    """A sum of measured amounts, and the same of printed leaves."""
    numbers: list[tuple[float, Derived]] = []
    footed, missing = Decimal(0), []
    roles = {s.name: s.role for s in month.streams}
    for t in terms:
        decimals = leaf_decimals_of(roles.get(t.stream, ""), t.quantity)
        for p in range(span.first, span.last + 1):
            stated = month.measured.amount(p, t.stream, t.quantity)
            if stated.number is None:
                missing.append(stated.reason)
                continue
            numbers.append((t.factor, stated.number))
            footed += Decimal(repr(t.factor)) * printed(stated.number.value, decimals)
    if missing:
        return Known(number=None, value=None, reason=first_few(missing))
    return Known(number=combined(numbers), value=float(footed))


def _ratio(of: Known, over: Known) -> Known:
    if of.number is None or over.number is None or of.value is None or over.value is None:
        return Known(number=None, value=None, reason=of.reason or over.reason)
    if over.value == 0.0 or over.number.value == 0.0:
        return Known(number=None, value=None, reason="its denominator is zero")
    return Known(number=of.number / over.number, value=of.value / over.value)


def _part(month: Month, f: SiteFigure, span: Span) -> tuple[Boundary | None, str, str]:
    """
    The part of the site between a figure's head and its product: boundary, quantity, why not.

    Nodes that the head reaches without passing through the product. It must have no other feed.
    """
    quantities = {t.quantity for t in (*f.of, *f.over)}
    if len(quantities) != 1 or any(t.factor != 1.0 for t in (*f.of, *f.over)):
        return None, "", "it is not a share of one quantity"
    q = quantities.pop()
    site = month.sites[span.last - 1]
    inside = _reached(site, f, q)
    part = Boundary(name=f.name, kind="section", nodes=frozenset(inside))
    heads = {t.stream for t in f.over}
    others = sorted(s.name for s in part.entering(site, q) if s.name not in heads)
    if others:
        return None, q, f"{first_few(others)} enters beside the head"
    if heads - {s.name for s in part.entering(site, q)}:
        return None, q, "the head does not enter the part that makes the product"
    if {t.stream for t in f.of} - {s.name for s in part.leaving(site, q)}:
        return None, q, "the product does not leave the part that the head enters"
    return part, q, ""


def _reached(site: Site, f: SiteFigure, q: str) -> set[str]:
    ends = {t.stream for t in f.of}
    named = {s.name: s for s in site.streams}
    queue = [named[t.stream].target for t in f.over if t.stream in named]
    inside: set[str] = set()
    while queue:
        node = queue.pop()
        if node is None or node in inside:
            continue
        inside.add(node)
        queue += [
            s.target
            for s in site.streams
            if s.source == node and q in s.carries and s.name not in ends
        ]
    return inside


def _built_up(month: Month, f: SiteFigure, span: Span) -> Known:
    """Product over everything that left or stayed: closes by construction."""
    part, q, why = _part(month, f, span)
    if part is None:
        return Known(number=None, value=None, reason=why)
    a: Account = account(month.measured, part, q, span.first, span.last)
    sums = (a.products, a.discards, a.closing, a.opening)
    if any(s.number is None or s.basis == "by difference" for s in sums):
        stocks = [s.reason or "a stock is by difference" for s in sums if s.number is None]
        return Known(
            number=None, value=None, reason=first_few(stocks) or "a stock is by difference"
        )
    signs = (1.0, 1.0, 1.0, -1.0)
    head = Known(
        number=combined(
            (sign, s.number) for sign, s in zip(signs, sums, strict=True) if s.number is not None
        ),
        value=sum(sign * float(s.footed or 0) for sign, s in zip(signs, sums, strict=True)),
    )
    return _ratio(_terms(month, f.of, span), head)


def _two_product(month: Month, f: SiteFigure, span: Span) -> Known:
    """Recovery from three grades alone; assumes no stock change between feed and products."""
    part, q, why = _part(month, f, span)
    if part is None:
        return Known(number=None, value=None, reason=why)
    site = month.sites[span.last - 1]
    out = part.leaving(site, q)
    tails = [s.name for s in out if s.name not in {t.stream for t in f.of}]
    if len(f.over) != 1 or len(f.of) != 1 or len(tails) != 1:
        return Known(number=None, value=None, reason="not one feed, one product and one tailing")
    grades = [
        _grade(month, stream, q, span) for stream in (f.over[0].stream, f.of[0].stream, tails[0])
    ]
    missing = [g.reason for g in grades if g.number is None]
    if missing:
        return Known(number=None, value=None, reason=first_few(missing))
    feed, product, tail = (g.number for g in grades if g.number is not None)
    if feed.value <= 0 or product.value == tail.value:
        return Known(number=None, value=None, reason="grades of product and tailing do not differ")
    recovery = (product * (feed - tail)) / (feed * (product - tail))
    return Known(number=recovery, value=recovery.value)


def _grade(month: Month, stream: str, q: str, span: Span) -> Known:
    sums: list[Derived] = []
    for quantity in (q, MASS):
        terms = [
            month.measured.amount(p, stream, quantity) for p in range(span.first, span.last + 1)
        ]
        missing = [t.reason for t in terms if t.number is None]
        if missing:
            return Known(number=None, value=None, reason=first_few(missing))
        sums.append(combined((1.0, t.number) for t in terms if t.number is not None))
    if sums[1].value == 0.0:
        return Known(number=None, value=None, reason=f"{stream} stands")
    return Known(number=sums[0] / sums[1], value=sums[0].value / sums[1].value)


def _year(sheet: Sheet, f: SiteFigure) -> None:
    """Ratios of the year's printed sums."""
    month = sheet.month
    for block in ("measured", "fitted"):
        sums: list[Decimal | str] = []
        for name, terms in (("of", f.of), ("over", f.over)):
            own = _block_sum(month, block, terms, month.whole)
            if own is None:
                sheet.leaf("not determined", f"{TABLE} {f.name}", f"{block}_{name}", 0.0)
                sums.append("this month states no figure")
                continue
            sheet.leaf(TABLE, f.name, f"{block}_{name}", own)
            sums.append(month.year.total(TABLE, f.name, f"{block}_{name}", own))
        why = next((s for s in sums if isinstance(s, str)), "its denominator is zero")
        of, over = sums
        value = None
        if isinstance(of, Decimal) and isinstance(over, Decimal) and over:
            value = float(of / over) * PER_UNIT.get(f.unit, 1.0)
        sheet.number(
            TABLE,
            month.name[:4],
            f.name,
            block,
            value,
            unit=f.unit,
            basis="fitted" if block == "fitted" else "computed",
            reason=why,
        )


def _block_sum(month: Month, block: str, terms: Sequence[Term], span: Span) -> Decimal | None:
    if block == "measured":
        known = _terms(month, terms, span)
        return None if known.value is None else Decimal(repr(known.value))
    roles = {s.name: s.role for s in month.streams}
    total = Decimal(0)
    for t in terms:
        for p in range(span.first, span.last + 1):
            fit = month.fitted.amount(p, t.stream, t.quantity)
            if fit.value is None:
                return None
            decimals = leaf_decimals_of(roles.get(t.stream, ""), t.quantity)
            total += Decimal(repr(t.factor)) * printed(fit.value, decimals)
    return total
