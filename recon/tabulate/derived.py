"""A number worked out from readings that remembers them, so that its uncertainty is joint.

Arithmetic carries first derivatives to each reading. Two numbers that rest on one reading, or on
readings with one calibration, then have the covariance that follows, and a density common to an
opening and a closing survey cancels in their difference as far as the stocks are alike (first
order propagation with correlation terms, JCGM 100:2008, 5.2.2).
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from recon.reconcile.problem import Draw, Measurement

    Vector = NDArray[np.float64]


@dataclass(frozen=True)
class Derived:
    """
    A value and its slopes to readings.

    Attributes
    ----------
    value : float
    slopes : Mapping
        Derivative to each reading, by its place in ``Readings``.
    """

    value: float
    slopes: Mapping[int, float]

    def __mul__(self, other: Derived | float) -> Derived:
        """Multiply by another derived number or an exact one."""
        if isinstance(other, Derived):
            slopes = {i: s * other.value for i, s in self.slopes.items()}
            for i, s in other.slopes.items():
                slopes[i] = slopes.get(i, 0.0) + s * self.value
            return Derived(self.value * other.value, slopes)
        return Derived(self.value * other, {i: s * other for i, s in self.slopes.items()})

    def __truediv__(self, other: Derived) -> Derived:
        """Divide by another derived number, which is not zero."""
        ratio = self.value / other.value
        slopes = {i: s / other.value for i, s in self.slopes.items()}
        for i, s in other.slopes.items():
            slopes[i] = slopes.get(i, 0.0) - ratio * s / other.value
        return Derived(ratio, slopes)

    def __add__(self, other: Derived) -> Derived:
        """Add another derived number."""
        return combined([(1.0, self), (1.0, other)])

    def __sub__(self, other: Derived) -> Derived:
        """Subtract another derived number."""
        return combined([(1.0, self), (-1.0, other)])


def exact(value: float) -> Derived:
    """Make a number that rests on no reading."""
    return Derived(value, {})


def combined(terms: Iterable[tuple[float, Derived]]) -> Derived:
    """Give the signed sum of many derived numbers."""
    total, slopes = 0.0, dict[int, float]()
    for sign, term in terms:
        total += sign * term.value
        for i, s in term.slopes.items():
            slopes[i] = slopes.get(i, 0.0) + sign * s
    return Derived(total, slopes)


@dataclass(frozen=True, kw_only=True)
class Spread:
    """
    What the variance of a number is made of.

    Attributes
    ----------
    own : float
        Variance from the independent parts of readings [unit squared].
    draws : ndarray
        Signed contribution of each draw of a shared source, shape (g,) [unit].
    """

    own: float
    draws: Vector

    @property
    def u(self) -> float:
        """Standard uncertainty [unit]."""
        return float(np.sqrt(self.own + float(self.draws @ self.draws)))


@dataclass(frozen=True, kw_only=True)
class Readings:
    """
    The uncertainties of all readings of a month.

    Attributes
    ----------
    u : ndarray
        Independent standard uncertainty, shape (m,) [t or 1]; 0 for one that is exact.
    effects : tuple of tuple of (int, float)
        For each reading its draws, with the signed change of the reading per standard
        uncertainty of the draw. A relative source is scaled by the reading itself here: nothing
        in this chain uses fitted values.
    draws : tuple of Draw
    """

    u: Vector
    effects: tuple[tuple[tuple[int, float], ...], ...]
    draws: tuple[Draw, ...]

    def spread(self, number: Derived) -> Spread:
        """Split the variance of a number over readings' own parts and draws."""
        draws = np.zeros(len(self.draws))
        own = 0.0
        for i, slope in number.slopes.items():
            own += (slope * float(self.u[i])) ** 2
            for draw, change in self.effects[i]:
                draws[draw] += slope * change
        return Spread(own=own, draws=draws)

    def uncertainty(self, number: Derived) -> float:
        """Give the standard uncertainty of a number [its unit]."""
        return self.spread(number).u


def readings_of(
    measurements: Iterable[Measurement], draws: tuple[Draw, ...], extra: Iterable[float] = ()
) -> Readings:
    """
    Collect the uncertainties of measurements.

    Parameters
    ----------
    measurements : iterable of Measurement
        Their effects index ``draws``.
    draws : tuple of Draw
    extra : iterable of float
        Standard uncertainties of further, independent readings, placed after the measurements.
    """
    u: list[float] = []
    effects: list[tuple[tuple[int, float], ...]] = []
    for m in measurements:
        u.append(m.u or 0.0)
        effects.append(
            tuple(
                (e.draw, e.factor * draws[e.draw].u * (m.value if e.relative else 1.0))
                for e in m.effects
            )
        )
    for value in extra:
        u.append(value)
        effects.append(())
    return Readings(u=np.array(u, dtype=np.float64), effects=tuple(effects), draws=draws)
