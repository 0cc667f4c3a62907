"""What looks wrong in the times of one tag's readings: gaps, doubles, clocks; none is changed."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from recon.findings import Finding, Severity
from recon.ingest.pieces import HOUR

if TYPE_CHECKING:
    from recon.ingest.sight import Sight

LATE_HOURS = 48.0


def find_future(sight: Sight) -> list[Finding]:
    """Find readings that were known before they were true: a clock is wrong; they are set aside."""
    ahead = sight.inside & (sight.at > sight.known_at)
    if not ahead.any():
        return []
    most = float(np.max((sight.at - sight.known_at)[ahead])) / HOUR
    return sight.say(
        "future-reading",
        f"{int(ahead.sum())} readings carry a time up to {most:.2f} h after they became known; "
        "they are set aside. Compare the clocks and time zones of source and tag.",
        ("first at", sight.clock(int(sight.at[ahead][0]))),
        severity=Severity.SERIOUS,
    )


def find_late_readings(sight: Sight) -> list[Finding]:
    """Find readings that became known long after they were true (backfilled)."""
    late = sight.inside & (sight.known_at - sight.at > LATE_HOURS * HOUR)
    if not late.any():
        return []
    most = float(np.max((sight.known_at - sight.at)[late])) / HOUR
    return sight.say(
        "late",
        f"{int(late.sum())} of {int(sight.inside.sum())} readings became known up to {most:.0f} h "
        f"after they were true (limit {LATE_HOURS:g} h).",
        severity=Severity.NOTE,
    )


def find_duplicates(sight: Sight) -> list[Finding]:
    """Find readings at one and the same instant: the last of each counts."""
    same = np.flatnonzero(np.diff(sight.at) == 0)
    if not len(same):
        return []
    differ = int(np.sum(sight.value[same] != sight.value[same + 1]))
    return sight.say(
        "duplicate-reading",
        f"{len(same)} instants have more than one reading, {differ} of them with another value; "
        "the last counts. A clock put back, or rows written twice, look like this.",
        ("first at", sight.clock(int(sight.at[same[0]]))),
    )


def find_gaps(sight: Sight) -> list[Finding]:
    """Find running time without a usable value."""
    if sight.is_signal or not len(sight.running.begin):
        return []
    begin = np.concatenate([[sight.start], sight.known.end])
    end = np.concatenate([sight.known.begin, [sight.end]])
    long = end - begin > max(2 * sight.interval, HOUR // 12)
    spans = [
        (max(b, int(rb)), min(e, int(re)))
        for b, e in zip(begin[long].tolist(), end[long].tolist(), strict=True)
        for rb, re in zip(sight.running.begin, sight.running.end, strict=True)
        if min(e, int(re)) > max(b, int(rb))
    ]
    if not spans:
        return []
    longest = max(spans, key=lambda s: s[1] - s[0])
    whole = sum(e - b for b, e in spans) / HOUR
    return sight.say(
        "gap",
        f"no usable reading for {whole:.1f} h of running time, longest from "
        f"{sight.clock(longest[0])} to {sight.clock(longest[1])} plant time.",
        ("gaps", str(len(spans))),
        ("hours", f"{whole:.2f}"),
    )


def find_clock_change(sight: Sight) -> list[Finding]:
    """Find, on a day of 23 or 25 h, an hour that is missing or told twice: booked as 24 h."""
    hours = (sight.end - sight.start) / HOUR
    if hours == 24.0 or sight.is_signal:
        return []
    at = sight.at[sight.inside]
    interval = sight.interval
    if not interval or interval > HOUR:
        return []
    expected, count = hours * HOUR / interval, len(at)
    booked = 24.0 * HOUR / interval
    doubled = int(np.sum(np.diff(at) == 0)) * interval / HOUR
    if abs(count - booked) > 0.2 * HOUR / interval or abs(count - expected) < abs(count - booked):
        return []
    return sight.say(
        "clock-change",
        f"a day of {hours:g} h at the clock change has {count} readings, as many as a day of 24 h "
        f"({expected:.0f} expected{f', {doubled:.1f} h told twice' if doubled else ''}). The "
        "source seems to write plant time; let it write UTC.",
        ("readings", str(count)),
        ("expected", f"{expected:.0f}"),
    )
