"""What is to be reconciled: a sequence of flowsheets and everything measured on them."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

from recon.flowsheet.balances import Linear, Row
from recon.flowsheet.network import Flowsheet


class MeasurementKind(StrEnum):
    """What a measurement is of; suspects speak in these words."""

    METER = "meter"
    ASSAY = "assay"
    STOCK = "stock"


@dataclass(frozen=True, kw_only=True)
class Part:
    """
    One term of a measured function: ``share * of(x) / over(x)``, or ``share * of(x)``.

    Parameters
    ----------
    of : Linear
        Numerator, a sum of amounts or stocks [t].
    over : Linear or None
        Denominator [t]; None for an amount.
    share : float
        Weight of this part [-]; 1 but for a sample with declared increments.
    """

    of: Linear
    over: Linear | None = None
    share: float = 1.0


@dataclass(frozen=True, kw_only=True)
class Draw:
    """
    One draw of a shared error source.

    Parameters
    ----------
    source : str
        Name of the source.
    first : int
        First period in which this draw is in force; 1 for one that lasts throughout.
    u : float
        Standard uncertainty of the offset [the source's unit, or - for a relative source].
    """

    source: str
    first: int
    u: float


@dataclass(frozen=True, kw_only=True)
class Effect:
    """
    How one draw enters one reading.

    Parameters
    ----------
    draw : int
        Index into ``Problem.draws``.
    factor : float
        Signed sensitivity: a pure number for a relative source, canonical unit of the reading per
        unit of offset for an absolute one.
    relative : bool
        True: reading = model value x (1 + factor x offset). False: + factor x offset. The offset
        multiplies the model value, never the reading, which is noisy.
    """

    draw: int
    factor: float
    relative: bool


@dataclass(frozen=True, kw_only=True)
class Measurement:
    """
    One measurement, ``value = h(x) (1 + relative offsets) + absolute offsets + e``.

    Parameters
    ----------
    name : str
        Tag or document; (name, period) is unique.
    period : int
        The period it is listed under; the last one of those it covers.
    kind : MeasurementKind
    parts : tuple of Part
        ``h(x)`` is their sum.
    value : float
        Measured value [t or 1].
    u : float or None
        Standard uncertainty of the independent part [same]; None only where held exactly.
    held : bool
        Printed unmoved: estimates meet it exactly, see DESIGN on held figures.
    effects : tuple of Effect
        Shared error sources that enter it.
    unit : str
        Unit for people, and ``unit_factor``: canonical = printed x unit_factor.
    unit_factor : float
    sampler : str or None
        Name of the sample taker; assays of one sampler share its faults.
    typical : float or None
        30-day median [t or 1] where known: scale for plausible fault sizes.
    """

    name: str
    period: int
    kind: MeasurementKind
    parts: tuple[Part, ...]
    value: float
    u: float | None
    held: bool = False
    effects: tuple[Effect, ...] = ()
    unit: str = "t"
    unit_factor: float = 1.0
    sampler: str | None = None
    typical: float | None = None


@dataclass(frozen=True, kw_only=True)
class Figure:
    """
    A ratio of sums of amounts to report, for example a recovery.

    Parameters
    ----------
    name : str
    period : int or None
        Its period, or None for the figure over all of them.
    of : Linear
        Numerator [t].
    over : Linear or None
        Denominator [t]; None reports the sum itself.
    """

    name: str
    period: int | None
    of: Linear
    over: Linear | None = None


@dataclass(frozen=True, kw_only=True)
class Problem:
    """
    Everything one fit is stated from.

    Parameters
    ----------
    flowsheets : tuple of Flowsheet
        One a period, in time order; days may use different versions of a site.
    measurements : tuple of Measurement
    draws : tuple of Draw
        Only those that some measurement uses.
    relations : tuple of Row
        Declared linear relations between amounts.
    figures : tuple of Figure
    """

    flowsheets: tuple[Flowsheet, ...]
    measurements: tuple[Measurement, ...]
    draws: tuple[Draw, ...] = ()
    relations: tuple[Row, ...] = ()
    figures: tuple[Figure, ...] = ()
