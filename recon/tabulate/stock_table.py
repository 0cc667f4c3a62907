"""Table 7: stocks at the month's two cuts, as signed, with the fit's opinion beside them."""

from __future__ import annotations

from typing import TYPE_CHECKING

from recon.ingest.given import OpeningStock
from recon.tabulate.accounts import closing_stock
from recon.tabulate.rounding import leaf_decimals, printed

if TYPE_CHECKING:
    from recon.tabulate.month import Month


def closing_stocks(month: Month) -> tuple[OpeningStock, ...]:
    """Give next month's opening: every place and quantity as printed, or that there is none."""
    found = []
    for node in month.sites[-1].nodes:
        if not node.stock:
            continue
        for q in month.quantities:
            stated = closing_stock(month.measured, node.name, q, 1, len(month.days))
            if stated.number is None and q not in node.conserves:
                continue
            number = stated.number
            found.append(
                OpeningStock(
                    node=node.name,
                    quantity=q,
                    value=(
                        None if number is None else float(printed(number.value, leaf_decimals(q)))
                    ),
                    u=None if number is None else month.measured.readings.uncertainty(number),
                    basis="by difference" if number is None else stated.basis,
                )
            )
    return tuple(found)
