"""The one place where a number is rounded: half to even, in decimal, once a statement.

Leaves (a day's stream or a stock, one quantity) are rounded here; every total is the exact decimal
sum of its printed leaves, and what that loses against the unrounded total is its *residue*.
"""

from __future__ import annotations

from collections.abc import Iterable
from decimal import ROUND_HALF_EVEN, Decimal

from recon.flowsheet.network import MASS

PRECIOUS = frozenset({"Au", "Ag", "Pt", "Pd"})
"""Quantities whose grades are stated in g/t and whose amounts are stated to the gram."""
DECIMALS = {MASS: 1, **dict.fromkeys(sorted(PRECIOUS), 6)}
COMPONENT_DECIMALS = 3
PRODUCT_MASS_DECIMALS = 3


def leaf_decimals(quantity: str, *, product: bool = False) -> int:
    """
    Give the decimals of a printed amount [t].

    Dry mass to 0.1 t (0.001 t for a product, which is sold by weight), components to 0.001 t,
    precious metals to the gram (common practice).

    Examples
    --------
    >>> leaf_decimals("mass"), leaf_decimals("mass", product=True), leaf_decimals("Cu")
    (1, 3, 3)
    """
    if quantity == MASS and product:
        return PRODUCT_MASS_DECIMALS
    return DECIMALS.get(quantity, COMPONENT_DECIMALS)


def printed(value: float, decimals: int) -> Decimal:
    """
    Round half to even on the shortest decimal that names the double; minus zero becomes zero.

    Parameters
    ----------
    value : float
        Finite [any unit].
    decimals : int

    Raises
    ------
    ValueError
        The value is not finite.

    Examples
    --------
    >>> str(printed(2.675, 2)), str(printed(2.665, 2)), str(printed(-0.0004, 3))
    ('2.68', '2.66', '0.000')
    """
    exact = Decimal(repr(float(value)))
    if not exact.is_finite():
        raise ValueError(f"only finite numbers can be printed, found {value}")
    rounded = exact.quantize(Decimal(1).scaleb(-decimals), rounding=ROUND_HALF_EVEN)
    return abs(rounded) if rounded == 0 else rounded


def footed(leaves: Iterable[Decimal]) -> Decimal:
    """Sum printed leaves exactly."""
    return sum(leaves, Decimal(0))


def residue(total: Decimal, exact: float) -> float:
    """Printed total less the unrounded one [same unit]."""
    return float(total - Decimal(repr(float(exact))))
