"""What looks wrong in one tag's readings of a day; nothing here changes a value.

Each ``find_...`` asks one question and returns findings with evidence. Sizes are planning values
(common practice): a screen points, a person or a decision acts.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING

import numpy as np

from recon.findings import Finding, Severity
from recon.ingest.pieces import HOUR
from recon.ingest.rows import Quality
from recon.ingest.screens_of_time import (
    find_clock_change,
    find_duplicates,
    find_future,
    find_gaps,
    find_late_readings,
)

if TYPE_CHECKING:
    from recon.ingest.sight import Sight
    from recon.ingest.totalisers import Counted

BAD_SHARE = 0.10
"""Bad or uncertain readings above this share of the day are said."""
FROZEN_HOURS = 3.0
FROZEN_LEAST = 20
"""A value that repeats exactly so long, in so many readings, is frozen."""
SPIKE = 10.0
SPIKE_SHARE = 0.5
SPIKE_LONGEST = 5
"""Up to five readings that leave their neighbours by ten robust deviations and half of them."""
STOPPED_SHARE = 0.02
"""A rate that reads more than this share of its running mean while stopped has a zero shift."""
NOTHING = 1e-3
"""A running stream whose rate stays below this share of its range or mean reads zero."""


def find_all(sight: Sight) -> list[Finding]:
    """Ask every question of a tag's day, in order."""
    return [finding for ask in SCREENS for finding in ask(sight)]


def find_bad_quality(sight: Sight) -> list[Finding]:
    """Find days on which many readings are marked bad (set aside) or uncertain (used)."""
    count = int(np.sum(sight.inside))
    found: list[Finding] = []
    for mark, word, fate in (
        (Quality.BAD, "bad", "set aside"),
        (Quality.UNCERTAIN, "uncertain", "used"),
    ):
        marked = int(np.sum(sight.inside & (sight.quality == mark)))
        if count and marked > BAD_SHARE * count:
            found += sight.say(
                f"{word}-quality",
                f"{marked} of {count} readings are marked {word} by the source and {fate}. Look at "
                "the instrument and its link.",
                ("readings", str(count)),
                (word, str(marked)),
            )
    return found


def find_out_of_range(sight: Sight) -> list[Finding]:
    """Find readings outside the declared range; they are set aside."""
    low, high = sight.instrument.low, sight.instrument.high
    with np.errstate(invalid="ignore"):
        outside = sight.inside & (
            (sight.value < (-np.inf if low is None else low))
            | (sight.value > (np.inf if high is None else high))
        )
    if not outside.any():
        return []
    values = sight.value[outside]
    worst = values[int(np.argmax(np.abs(values)))]
    unit = sight.instrument.unit
    return sight.say(
        "out-of-range",
        f"{len(values)} readings lie outside {_words(low)} to {_words(high)} {unit}, the furthest "
        f"{worst:g} {unit}; they are set aside. Check the instrument, its unit and its range.",
        ("first at", sight.clock(int(sight.at[outside][0]))),
        ("furthest", f"{worst:g} {unit}"),
    )


def find_no_value(sight: Sight) -> list[Finding]:
    """Find readings without a number; a null is a gap, never a zero."""
    missing = sight.inside & ~np.isfinite(sight.value) & (sight.quality != Quality.BAD)
    if not missing.any():
        return []
    return sight.say(
        "no-value",
        f"{int(missing.sum())} readings have no number though they are not marked bad; they are "
        "gaps. Check the source query.",
        ("first at", sight.clock(int(sight.at[missing][0]))),
    )


def find_frozen(sight: Sight) -> list[Finding]:
    """Find a value that repeats exactly for hours while the stream runs."""
    if sight.is_signal or sight.instrument.kind == "totaliser":
        return []
    at, value = sight.runs
    if len(at) < FROZEN_LEAST or not value.any():
        return []
    moves = value[1:] != value[:-1]
    if len(moves) - int(moves.sum()) < FROZEN_LEAST - 1:
        return []
    edges = np.flatnonzero(np.append(True, moves))
    last = np.append(edges[1:], len(value)) - 1
    hours = (at[last] - at[edges]) / HOUR
    count = last - edges + 1
    long = (hours >= FROZEN_HOURS) & (count >= FROZEN_LEAST) & (value[edges] != 0)
    if not long.any():
        return []
    i = int(np.argmax(np.where(long, hours, 0.0)))
    return sight.say(
        "frozen",
        f"reads exactly {value[edges[i]]:g} {sight.instrument.unit} in {count[i]} readings over "
        f"{hours[i]:.1f} h of running, from {sight.clock(int(at[edges[i]]))} plant time. A live "
        "signal flickers: check for a hold, a simulation or a lost link.",
        ("hours", f"{hours[i]:.1f}"),
        ("value", f"{value[edges[i]]:g}"),
    )


