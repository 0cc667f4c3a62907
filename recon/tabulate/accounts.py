"""The measured chain: opening + in - out - closing of a boundary, and what is unaccounted."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from decimal import Decimal

from recon.flowsheet.network import MASS
from recon.tabulate.as_measured import AsMeasured, Basis, Stated, weakest
from recon.tabulate.boundaries import Boundary, distinct
from recon.tabulate.derived import Derived, combined
from recon.tabulate.rounding import footed, leaf_decimals, printed

NAMED = 3
"""So many missing amounts are named in a reason; the rest are counted."""


@dataclass(frozen=True, kw_only=True)
class Sum:
    """
    A sum of stated amounts, exact and as its printed leaves add up.

    Attributes
    ----------
    number : Derived or None
        None where any term is missing.
    footed : Decimal or None
        Sum of the printed leaves [t].
    basis : str
        Weakest among the terms.
    reason : str
        Which terms are missing.
    provisional : float
        What of it rests on provisional or estimated values [t].
    """

    number: Derived | None
    footed: Decimal | None
    basis: Basis
    reason: str = ""
    provisional: float = 0.0


@dataclass(frozen=True, kw_only=True)
class Account:
    """
    One boundary, one quantity, one span of days, as measured.

    Attributes
    ----------
    boundary, quantity
    opening, receipts, products, discards, closing : Sum
        ``discards`` is everything that leaves and is not a product.
    unaccounted : Derived or None
        ``opening + receipts - products - discards - closing``; a positive one is metal missing.
    unaccounted_footed : Decimal or None
        The same of printed numbers: what the statement prints.
    reason : str
        Why it is not determined.
    take_on : bool
        The opening is the first survey.
    unbalanced : tuple of str
        Nodes within at which the quantity is not balanced: what leaves there unmeasured is part
        of unaccounted, so chance alone is no yardstick for it.
    """

    boundary: Boundary
    quantity: str
    opening: Sum
    receipts: Sum
    products: Sum
    discards: Sum
    closing: Sum
    unaccounted: Derived | None
    unaccounted_footed: Decimal | None
    reason: str
    take_on: bool
    unbalanced: tuple[str, ...]

    @property
    def flows(self) -> Derived | None:
        """In less out [t]."""
        parts = [(1.0, self.receipts), (-1.0, self.products), (-1.0, self.discards)]
        if any(part.number is None for _, part in parts):
            return None
        return combined((sign, part.number) for sign, part in parts if part.number is not None)


def account(
    measured: AsMeasured, boundary: Boundary, quantity: str, first: int, last: int
) -> Account:
    """
    Strike the measured balance of a boundary over days ``first`` to ``last`` (1-based).

    Nothing is found by difference but a closing stock that nobody surveyed, and then unaccounted
    is not determined: it would be zero by construction.
    """
    sites = measured.sites
    receipts: list[tuple[Stated, int]] = []
    products: list[tuple[Stated, int]] = []
    discards: list[tuple[Stated, int]] = []
    for p in range(first, last + 1):
        site = sites[p - 1]
        for s in boundary.entering(site, quantity):
            receipts.append(
                (measured.amount(p, s.name, quantity), leaf_decimals_of(s.role, quantity))
            )
        for s in boundary.leaving(site, quantity):
            into = products if s.role == "product" else discards
            into.append((measured.amount(p, s.name, quantity), leaf_decimals_of(s.role, quantity)))
    whole = leaf_decimals(quantity)
    openings = [
        (measured.stock(first - 1, n.name, quantity), whole)
        for n in boundary.stocks(sites[first - 1], quantity)
    ]
    closings = [
        (closing_stock(measured, n.name, quantity, first, last), whole)
        for n in boundary.stocks(sites[last - 1], quantity)
    ]
    sums = [summed(part) for part in (openings, receipts, products, discards, closings)]
    unbalanced = tuple(
        dict.fromkeys(
            name
            for site in distinct(sites[first - 1 : last])
            for name in boundary.unbalanced(site, quantity)
        )
    )
    reason = _why_not(sums, [s for s, _ in (*openings, *closings)], quantity, unbalanced)
    return Account(
        boundary=boundary,
        quantity=quantity,
        opening=sums[0],
        receipts=sums[1],
        products=sums[2],
        discards=sums[3],
        closing=sums[4],
        unaccounted=None if reason else _balance([s.number for s in sums]),
        unaccounted_footed=None if reason else _footed_balance([s.footed for s in sums]),
        reason=reason,
        take_on=any(s.take_on for s, _ in openings),
        unbalanced=unbalanced,
    )


def leaf_decimals_of(role: str, quantity: str) -> int:
    """Give the decimals of a stream's printed amount, by its role."""
    return leaf_decimals(quantity, product=role == "product")


