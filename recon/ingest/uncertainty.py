"""How sure a reading is: a constant of the fit, from a reference that is not the reading itself.

``u^2 = zero^2 + (relative x reference)^2``, where the reference is the median of the instrument's
running days known at the cut (30 days back from the last day). Where too few days are known the
reading's own size stands in, provisionally, until ``with_references`` freezes the fitted value of a
first pass. Declared for one day of running; the relative part of an amount that ran ``h`` hours is
``relative x sqrt(24 / h)``, a sample's sampling part likewise.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import timedelta
from typing import TYPE_CHECKING

import numpy as np

from recon.ingest.laboratory import canonical

if TYPE_CHECKING:
    from collections.abc import Iterable
    from datetime import date

    from recon.declare.site import Instrument
    from recon.ingest.reading import Reading

WINDOW = timedelta(days=30)
ENOUGH = 5
"""Known running days a median needs before it is a reference."""
DAY = 24.0


@dataclass(frozen=True, kw_only=True)
class Reference:
    """
    Typical size of an instrument's value.

    Attributes
    ----------
    value : float
        For an amount of a stream, of one day of running (24 h) [t]; else of the value [t or 1].
    provisional : bool
        Too few days were known.
    """

    value: float
    provisional: bool


def reference_of(
    instrument: Instrument, readings: Iterable[Reading], last: date
) -> Reference | None:
    """
    Find an instrument's reference among its readings.

    Parameters
    ----------
    instrument : Instrument
    readings : iterable of Reading
        Known and not estimated, set aside or rolled; running days only.
    last : date
        Last day computed; the window is the 30 days up to it.

    Returns
    -------
    Reference or None
        None where there is no reading at all.
    """
    sizes = [
        abs(r.value) * _per_day(instrument, r)
        for r in readings
        if last - WINDOW < r.day <= last and r.hours > 0 and not (r.estimated or r.set_aside)
    ]
    if not sizes:
        return None
    return Reference(value=float(np.median(sizes)), provisional=len(sizes) < ENOUGH)


@dataclass(frozen=True, kw_only=True)
class Spread:
    """
    Independent standard uncertainty as a function of the reference, ``hypot(fixed, slope x ref)``.

    Attributes
    ----------
    fixed : float
        Zero, gap, roll and rule [t or 1].
    slope : float
        Relative part for this reading's duration, per unit of ``reference`` [-].
    size : float
        Typical size of this reading per unit of reference [-]: running hours / 24 of an amount.
    """

    fixed: float
    slope: float
    size: float

    def u(self, reference: float) -> float:
        """Give the standard uncertainty at a reference."""
        return float(np.hypot(self.fixed, self.slope * reference))


def spread_of(
    instrument: Instrument, reading: Reading, *, folded: float = 0.0, folded_fixed: float = 0.0
) -> Spread:
    """
    State a reading's independent uncertainty.

    Parameters
    ----------
    instrument : Instrument
        With a declared uncertainty.
    reading : Reading
    folded, folded_fixed : float
        Standard uncertainty from inputs that no other reading uses, relative [-] and absolute.
    """
    size = 1.0 / _per_day(instrument, reading)
    extra = float(np.linalg.norm([reading.gap, reading.roll_u, reading.estimate_u, folded_fixed]))
    if reading.estimate_u > 0:
        return Spread(fixed=extra, slope=folded * size, size=size)
    declared = instrument.uncertainty
    assert declared is not None
    if instrument.basis == "fraction":
        zero = declared.zero * canonical(instrument)
        longer = DAY / reading.hours if instrument.kind == "assay" and reading.hours else 1.0
    else:
        zero, longer = declared.zero, 1.0 / size
    relative = (
        (declared.relative**2 + declared.sampling**2) * longer
        + declared.preparation**2
        + declared.analysis**2
        + folded**2
    )
    return Spread(
        fixed=float(np.hypot(zero, extra)), slope=float(np.sqrt(relative)) * size, size=size
    )


def _per_day(instrument: Instrument, reading: Reading) -> float:
    """Values of one day of running per value of this reading."""
    metered = instrument.kind in ("rate", "totaliser") and reading.hours > 0
    return DAY / reading.hours if metered else 1.0