def find_spikes(sight: Sight) -> list[Finding]:
    """Find a few readings far from both their neighbours; they stay in the integral."""
    if sight.is_signal or sight.instrument.kind == "totaliser":
        return []
    at, value = sight.runs
    if len(value) < FROZEN_LEAST:
        return []
    lowest, highest = float(value.min()), float(value.max())
    if highest - lowest <= SPIKE_SHARE * min(abs(lowest), abs(highest)) and lowest * highest > 0:
        return []
    middle = float(np.median(value))
    spread = 1.4826 * float(np.median(np.abs(value - middle)))
    off = np.abs(value - middle) > max(SPIKE * spread, SPIKE_SHARE * abs(middle))
    edges = np.flatnonzero(np.diff(np.concatenate([[False], off, [False]]).astype(np.int8)))
    begin, end = edges[::2], edges[1::2]
    short = (end - begin <= SPIKE_LONGEST) & (begin > 0) & (end < len(value))
    if not short.any():
        return []
    b = int(begin[short][0])
    worst = max((value[i] for b, e in zip(begin[short], end[short], strict=True)
                 for i in range(b, e)), key=lambda v: abs(v - middle))  # fmt: skip
    step = sight.interval / HOUR
    moved = float(sum((value[b:e] - middle).sum() for b, e in
                      zip(begin[short], end[short], strict=True))) * step  # fmt: skip
    return sight.say(
        "spike",
        f"{int(short.sum())} spikes of at most {SPIKE_LONGEST} readings, the furthest {worst:g} "
        f"{sight.instrument.unit} against a median of {middle:g}; they count, and move the day by "
        f"about {moved:+.3g} {sight.instrument.unit} h. Correct by decision if they are false.",
        ("first at", sight.clock(int(at[b]))),
        ("furthest", f"{worst:g}"),
    )


def find_zero_while_running(sight: Sight) -> list[Finding]:
    """Find a rate that reads nothing for hours while its stream runs."""
    if not sight.has_signal or sight.is_signal or sight.instrument.kind != "rate":
        return []
    mine = sight.usable & sight.ran & sight.inside
    value = np.abs(sight.value[mine])
    if not len(value):
        return []
    typical = float(np.max(value))
    span = sight.instrument.high or typical
    zero = value <= NOTHING * max(typical, span)
    hours = float(zero.sum()) / len(value) * sight.running.hours
    if hours < 1.0:
        return []
    return sight.say(
        "zero-while-running",
        f"reads zero for about {hours:.1f} h of {sight.running.hours:.1f} h in which its run "
        "signal is on. Check the meter, or the run signal if the stream truly stood.",
        ("hours", f"{hours:.1f}"),
    )


def find_reading_while_stopped(sight: Sight) -> list[Finding]:
    """Find a rate that does not return to zero when its stream stops: a zero shift."""
    if not sight.has_signal or sight.is_signal or sight.instrument.kind != "rate":
        return []
    if sight.instrument.stream is None:
        return []
    stopped = sight.usable & ~sight.ran & sight.inside
    runs = sight.usable & sight.ran & sight.inside
    if int(stopped.sum()) < FROZEN_LEAST or not runs.any():
        return []
    rest = float(np.median(sight.value[stopped]))
    mean = float(np.mean(sight.value[runs]))
    if abs(rest) <= STOPPED_SHARE * abs(mean):
        return []
    return sight.say(
        "zero-shift",
        f"reads {rest:g} {sight.instrument.unit} (median) while its stream stands, "
        f"{100 * rest / mean:.1f} % of its running mean; that time is not counted. Zero the "
        "instrument, under the site's permits.",
        ("while stopped", f"{rest:g} {sight.instrument.unit}"),
    )


def find_resets(sight: Sight, counted: Counted) -> list[Finding]:
    """Find totalisers that were reset, rolled over or stepped back in the day."""
    unit = sight.instrument.unit
    found: list[Finding] = []
    for at, before, after in counted.resets:
        if sight.start < at <= sight.end:
            found += sight.say(
                "totaliser-reset",
                f"fell from {before:g} to {after:g} {unit} at {sight.clock(at)} plant time, which "
                "is no roll-over; what it counted between the two readings is unknown and filled "
                "with the day's mean. Enter the reading before the reset if it was noted.",
                ("before", f"{before:g} {unit}"),
                ("after", f"{after:g} {unit}"),
                severity=Severity.SERIOUS,
            )
    for at, before, after in counted.rollovers:
        if sight.start < at <= sight.end:
            found += sight.say(
                "totaliser-rollover",
                f"rolled over at {sight.instrument.modulus:g} {unit}, {sight.clock(at)} plant "
                f"time: {before:g} to {after:g} {unit}.",
                severity=Severity.NOTE,
            )
    for at, before, after in counted.backs:
        if sight.start < at <= sight.end:
            found += sight.say(
                "totaliser-back",
                f"stepped back from {before:g} to {after:g} {unit} at {sight.clock(at)} plant "
                "time; the difference counts as it is. Check for reverse flow or a resend.",
            )
    return found


def _words(limit: float | None) -> str:
    return "no limit" if limit is None else f"{limit:g}"


SCREENS: tuple[Callable[[Sight], list[Finding]], ...] = (
    find_bad_quality,
    find_no_value,
    find_out_of_range,
    find_future,
    find_late_readings,
    find_duplicates,
    find_gaps,
    find_frozen,
    find_spikes,
    find_zero_while_running,
    find_reading_while_stopped,
    find_clock_change,
)