def summed(terms: Sequence[tuple[Stated, int]]) -> Sum:
    """Add stated amounts, each rounded to its decimals for the footed sum."""
    missing = [s.reason for s, _ in terms if s.number is None]
    basis = weakest([s.basis for s, _ in terms])
    if missing:
        return Sum(number=None, footed=None, basis="by difference", reason=first_few(missing))
    numbers = [(s, s.number, decimals) for s, decimals in terms if s.number is not None]
    return Sum(
        number=combined((1.0, n) for _, n, _ in numbers),
        footed=footed(printed(n.value, decimals) for _, n, decimals in numbers),
        basis=basis,
        provisional=sum(abs(n.value) for s, n, _ in numbers if s.provisional),
    )


def closing_stock(measured: AsMeasured, node: str, quantity: str, first: int, last: int) -> Stated:
    """
    State a closing stock: surveyed or estimated, else the opening rolled on, *by difference*.

    The roll adds measured flows to the opening. It is said to be by difference, so that no
    balance is struck with it.
    """
    stated = measured.stock(last, node, quantity)
    if stated.number is not None:
        return stated
    here = Boundary(name=node, kind="node", nodes=frozenset((node,)))
    opening = measured.stock(first - 1, node, quantity)
    terms: list[tuple[float, Stated]] = [(1.0, opening)]
    for p in range(first, last + 1):
        site = measured.sites[p - 1]
        if here.unbalanced(site, quantity):
            return stated
        terms += [
            (1.0, measured.amount(p, s.name, quantity)) for s in here.entering(site, quantity)
        ]
        terms += [
            (-1.0, measured.amount(p, s.name, quantity)) for s in here.leaving(site, quantity)
        ]
    if any(t.number is None for _, t in terms):
        return stated
    return Stated(
        number=combined((sign, t.number) for sign, t in terms if t.number is not None),
        basis="by difference",
        reason=stated.reason,
        provisional=any(t.provisional for _, t in terms),
    )


def first_few(reasons: Iterable[str]) -> str:
    """
    Join reasons, naming the first few and counting the rest.

    Examples
    --------
    >>> first_few(["a", "b", "a", "c", "d", "e"])
    'a; b; c; and 2 more'
    """
    distinct = list(dict.fromkeys(r for r in reasons if r))
    named = distinct[:NAMED]
    if len(distinct) > NAMED:
        named.append(f"and {len(distinct) - NAMED} more")
    return "; ".join(named)


def _why_not(
    sums: Sequence[Sum], stocks: Sequence[Stated], quantity: str, unbalanced: Sequence[str]
) -> str:
    if quantity == MASS and unbalanced:
        return f"dry mass is not conserved at {first_few(unbalanced)}"
    reasons = [s.reason for s in sums if s.number is None]
    reasons += [
        s.reason or "a stock is by difference"
        for s in stocks
        if s.number is not None and s.basis == "by difference"
    ]
    return f"not determined: {first_few(reasons)}" if reasons else ""


def _balance(numbers: Sequence[Derived | None]) -> Derived:
    signs = (1.0, 1.0, -1.0, -1.0, -1.0)
    return combined((sign, n) for sign, n in zip(signs, numbers, strict=True) if n is not None)


def _footed_balance(numbers: Sequence[Decimal | None]) -> Decimal:
    opening, receipts, products, discards, closing = (n or Decimal(0) for n in numbers)
    return opening + receipts - products - discards - closing
