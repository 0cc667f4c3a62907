"""Which faults are planted in the invented site: what, where, since when, how large.

Each is documented here and nowhere else; ``--faults off`` plants none. Days count from the first
day of the simulation, hours from the day's cut.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

Kind = Literal[
    "span step",
    "drift",
    "stuck",
    "swapped samples",
    "decimal slip",
    "wrong basis",
    "duplicate ticket",
    "totaliser reset",
    "dropout",
    "gauge error",
    "survey error",
    "sampler plugged",
    "leak",
]


@dataclass(frozen=True, kw_only=True)
class Fault:
    """
    One planted fault.

    Attributes
    ----------
    name : str
        By which it is switched on.
    kind : str
    tag : str
        Instrument, sample point, stock place or, for a leak, node.
    other : str
        Second point of a swap; analyte or item where one alone is wrong; "" else.
    day : int
        Index of the first day.
    hour : float
        Hours after that day's cut.
    hours : float or None
        How long; None to the end.
    size : float
        In ``unit``.
    unit : str
    text : str
        What happened, for people.
    default : bool
        Planted by ``on``.
    """

    name: str
    kind: Kind
    tag: str
    day: int
    text: str
    other: str = ""
    hour: float = 0.0
    hours: float | None = None
    size: float = 0.0
    unit: str = ""
    default: bool = True


FAULTS: tuple[Fault, ...] = (
    Fault(
        name="concentrate-flow-dropout",
        kind="dropout",
        tag="FT-226",
        day=5,
        hour=3.0,
        hours=5.0,
        text="Final concentrate flow: no value for five hours, some rows marked bad.",
    ),
    Fault(
        name="tails-decimal-slip",
        kind="decimal slip",
        tag="plant tails",
        other="Cu",
        day=8,
        hour=1.0,
        hours=6.0,
        size=0.1,
        unit="x",
        text="Plant tails Cu of the morning shift keyed in with the decimal one place too low.",
    ),
    Fault(
        name="truck-entered-twice",
        kind="duplicate ticket",
        tag="WB-01",
        day=12,
        hours=24.0,
        size=1.0,
        unit="ticket",
        text="A truck of supplier A entered again 17 minutes later under a new number.",
    ),
    Fault(
        name="slags-swapped",
        kind="swapped samples",
        tag="furnace slag",
        other="converter slag",
        day=15,
        hours=24.0,
        text="The day's furnace slag and converter slag samples changed places.",
    ),
    Fault(
        name="mill-belt-span",
        kind="span step",
        tag="WT-210",
        day=18,
        size=0.025,
        unit="relative",
        text="Mill feed belt reads 2.5 % high since its calibration that morning.",
    ),
    Fault(
        name="charge-stuck",
        kind="stuck",
        tag="WT-310",
        day=22,
        hour=1.0,
        hours=13.0,
        text="Furnace charge rate frozen through the planned stop.",
    ),
    Fault(
        name="acid-totaliser-reset",
        kind="totaliser reset",
        tag="FQ-530",
        day=27,
        hour=8.0,
        text="Acid totaliser set to zero when its electronics were replaced.",
    ),
    Fault(
        name="shed-survey",
        kind="survey error",
        tag="shed",
        other="volume",
        day=31,
        hour=-6.0,
        hours=12.0,
        size=-0.06,
        unit="relative",
        text="Shed volume at the end of the first month found 6 % low: a toe left out.",
    ),
    Fault(
        name="slag-iron-as-oxide",
        kind="wrong basis",
        tag="furnace slag",
        other="Fe",
        day=33,
        hours=96.0,
        size=1.286,
        unit="x",
        text="Furnace slag iron reported as FeO for four days.",
    ),
    Fault(
        name="tails-gauge",
        kind="gauge error",
        tag="DT-222",
        day=36,
        hour=4.0,
        size=0.02,
        unit="t/m3",
        text="Rougher tails density gauge reads 0.02 t/m3 high since a pipe section was changed.",
    ),
    Fault(
        name="gas-analyser-drift",
        kind="drift",
        tag="AT-520",
        day=38,
        size=-0.002,
        unit="relative a day",
        text="SO2 analyser before the acid plant drifts down 0.2 % a day.",
    ),
    Fault(
        name="tails-sampler-night",
        kind="sampler plugged",
        tag="plant tails",
        day=42,
        hours=240.0,
        size=-0.12,
        unit="relative",
        text="Tails sampler plugs on night shifts: Cu and S 12 % low, Fe half of that.",
    ),
    Fault(
        name="launder-spill",
        kind="leak",
        tag="cleaners",
        day=46,
        size=1.8,
        unit="t/h",
        text="Final concentrate spills from a launder, 1.8 t/h while the mill runs.",
    ),
    Fault(
        name="copper-taken",
        kind="leak",
        tag="shed",
        day=10,
        hours=240.0,
        size=150.0 / 0.27 / 240.0,
        unit="t/h",
        text="Concentrate with 150 t of copper leaves the shed unrecorded within ten days.",
        default=False,
    ),
)


def chosen(faults: str | Sequence[str]) -> tuple[Fault, ...]:
    """
    Pick faults by ``on``, ``off``, a comma-separated list of names, or names.

    Raises
    ------
    ValueError
        A name is unknown; the message lists those known.
    """
    if faults == "on":
        return tuple(f for f in FAULTS if f.default)
    if faults == "off":
        return ()
    names = [n.strip() for n in faults.split(",")] if isinstance(faults, str) else list(faults)
    known = {f.name for f in FAULTS}
    unknown = [n for n in names if n not in known]
    if unknown:
        raise ValueError(
            f"faults: unknown {', '.join(map(repr, unknown))}. Write on, off, or names of "
            f"{', '.join(sorted(known))}."
        )
    return tuple(f for f in FAULTS if f.name in names)
