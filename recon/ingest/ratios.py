"""Values off from their usual size by a ratio that people and units make: point, do not act."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from recon.findings import Severity
from recon.ingest.uncertainty import DAY

if TYPE_CHECKING:
    from recon.declare.site import Instrument
    from recon.ingest.context import Context
    from recon.ingest.reading import Reading

RATIOS: tuple[tuple[float, str, str], ...] = (
    (10.0, "a decimal place", ""),
    (100.0, "two decimal places, or a fraction for a percentage", ""),
    (1000.0, "three decimal places, or kg for t", ""),
    (1.1023, "short tons for tonnes", "mass"),
    (2.2046, "pounds for kilograms", "mass"),
    (1.016, "long tons for tonnes", "mass"),
    (1.286, "FeO for Fe", "Fe"),
    (1.430, "Fe2O3 for Fe", "Fe"),
    (2.139, "SiO2 for Si", "SiO2"),
    (2.996, "SO4 for S", "S"),
    (2.497, "SO3 for S", "S"),
    (1.998, "SO2 for S", "S"),
    (3.059, "H2SO4 for S", "S"),
    (1.0915, "gas at 25 C for gas at 0 C", "S"),
)
"""Ratio of wrong to right (atomic weights, unit definitions), words, the quantity it befalls."""
ENOUGH = 7
"""Known values needed before a usual size and its spread are believed."""
UNUSUAL = 6.0
"""Robust deviations from the usual size beyond which a value is looked at."""
CLOSE = 2.0
"""Deviations within which a known ratio explains it."""
LEAST_SPREAD = 0.002
"""Smallest relative spread assumed [-]."""
FAR = 1.5
"""A value that no known ratio explains is far outside where it is off by this factor at least."""


@dataclass(frozen=True, kw_only=True)
class Usual:
    """Usual size of an instrument's values and their robust relative spread."""

    size: float
    spread: float


def usual_of(sizes: Sequence[float]) -> Usual | None:
    """
    Find the usual size of positive values.

    Returns
    -------
    Usual or None
        None with fewer than seven. The spread is that of the logarithms: by their median
        absolute deviation, or by the 95 % that lie nearest where tails are heavy.

    Examples
    --------
    >>> found = usual_of([27.4, 27.6, 27.5, 27.3, 27.7, 27.5, 27.4])
    >>> round(found.size, 2), round(found.spread, 3)
    (27.5, 0.005)
    """
    positive = np.array([s for s in sizes if s > 0])
    if len(positive) < ENOUGH:
        return None
    logs = np.log(positive)
    middle = float(np.median(logs))
    off = np.abs(logs - middle)
    spread = max(1.4826 * float(np.median(off)), float(np.quantile(off, 0.95)) / 1.96)
    return Usual(size=float(np.exp(middle)), spread=max(LEAST_SPREAD, spread))


def explain(ratio: float, spread: float, quantity: str, *, wet: float | None = None) -> str | None:
    """
    Name what a ratio of found to usual looks like, or None.

    Parameters
    ----------
    ratio : float
        Found over usual value [-], positive.
    spread : float
        Relative spread of usual values [-].
    quantity : str
        What the value is of; each ratio befalls some quantities only.
    wet : float, optional
        Wet over dry, where the value was dried.

    Examples
    --------
    >>> explain(10.1, 0.01, "Cu")
    'x 10: a decimal place'
    >>> explain(0.907, 0.004, "mass")
    '/ 1.1023: short tons for tonnes'
    >>> explain(1.286, 0.01, "Cu") is None
    True
    """
    off = float(np.log(ratio))
    best: tuple[float, str] | None = None
    dried = [] if wet is None else [(wet, "wet for dry", "")]
    for known, words, befalls in (*RATIOS, *dried):
        if befalls not in ("", quantity) or CLOSE * spread >= 0.5 * np.log(known):
            continue
        for sign, mark in ((1.0, "x"), (-1.0, "/")):
            miss = abs(off - sign * float(np.log(known)))
            if miss <= CLOSE * spread and (best is None or miss < best[0]):
                best = (miss, f"{mark} {known:g}: {words}")
    return best[1] if best else None


def find_wrong_ratios(
    context: Context,
    readings: Iterable[tuple[Instrument, Reading]],
    known: Mapping[str, Sequence[Reading]],
) -> None:
    """
    Look at every reading of the month against the usual size of its instrument's.

    A reading more than six robust deviations from its usual size is ``wrong-ratio`` where a known
    ratio explains it, ``far-outside`` where none does and it is off by half at least.

    Parameters
    ----------
    context : Context
        Takes the findings.
    readings : iterable of (Instrument, Reading)
    known : mapping
        Every reading by tag, history included.
    """
    usuals: dict[str, Usual | None] = {}
    for instrument, reading in readings:
        if reading.estimated or context.period(reading.day) is None:
            continue
        tag = instrument.tag
        if tag not in usuals:
            usuals[tag] = usual_of([_size(instrument, r) for r in known.get(tag, ())])
        usual, size = usuals[tag], _size(instrument, reading)
        if usual is None or size <= 0:
            continue
        ratio = size / usual.size
        if abs(np.log(ratio)) <= UNUSUAL * usual.spread:
            continue
        wet = 1 / (1 - reading.moisture) if reading.moisture else None
        words = explain(ratio, usual.spread, str(instrument.quantity), wet=wet)
        if words is None and not (ratio >= FAR or ratio <= 1 / FAR):
            continue
        _say(context, instrument, reading, ratio, words)


def _say(
    context: Context, instrument: Instrument, reading: Reading, ratio: float, words: str | None
) -> None:
    unit = "t" if instrument.basis == "amount" else "as a fraction"
    document = f", document {reading.document}" if reading.document else ""
    looks = (
        f"That is {words}. Check the unit and basis at the source; correct by decision."
        if words
        else "No usual slip explains it. Check the reading at its source."
    )
    context.find(
        "wrong-ratio" if words else "far-outside",
        instrument.tag,
        f"{instrument.tag}{document}, {reading.day}: {reading.value:.6g} {unit} is {ratio:.4g} "
        f"times its usual size of 30 days. {looks}",
        day=reading.day,
        severity=Severity.SERIOUS if words else Severity.WARNING,
        evidence=(("ratio", f"{ratio:.5g}"), ("looks like", words or "nothing known")),
    )


def _size(instrument: Instrument, reading: Reading) -> float:
    """Size of a reading for a day of running."""
    if instrument.kind in ("rate", "totaliser") and reading.hours > 0:
        return abs(reading.value) * DAY / reading.hours
    return abs(reading.value)
