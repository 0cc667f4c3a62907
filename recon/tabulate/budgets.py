"""What the uncertainty of each unaccounted figure rests on: shares of its variance, by reading."""

from __future__ import annotations

from typing import TYPE_CHECKING

from recon.reconcile.answer import FigureValue, Share
from recon.reconcile.figures import NEGLIGIBLE
from recon.tabulate.boundaries import row_name

if TYPE_CHECKING:
    from collections.abc import Iterable

    from recon.tabulate.accounts import Account
    from recon.tabulate.month import Month


def unaccounted_figures(month: Month, accounts: Iterable[Account]) -> tuple[FigureValue, ...]:
    """
    Give each unaccounted figure of the month with its budget, largest share first.

    Returns
    -------
    tuple of FigureValue
        Named ``unaccounted <row of its table>``; the value is the printed one [t]. Shares sum to
        one; a reading is named with its period, a draw of a shared source with its first.
    """
    return tuple(_figure(month, a) for a in accounts)


def _figure(month: Month, a: Account) -> FigureValue:
    name = f"unaccounted {row_name(a.boundary, a.quantity)}"
    if a.unaccounted is None or a.unaccounted_footed is None:
        return FigureValue(
            name=name,
            period=None,
            value=None,
            u=None,
            determined=False,
            budget=(),
            reason=a.reason,
        )
    spread = month.measured.readings.spread(a.unaccounted)
    return FigureValue(
        name=name,
        period=None,
        value=float(a.unaccounted_footed),
        u=spread.u,
        determined=True,
        budget=_budget(month, a, spread.u**2) if spread.u else (),
    )


def _budget(month: Month, a: Account, variance: float) -> tuple[Share, ...]:
    assert a.unaccounted is not None
    readings = month.measured.readings
    shares = []
    for i, slope in a.unaccounted.slopes.items():
        name, period = month.measured.reading_named(i)
        share = (slope * float(readings.u[i])) ** 2 / variance
        shares.append(Share(name=name, period=period, source=False, share=share))
    changes = readings.spread(a.unaccounted).draws.tolist()
    for draw, change in zip(readings.draws, changes, strict=True):
        share = change**2 / variance
        shares.append(Share(name=draw.source, period=draw.first, source=True, share=share))
    kept = (s for s in shares if s.share > NEGLIGIBLE)
    return tuple(sorted(kept, key=lambda s: (-s.share, s.source, s.name, s.period)))
