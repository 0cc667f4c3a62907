"""Tables 2 and 3: the metal balance of the site and of each section, with unaccounted metal."""

from __future__ import annotations

from decimal import Decimal
from typing import TYPE_CHECKING

from recon.findings import Finding, Severity
from recon.flowsheet.network import MASS
from recon.tabulate.accounts import Account, Sum, account, first_few
from recon.tabulate.balance_fitted import write_fitted_balances
from recon.tabulate.boundaries import SITE, boundaries_of, distinct, row_name, table_name
from recon.tabulate.rounding import footed, leaf_decimals, printed
from recon.tabulate.running import LIMIT_K, Runner, Running, loss_not_shown

if TYPE_CHECKING:
    from recon.tabulate.derived import Derived
    from recon.tabulate.month import Month, Sheet, Span

FLOWS = ("receipts", "products", "discards")


def write_balances(sheet: Sheet) -> dict[tuple[str, str], Account]:
    """
    Write both tables for each day, the month and the year to date.

    Returns
    -------
    dict
        The month's account of each boundary and quantity, for documents and headlines.
    """
    month = sheet.month
    runner = Runner(sheet)
    kept: dict[tuple[str, str], Account] = {}
    for boundary in boundaries_of(month.sites):
        if boundary.kind == "node":
            continue
        for q in month.quantities:
            struck = account(month.measured, boundary, q, 1, len(month.days))
            if not _speaks(month, struck):
                continue
            kept[boundary.name, q] = struck
            row = row_name(boundary, q)
            for p in range(1, len(month.days) + 1):
                day = account(month.measured, boundary, q, p, p)
                _write_span(sheet, day, month.spans[p - 1], row)
            _write_span(sheet, struck, month.whole, row)
            _write_month(sheet, runner, struck, row)
    write_fitted_balances(sheet, list(kept.values()))
    return kept


def _speaks(month: Month, struck: Account) -> bool:
    """Whether a quantity passes or rests within a boundary; dry mass only where conserved."""
    if struck.quantity == MASS and struck.unbalanced:
        return False
    b, q = struck.boundary, struck.quantity
    return any(
        b.entering(site, q) or b.leaving(site, q) or b.stocks(site, q)
        for site in distinct(month.sites)
    )


def _write_span(sheet: Sheet, a: Account, span: Span, row: str) -> None:
    """Opening, flows, closing, unaccounted and its test, for a day or the month."""
    table = table_name(a.boundary)
    u = sheet.month.measured.readings.uncertainty
    for name in ("opening", *FLOWS, "closing"):
        part: Sum = getattr(a, name)
        value_u = u(part.number) if part.number else None
        if span.day or name in ("opening", "closing"):
            sheet.number(
                table,
                span.name,
                row,
                name,
                part.footed,
                u=value_u,
                basis=part.basis,
                reason=part.reason,
            )
        else:
            sheet.total(
                table,
                row,
                name,
                part.footed,
                exact=part.number.value if part.number else None,
                u=value_u,
                basis=part.basis,
                reason=part.reason,
            )
    change = _difference(a.closing, a.opening)
    sheet.number(
        table,
        span.name,
        row,
        "stock_change",
        change[0],
        u=u(change[1]) if change[1] else None,
        basis="computed",
        reason=a.closing.reason or a.opening.reason,
    )
    _write_unaccounted(sheet, a, table, span.name, row)


def _difference(a: Sum, b: Sum) -> tuple[Decimal | None, Derived | None]:
    if a.footed is None or b.footed is None or a.number is None or b.number is None:
        return None, None
    return a.footed - b.footed, a.number - b.number


def _write_unaccounted(sheet: Sheet, a: Account, table: str, period: str, row: str) -> None:
    value, number, reason = a.unaccounted_footed, a.unaccounted, a.reason
    u = sheet.month.measured.readings.uncertainty(number) if number else None
    sheet.number(table, period, row, "unaccounted", value, u=u, basis="computed", reason=reason)
    share = share_u = None
    why = reason
    if value is not None and a.receipts.footed:
        share = 100.0 * float(value / a.receipts.footed)
        share_u = None if u is None else 100.0 * u / float(a.receipts.footed)
    elif not reason:
        why = "nothing came in"
    sheet.number(
        table, period, row, "unaccounted_share", share, u=share_u, basis="computed", reason=why
    )
    z, limit, lost, why = None, None, None, reason
    if value is not None and u:
        limit, lost = LIMIT_K * u, loss_not_shown(u)
        if a.unbalanced:
            why = f"{a.quantity} is not balanced at {first_few(a.unbalanced)}"
        else:
            z = float(value) / u
    elif not reason:
        why = "its uncertainty is zero"
    for column, number_ in (
        ("z", z),
        ("investigate_beyond", limit),
        ("loss_not_shown", lost),
    ):
        sheet.number(table, period, row, column, number_, basis="computed", reason=why)


