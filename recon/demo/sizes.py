"""How large each instrument's independent error is on each day, as the site file declares it.

Declared for one day of running: an amount over ``h`` hours has ``zero`` and ``relative x reference
x sqrt(h / 24)``; a sample's sampling part scales with ``sqrt(24 / h)``, preparation and analysis
are as they are. References are medians of the truth, as those of the service are of readings.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from recon.declare.site import Instrument
from recon.demo.clock import Floats
from recon.demo.shapes import MASS, QUANTITIES
from recon.demo.truth import Truth
from recon.units import unit


@dataclass(frozen=True, kw_only=True)
class Parts:
    """Standard uncertainties of one assay value [its unit]: kept by the sample, new each stage."""

    sampling: float
    preparation: float
    analysis: float


class Sizes:
    """
    Sizes of errors for one truth.

    Parameters
    ----------
    truth : Truth
    """

    def __init__(self, truth: Truth) -> None:
        self._truth = truth
        self._signal = {s.name: s.run_signal for s in truth.site.streams}
        self._hours: dict[str, Floats] = {}
        self._amounts = {s.name: truth.amounts(s.name) for s in truth.site.streams}
        self._u: dict[str, Floats] = {}
        self._usual: dict[str, float] = {}
        self._grades: dict[str, float] = {}

    def amounts(self, stream: str) -> Floats:
        """Give what a stream carried each day, shape (D, 5) [t]."""
        return self._amounts[stream]

    def hours(self, stream: str) -> Floats:
        """Give how long a stream ran each day, shape (D,) [h]; all day without a run signal."""
        if stream not in self._hours:
            grid, signal = self._truth.grid, self._signal[stream]
            hours = grid.day_hours
            if signal is not None:
                on = self._truth.running[signal]
                hours = np.add.reduceat(on.astype(float), grid.first[:-1]) * grid.hours
            self._hours[stream] = hours
        return self._hours[stream]

    def of_amount(self, instrument: Instrument) -> Floats:
        """Give the standard uncertainty of each day's amount, shape (D,) [t]."""
        if instrument.tag not in self._u:
            self._u[instrument.tag] = self._of_amount(instrument)
        return self._u[instrument.tag]

    def usual_relative(self, instrument: Instrument) -> float:
        """Give the usual standard uncertainty of a day's amount, relative to it [-]."""
        if instrument.tag not in self._usual:
            u = self.of_amount(instrument)
            amount = self._amounts[instrument.stream or ""][
                :, QUANTITIES.index(instrument.quantity or "")
            ]
            self._usual[instrument.tag] = float(np.median(u[amount > 0] / amount[amount > 0]))
        return self._usual[instrument.tag]

    def _of_amount(self, instrument: Instrument) -> Floats:
        declared = instrument.uncertainty
        assert declared is not None
        assert instrument.stream is not None
        assert instrument.quantity is not None
        amounts = self._amounts[instrument.stream][:, QUANTITIES.index(instrument.quantity)]
        share = np.ones(len(amounts))
        if instrument.kind in ("rate", "totaliser"):
            share = self.hours(instrument.stream) / 24.0
        moved = amounts > 0.0
        reference = float(np.median(amounts[moved] / share[moved]))
        u = np.hypot(declared.zero, declared.relative * reference * np.sqrt(share))
        return np.where(moved, u, 0.0)

    def of_assay(self, instrument: Instrument, value: float, hours: float) -> Parts:
        """
        Give the parts of a sample's uncertainty.

        Parameters
        ----------
        instrument : Instrument
            An assay of a stream, in a unit of fractions.
        value : float
            Its typical value [unit].
        hours : float
            Running time that the sample speaks of [h].
        """
        declared = instrument.uncertainty
        assert declared is not None
        return Parts(
            sampling=declared.sampling * value * float(np.sqrt(24.0 / hours)),
            preparation=declared.preparation * value,
            analysis=float(np.hypot(declared.zero, declared.analysis * value)),
        )

    def of_stock(self, instrument: Instrument, value: float) -> float:
        """Give the standard uncertainty of a survey [t, or the unit of a fraction]."""
        declared = instrument.uncertainty
        assert declared is not None
        return float(np.hypot(declared.zero, declared.relative * value))

    def grade(self, instrument: Instrument) -> float:
        """Give the typical fraction that an assay of a stream reads [its unit]."""
        if instrument.tag not in self._grades:
            self._grades[instrument.tag] = self._grade(instrument)
        return self._grades[instrument.tag]

    def _grade(self, instrument: Instrument) -> float:
        assert instrument.stream is not None
        assert instrument.quantity is not None
        amounts = self._amounts[instrument.stream]
        moved = amounts[:, MASS] > 0.0
        ratio = amounts[moved, QUANTITIES.index(instrument.quantity)] / amounts[moved, MASS]
        return float(np.median(ratio)) / unit(instrument.unit).factor
