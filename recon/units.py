"""Which units exist, what kind each is, and the exact factor to the one used inside.

The table is closed on purpose: a general units library does not know wet from dry tonnes, reads
``kt`` as knots, and would let a percentage be added to a mass fraction. Inside, every kind has one
canonical unit; conversion happens once, at the edge. The pound and the troy ounce are exact by
definition (international yard and pound agreement of 1959); the short and long ton follow from
the pound.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

from recon.errors import UnknownUnitError, WrongUnitKindError

POUND_T = 0.45359237e-3
TROY_OUNCE_T = 31.1034768e-6


class Kind(StrEnum):
    """Kinds of quantity; the value is the word used in messages."""

    MASS = "mass"
    FRACTION = "fraction"
    VOLUME = "volume"
    DENSITY = "density"
    MASS_FLOW = "mass flow"
    VOLUME_FLOW = "volume flow"
    DURATION = "duration"
    COUNT = "count"
    CHARGE = "electric charge"
    CURRENT = "electric current"


CANONICAL = {
    Kind.MASS: "t",
    Kind.FRACTION: "1",
    Kind.VOLUME: "m3",
    Kind.DENSITY: "t/m3",
    Kind.MASS_FLOW: "t/h",
    Kind.VOLUME_FLOW: "m3/h",
    Kind.DURATION: "h",
    Kind.COUNT: "pieces",
    Kind.CHARGE: "kA.h",
    Kind.CURRENT: "kA",
}


@dataclass(frozen=True, kw_only=True)
class Unit:
    """One unit: its kind, its factor to the canonical unit, and decimals for print."""

    name: str
    kind: Kind
    factor: float
    decimals: int = 3


def _table(*rows: tuple[str, Kind, float, int]) -> dict[str, Unit]:
    return {n: Unit(name=n, kind=k, factor=f, decimals=d) for n, k, f, d in rows}


UNITS: dict[str, Unit] = _table(
    ("t", Kind.MASS, 1.0, 3),
    ("kt", Kind.MASS, 1000.0, 4),
    ("kg", Kind.MASS, 1e-3, 1),
    ("g", Kind.MASS, 1e-6, 0),
    ("lb", Kind.MASS, POUND_T, 0),
    ("oz_tr", Kind.MASS, TROY_OUNCE_T, 1),
    ("short_ton", Kind.MASS, 2000 * POUND_T, 3),
    ("long_ton", Kind.MASS, 2240 * POUND_T, 3),
    ("1", Kind.FRACTION, 1.0, 6),
    ("%", Kind.FRACTION, 1e-2, 3),
    ("g/t", Kind.FRACTION, 1e-6, 2),
    ("ppm", Kind.FRACTION, 1e-6, 1),
    ("kg/t", Kind.FRACTION, 1e-3, 3),
    ("m3", Kind.VOLUME, 1.0, 1),
    ("L", Kind.VOLUME, 1e-3, 0),
    ("kNm3", Kind.VOLUME, 1e3, 2),
    ("Nm3", Kind.VOLUME, 1.0, 0),
    ("t/m3", Kind.DENSITY, 1.0, 4),
    ("kg/m3", Kind.DENSITY, 1e-3, 1),
    ("g/cm3", Kind.DENSITY, 1.0, 4),
    ("g/L", Kind.DENSITY, 1e-3, 2),
    ("mg/L", Kind.DENSITY, 1e-6, 1),
    ("mg/Nm3", Kind.DENSITY, 1e-9, 1),
    ("t/h", Kind.MASS_FLOW, 1.0, 1),
    ("t/d", Kind.MASS_FLOW, 1 / 24, 1),
    ("kg/h", Kind.MASS_FLOW, 1e-3, 0),
    ("kg/s", Kind.MASS_FLOW, 3.6, 2),
    ("short_ton/h", Kind.MASS_FLOW, 2000 * POUND_T, 1),
    ("m3/h", Kind.VOLUME_FLOW, 1.0, 1),
    ("m3/d", Kind.VOLUME_FLOW, 1 / 24, 1),
    ("m3/s", Kind.VOLUME_FLOW, 3600.0, 4),
    ("L/s", Kind.VOLUME_FLOW, 3.6, 1),
    ("L/min", Kind.VOLUME_FLOW, 0.06, 1),
    ("Nm3/h", Kind.VOLUME_FLOW, 1.0, 0),
    ("kNm3/h", Kind.VOLUME_FLOW, 1e3, 2),
    ("h", Kind.DURATION, 1.0, 2),
    ("min", Kind.DURATION, 1 / 60, 1),
    ("s", Kind.DURATION, 1 / 3600, 0),
    ("d", Kind.DURATION, 24.0, 2),
    ("pieces", Kind.COUNT, 1.0, 0),
    ("kA.h", Kind.CHARGE, 1.0, 1),
    ("kA", Kind.CURRENT, 1.0, 2),
    ("A", Kind.CURRENT, 1e-3, 0),
)


def unit(name: str) -> Unit:
    """
    Look a unit up by its exact name.

    Raises
    ------
    UnknownUnitError
        The name is not in the table; the message lists the known ones.

    Examples
    --------
    >>> unit("g/t").factor
    1e-06
    """
    try:
        return UNITS[name]
    except KeyError:
        raise UnknownUnitError(name, sorted(UNITS)) from None


def factor(name: str, kind: Kind) -> float:
    """
    Give the factor from a unit to the canonical unit of its kind.

    Parameters
    ----------
    name : str
        Unit as written in a file.
    kind : Kind
        The kind that is expected where the unit stands.

    Raises
    ------
    UnknownUnitError, WrongUnitKindError

    Examples
    --------
    >>> 38.5 * factor("%", Kind.FRACTION)
    0.385
    """
    found = unit(name)
    if found.kind is not kind:
        raise WrongUnitKindError(name, found.kind, kind)
    return found.factor
