"""The unaccounted bridge: as read, each approved correction, stated."""

from __future__ import annotations

from typing import TYPE_CHECKING

from recon.tabulate.accounts import Account, account
from recon.tabulate.as_measured import AsMeasured
from recon.tabulate.boundaries import row_name

if TYPE_CHECKING:
    from collections.abc import Iterable

    from recon.tabulate.month import Month, Sheet

TABLE = "unaccounted-bridge"


def write_bridge(sheet: Sheet, accounts: Iterable[Account]) -> None:
    """
    Write how each decision moved unaccounted, in the order in which decisions were applied.

    A decision that touches nothing of a balance has no line in its bridge. The last line is what
    is stated, before leaves are rounded.
    """
    month = sheet.month
    decisions = _decisions(month)
    names = list(decisions)
    worlds = [
        AsMeasured(month.ingested, month.sites, month.opening, without=names[j:])
        for j in range(len(names))
    ]
    for a in accounts:
        row = row_name(a.boundary, a.quantity)
        states = [account(world, a.boundary, a.quantity, 1, len(month.days)) for world in worlds]
        states.append(a)
        _line(sheet, f"{row} 000 as read", states[0], None, "As read, before any decision.")
        for j, name in enumerate(names):
            before, after = states[j], states[j + 1]
            if _same(before, after):
                continue
            _line(sheet, f"{row} {j + 1:03d} {name[:12]}", after, before, decisions[name])
        _line(sheet, f"{row} 999 stated", a, None, "Stated, all approved decisions in.")


def _decisions(month: Month) -> dict[str, str]:
    """Every decision that touched a reading, with what a person must know of it."""
    found: dict[str, tuple[str, dict[str, None]]] = {}
    for m in month.ingested.measured:
        for c in m.corrections:
            words = f"{c.kind}, by {c.by or 'unnamed'}: {c.reason or 'no reason given'}"
            found.setdefault(c.decision, (words, {}))[1][m.tag] = None
    return {name: f"{', '.join(tags)}: {words}" for name, (words, tags) in found.items()}


def _same(before: Account, after: Account) -> bool:
    if before.unaccounted is None or after.unaccounted is None:
        return before.reason == after.reason
    return before.unaccounted.value == after.unaccounted.value


def _line(sheet: Sheet, row: str, a: Account, before: Account | None, words: str) -> None:
    month = sheet.month
    number = a.unaccounted
    sheet.words(TABLE, month.name, row, "step", words)
    sheet.number(
        TABLE,
        month.name,
        row,
        "unaccounted",
        None if number is None else number.value,
        u=month.measured.readings.uncertainty(number) if number else None,
        basis="computed",
        reason=a.reason,
    )
    if before is None:
        return
    known = number is not None and before.unaccounted is not None
    sheet.number(
        TABLE,
        month.name,
        row,
        "effect",
        number.value - before.unaccounted.value if number and before.unaccounted else None,
        basis="computed",
        reason="" if known else before.reason or a.reason,
    )
