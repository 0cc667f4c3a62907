"""The unaccounted bridge: as read, each approved correction, stated."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from recon.tabulate.accounts import Account, account
from recon.tabulate.as_measured import AsMeasured
from recon.tabulate.boundaries import distinct, row_name

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
    worlds: dict[int, AsMeasured] = {}
    for a in accounts:
        row = row_name(a.boundary, a.quantity)
        places = _places(month, a)
        moving = [j for j, d in enumerate(decisions.values()) if d.places & places]
        states = []
        for j in moving:
            if j not in worlds:
                worlds[j] = AsMeasured(month.ingested, month.sites, month.opening, names[j:])
            states.append(account(worlds[j], a.boundary, a.quantity, 1, len(month.days)))
        states.append(a)
        _line(sheet, f"{row} 000 as read", states[0], None, "As read, before any decision.")
        for j, before, after in zip(moving, states, states[1:], strict=False):
            if not _same(before, after):
                name = f"{row} {j + 1:03d} {names[j][:12]}"
                _line(sheet, name, after, before, decisions[names[j]].words)
        _line(sheet, f"{row} 999 stated", a, None, "Stated, all approved decisions in.")


@dataclass(frozen=True, kw_only=True)
class Decided:
    """What a person must know of a decision, and the streams and stocks that it touched."""

    words: str
    places: frozenset[str]


def _places(month: Month, a: Account) -> frozenset[str]:
    """Streams that cross a boundary and stocks within it."""
    found: set[str] = set()
    for site in distinct(month.sites):
        found |= {s.name for s in a.boundary.entering(site, a.quantity)}
        found |= {s.name for s in a.boundary.leaving(site, a.quantity)}
        found |= {n.name for n in a.boundary.stocks(site, a.quantity)}
    return frozenset(found)


def _decisions(month: Month) -> dict[str, Decided]:
    """Every decision that touched a reading, in the order in which readings show them."""
    words: dict[str, str] = {}
    tags: dict[str, dict[str, None]] = {}
    places: dict[str, set[str]] = {}
    for m in month.ingested.measured:
        for c in m.corrections:
            by, why = c.by or "unnamed", c.reason or "no reason given"
            words.setdefault(c.decision, f"{c.kind}, by {by}: {why}")
            tags.setdefault(c.decision, {})[m.tag] = None
            places.setdefault(c.decision, set()).add(m.stream or m.node or "")
    return {
        name: Decided(words=f"{', '.join(tags[name])}: {text}", places=frozenset(places[name]))
        for name, text in words.items()
    }


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
