"""Readings as a signal: over which spans of time a value is known, and what it is there."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Instants = NDArray[np.int64]
    Values = NDArray[np.float64]
    Flags = NDArray[np.bool_]

HOUR = 3_600_000_000
"""Microseconds in an hour."""
HOLD_INTERVALS = 10
HOLD_LEAST = HOUR // 2
"""A value holds for ten usual intervals between readings, at least half an hour."""

ON = 0.5
"""A run signal above this is on."""


@dataclass(frozen=True, kw_only=True)
class Pieces:
    """
    Spans in which a value is known, in time order, without overlap; gaps lie between them.

    Attributes
    ----------
    begin, end : ndarray
        UTC microseconds, shape (n,).
    left, right : ndarray
        Value at begin and end, linear between, shape (n,); equal for a step.
    """

    begin: Instants
    end: Instants
    left: Values
    right: Values

    @property
    def hours(self) -> float:
        """Known time [h]."""
        return float(np.sum(self.end - self.begin)) / HOUR

    @property
    def integral(self) -> float:
        """Integral over known time [unit x h]."""
        return float(np.sum((self.end - self.begin) * (self.left + self.right))) / 2 / HOUR


def usual_interval(at: Instants) -> int:
    """Median time between readings [microseconds]; 0 where there are fewer than two."""
    return int(np.median(np.diff(at))) if len(at) > 1 else 0


def hold_of(at: Instants) -> int:
    """How long one reading of a tag may stand for what follows it [microseconds]."""
    interval = usual_interval(at)
    return max(HOLD_INTERVALS * interval, HOLD_LEAST) if interval else np.iinfo(np.int64).max


def pieces_of(
    at: Instants,
    value: Values,
    usable: Flags,
    *,
    start: int,
    end: int,
    linear: bool = False,
    hold: int | None = None,
) -> Pieces:
    """
    Turn readings into a signal over one span.

    Parameters
    ----------
    at, value, usable : ndarray
        Rising instants, values and whether each may be used, shape (n,). The last reading at or
        before ``start`` is carried in, the first one after ``end`` ends a linear piece.
    start, end : int
        The span [UTC microseconds].
    linear : bool
        Values run linearly to the next usable reading; else each holds until the next one.
    hold : int or None
        Longest time a reading stands; None for ever (run signals report changes only).

    Returns
    -------
    Pieces
        A reading that may not be used ends the one before it and leaves a gap.
    """
    if not len(at):
        empty = np.zeros(0, dtype=np.int64)
        return Pieces(begin=empty, end=empty, left=np.zeros(0), right=np.zeros(0))
    following = np.append(at[1:], max(end, int(at[-1])))
    right = value
    if linear:
        joined = np.append(usable[1:], False)
        right = np.where(joined, np.append(value[1:], 0.0), value)
    stop = following
    if hold is not None:
        limit = at + np.minimum(hold, np.iinfo(np.int64).max - at)
        held = np.minimum(following, limit)
        if linear:
            long = np.maximum(following - at, 1)
            share = (held - at) / long
            right = value + (right - value) * share
        stop = held
    begin, finish = np.maximum(at, start), np.minimum(stop, end)
    keep = usable & (finish > begin)
    if linear:
        span = np.maximum(stop - at, 1)
        slope = (right - value) / span
        first = value + slope * (begin - at)
        last = value + slope * (finish - at)
        return Pieces(begin=begin[keep], end=finish[keep], left=first[keep], right=last[keep])
    kept = value[keep]
    return Pieces(begin=begin[keep], end=finish[keep], left=kept, right=kept)


def where_on(signal: Pieces) -> Pieces:
    """Give the spans in which a run signal is on, as pieces of value 1, neighbours joined."""
    on = signal.left > ON
    begin, end = signal.begin[on], signal.end[on]
    if not len(begin):
        return Pieces(begin=begin, end=end, left=np.zeros(0), right=np.zeros(0))
    new = np.append(True, begin[1:] > end[:-1])
    last = np.append(new[1:], True)
    begin, end = begin[new], end[last]
    return Pieces(begin=begin, end=end, left=np.ones(len(begin)), right=np.ones(len(begin)))


def times(a: Pieces, b: Pieces) -> tuple[Pieces, Values]:
    """
    Cut two signals at the union of their times.

    Returns
    -------
    cut : Pieces
        The first signal where both are known.
    weight : ndarray
        Integral of the product over each piece, per microsecond of the piece, shape (k,): exact
        for two linear signals (Simpson's rule integrates a quadratic exactly).
    """
    edges = np.unique(np.concatenate([a.begin, a.end, b.begin, b.end]))
    empty = np.zeros(0, dtype=np.int64)
    nothing = Pieces(begin=empty, end=empty, left=np.zeros(0), right=np.zeros(0))
    if len(edges) < 2 or not len(a.begin) or not len(b.begin):
        return nothing, np.zeros(0)
    begin, end = edges[:-1], edges[1:]
    (a_left, a_right, in_a), (b_left, b_right, in_b) = _on(a, begin, end), _on(b, begin, end)
    both = in_a & in_b
    cut = Pieces(begin=begin[both], end=end[both], left=a_left[both], right=a_right[both])
    product = (
        2 * a_left * b_left + 2 * a_right * b_right + a_left * b_right + a_right * b_left
    ) / 6
    return cut, product[both]


def within(a: Pieces, spans: Pieces) -> Pieces:
    """Cut a signal down to spans (a run signal's on-time)."""
    if len(spans.begin) == 1 and len(a.begin):
        first, last = int(spans.begin[0]), int(spans.end[0])
        if first <= int(a.begin[0]) and int(a.end[-1]) <= last:
            return a
    cut, _ = times(a, spans)
    return cut


def _on(signal: Pieces, begin: Instants, end: Instants) -> tuple[Values, Values, Flags]:
    """Values of a signal at the ends of elementary spans, and where it is known."""
    place = np.searchsorted(signal.begin, begin, side="right") - 1
    safe = np.maximum(place, 0)
    known = (place >= 0) & (begin < signal.end[safe])
    if signal.left is signal.right:
        value = signal.left[safe]
        return value, value, known
    span = np.maximum(signal.end[safe] - signal.begin[safe], 1)
    slope = (signal.right[safe] - signal.left[safe]) / span
    left = signal.left[safe] + slope * (begin - signal.begin[safe])
    right = signal.left[safe] + slope * (end - signal.begin[safe])
    return left, right, known