def _write_month(sheet: Sheet, runner: Runner, a: Account, row: str) -> None:
    month, table = sheet.month, table_name(a.boundary)
    _write_opening(sheet, a, row)
    runner.leave(a, row, table)
    _leave(sheet, a, table, row)
    booked = [b for b in month.booked if b.boundary == a.boundary.name and b.quantity == a.quantity]
    if booked:
        late = footed(printed(b.delta_unaccounted, leaf_decimals(a.quantity)) for b in booked)
        sheet.total(table, row, "booked_earlier", late, basis="computed")
        flows = sum(b.delta_opening + b.delta_net_in for b in booked)
        sheet.leaf(table, row, "booked_flows", printed(flows, leaf_decimals(a.quantity)))
    if month.year.months:
        before = month.year.value(month.year.months[-1], table, row, "unaccounted")
        sheet.number(
            table,
            month.name,
            row,
            "previous_month",
            before,
            basis="computed",
            reason="not determined then" if before is None else "",
        )
    _write_running(sheet, runner, a, row)
    _write_shares(sheet, a, row)
    sheet.words(table, month.name, row, "note", _note(month, a))


def _write_opening(sheet: Sheet, a: Account, row: str) -> None:
    month, table = sheet.month, table_name(a.boundary)
    signed = [
        o
        for o in month.opening
        if o.node in {n.name for n in a.boundary.stocks(month.sites[0], a.quantity)}
        and o.quantity == a.quantity
    ]
    if not signed:
        return
    decimals = leaf_decimals(a.quantity)
    known = all(o.value is not None for o in signed)
    value = footed(printed(o.value, decimals) for o in signed if o.value is not None)
    sheet.number(
        table,
        month.name,
        row,
        "opening_signed",
        value if known else None,
        basis="read",
        reason="" if known else "last month does not state every stock",
    )
    booked = footed(printed(o.booked, decimals) for o in signed)
    sheet.number(table, month.name, row, "opening_booked", booked, basis="corrected")


def _leave(sheet: Sheet, a: Account, table: str, row: str) -> None:
    """Leaves of the year and the running sum beside the flows, which ``total`` leaves."""
    if a.opening.footed is not None:
        sheet.leaf(table, row, "opening", a.opening.footed)
    if a.unaccounted_footed is not None:
        sheet.leaf(table, row, "unaccounted", a.unaccounted_footed)
    flows = [a.receipts.footed, a.products.footed, a.discards.footed]
    if all(f is not None for f in flows):
        into, products, discards = (f or Decimal(0) for f in flows)
        sheet.leaf(table, row, "net_in", into - products - discards)


def _write_running(sheet: Sheet, runner: Runner, a: Account, row: str) -> None:
    month, table = sheet.month, table_name(a.boundary)
    earlier = month.year.months[-11:]
    run = runner.over(a, row, table, earlier)
    sheet.number(table, month.name, row, "running_months", run.months, basis="computed")
    _write_run(sheet, a, row, "running_unaccounted", month.name, run)
    known = run.value is not None and run.u
    sheet.number(
        table,
        month.name,
        row,
        "running_z",
        run.value / run.u if run.value is not None and run.u and not a.unbalanced else None,
        basis="computed",
        reason=run.reason or ("" if known and not a.unbalanced else "no yardstick for it"),
    )
    sheet.number(
        table,
        month.name,
        row,
        "running_loss_not_shown",
        loss_not_shown(run.u) if run.u is not None else None,
        basis="computed",
        reason=run.reason,
    )
    twelve = runner.twelve_months(a)
    sheet.number(
        table,
        month.name,
        row,
        "loss_not_shown_12",
        None if twelve is None else loss_not_shown(twelve),
        basis="computed",
        reason=a.reason,
    )
    if a.opening.basis == "by difference":
        span = runner.since_surveyed(row, table)
        over = runner.over(a, row, table, span)
        sheet.number(table, month.name, row, "span_months", over.months, basis="computed")
        _write_run(sheet, a, row, "span_unaccounted", month.name, over)
    year = runner.over(a, row, table, month.year.this_year)
    _write_run(sheet, a, row, "unaccounted", month.name[:4], year)
    _write_year_stocks(sheet, a, row)


