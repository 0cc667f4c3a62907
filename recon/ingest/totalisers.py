"""Totalisers: differences between readings, across roll-overs, with resets left out and told."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from recon.ingest.pieces import HOUR, Pieces

if TYPE_CHECKING:
    from recon.ingest.pieces import Instants, Values

ROLLED = 5.0
"""A drop is a roll-over where it implies no more than so many times the largest usual rate."""
NEAR_MODULUS = 0.10
"""Without usual rates, a roll-over may imply at most this share of the modulus."""


@dataclass(frozen=True, kw_only=True)
class Counted:
    """
    What a totaliser counted between its readings.

    Attributes
    ----------
    rate : Pieces
        Mean rate between each two readings [unit/h]; spans with a reset are left out.
    resets, rollovers, backs : tuple of (int, float, float)
        Instant after it [UTC microseconds], reading before, reading after [unit]: set to zero or
        another value (what it counted around it is lost); rolled over its modulus; stepped back a
        little (counted as it is).
    """

    rate: Pieces
    resets: tuple[tuple[int, float, float], ...]
    rollovers: tuple[tuple[int, float, float], ...]
    backs: tuple[tuple[int, float, float], ...]


def count(at: Instants, value: Values, modulus: float | None) -> Counted:
    """
    Take a totaliser's differences.

    Parameters
    ----------
    at, value : ndarray
        Usable readings, instants rising, shape (n,) [UTC microseconds, unit].
    modulus : float or None
        Where it rolls over [unit]; None where that is not known: then every large drop is a reset.

    Returns
    -------
    Counted

    Examples
    --------
    >>> at = np.arange(4) * HOUR
    >>> counted = count(at, np.array([9_980.0, 9_990.0, 0.0, 10.0]), 10_000.0)
    >>> counted.rate.integral, len(counted.rollovers), len(counted.resets)
    (30.0, 1, 0)
    >>> counted = count(at, np.array([5_000.0, 5_010.0, 3.0, 13.0]), 10_000.0)
    >>> counted.rate.integral, counted.rate.hours, len(counted.resets)
    (20.0, 2.0, 1)
    """
    if len(at) < 2:
        empty = np.zeros(0, dtype=np.int64)
        none = Pieces(begin=empty, end=empty, left=np.zeros(0), right=np.zeros(0))
        return Counted(rate=none, resets=(), rollovers=(), backs=())
    step = np.diff(value)
    hours = np.maximum(np.diff(at), 1) / HOUR
    usual = float(np.max(np.where(step > 0, step / hours, 0.0)))
    whole = modulus or 0.0
    around = step + whole
    allowed = np.full(len(step), NEAR_MODULUS * whole)
    if usual > 0:
        allowed = np.minimum(0.5 * whole, ROLLED * usual * hours)
    rolled = (step < 0) & (whole > 0) & (around >= 0) & (around <= allowed)
    little = (step < 0) & ~rolled & (-step <= usual * hours) & (value[1:] > 0.5 * value[:-1])
    reset = (step < 0) & ~rolled & ~little
    change = np.where(rolled, around, step)
    keep = ~reset
    rate = change[keep] / hours[keep]

    def told(which: np.ndarray) -> tuple[tuple[int, float, float], ...]:
        return tuple(
            (int(at[i + 1]), float(value[i]), float(value[i + 1])) for i in np.flatnonzero(which)
        )

    return Counted(
        rate=Pieces(begin=at[:-1][keep], end=at[1:][keep], left=rate, right=rate),
        resets=told(reset),
        rollovers=told(rolled),
        backs=told(little),
    )


def clipped(pieces: Pieces, start: int, end: int, *, interval: int = 0) -> Pieces:
    """
    Cut a rate to a day; a difference over its edge is shared by time.

    Where the next day's first reading is not there yet, the last rate stands for up to two usual
    intervals to the day's end.
    """
    stop = pieces.end.copy()
    if len(stop) and end - int(stop[-1]) <= 2 * interval:
        stop[-1] = max(int(stop[-1]), end)
    begin, finish = np.maximum(pieces.begin, start), np.minimum(stop, end)
    keep = finish > begin
    left = pieces.left[keep]
    return Pieces(begin=begin[keep], end=finish[keep], left=left, right=left)