def _write_year_stocks(sheet: Sheet, a: Account, row: str) -> None:
    month, table, year = sheet.month, table_name(a.boundary), sheet.month.name[:4]
    first = month.year.this_year[0] if month.year.this_year else ""
    opening = month.year.value(first, table, row, "opening") if first else a.opening.footed
    sheet.number(
        table,
        year,
        row,
        "opening",
        opening,
        basis="read" if first else a.opening.basis,
        reason=a.opening.reason or "the year's first month states no opening",
    )
    sheet.number(
        table,
        year,
        row,
        "closing",
        a.closing.footed,
        basis=a.closing.basis,
        reason=a.closing.reason,
    )


def _write_run(sheet: Sheet, a: Account, row: str, column: str, period: str, run: Running) -> None:
    value = None if run.value is None else printed(run.value, leaf_decimals(a.quantity))
    sheet.number(
        table_name(a.boundary),
        period,
        row,
        column,
        value,
        u=run.u,
        basis="computed",
        reason=run.reason,
    )


def _write_shares(sheet: Sheet, a: Account, row: str) -> None:
    table, period = table_name(a.boundary), sheet.month.name
    moved = provisional = 0.0
    for name in FLOWS:
        part: Sum = getattr(a, name)
        if part.number is None:
            break
        moved += abs(part.number.value)
        provisional += part.provisional
    else:
        if moved:
            share = 100.0 * provisional / moved
            sheet.number(table, period, row, "provisional_share", share, basis="computed")
    if a.unaccounted is not None:
        planned = _planned(sheet.month, a.unaccounted)
        if planned is not None:
            sheet.number(table, period, row, "planning_share", 100.0 * planned, basis="computed")


def _planned(month: Month, number: Derived) -> float | None:
    """Share of a variance that rests on planning values."""
    spread = month.measured.readings.spread(number)
    total = spread.u**2
    if not total:
        return None
    plan = "planning value"
    tags = {i.tag for site in month.sites for i in site.instruments if i.basis_of_u.kind == plan}
    sources = {s.name for site in month.sites for s in site.sources if s.basis.kind == plan}
    u, measured = month.measured.readings.u, month.ingested.measured
    planned: float = sum(
        (slope * float(u[i])) ** 2
        for i, slope in number.slopes.items()
        if i < len(measured) and measured[i].tag in tags
    )
    draws = zip(month.measured.readings.draws, spread.draws.tolist(), strict=True)
    planned += sum(change**2 for draw, change in draws if draw.source in sources)
    return planned / total


def _note(month: Month, a: Account) -> str:
    notes = []
    if a.take_on:
        notes.append("Opening stock is the take-on.")
    if month.opening and not month.opening_signed:
        notes.append("Opening not signed: last month is a draft.")
    if a.unbalanced:
        notes.append(
            f"{a.quantity} is not balanced at {first_few(a.unbalanced)}: what leaves there "
            "unmeasured is part of unaccounted."
        )
    return " ".join(notes)


def headline(accounts: dict[tuple[str, str], Account], sheet: Sheet) -> list[Finding]:
    """Say in a sentence which site balances chance does not explain."""
    found = []
    for (name, q), a in accounts.items():
        if a.unaccounted is None or a.unaccounted_footed is None or a.unbalanced:
            continue
        u = sheet.month.measured.readings.uncertainty(a.unaccounted)
        value = float(a.unaccounted_footed)
        if not u or abs(value) <= LIMIT_K * u:
            continue
        words = "dry mass" if q == MASS else q
        way = "missing" if value > 0 else "too much"
        found.append(
            Finding(
                code="unaccounted-large",
                subject=f"{name} {q}",
                text=(
                    f"{'Site' if name == SITE else name}, {words}: {abs(value):.3f} t {way} in "
                    f"{sheet.month.name}; chance explains about {LIMIT_K * u:.3f} t "
                    f"(z {value / u:.1f}). Investigate before anything is booked: survey, "
                    "shipments, then the instruments named by the suspects."
                ),
                severity=Severity.SERIOUS,
                evidence=(("z", f"{value / u:.2f}"),),
            )
        )
    return found
