"""What a site declares: places, streams, instruments, and how far each can be trusted.

These are the types that every room above reads. ``recon.declare.site_file`` fills them from TOML
and lists every fault; nothing else builds a site from a file. Keys in the file are the field names
here, but a stream's ends are written ``from`` and ``to``.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import date, time
from typing import Literal

Use = Literal["fit", "held", "compare"]
Role = Literal["receipt", "product", "discard", "internal"]
InstrumentKind = Literal["rate", "totaliser", "tickets", "assay", "survey"]
StepKind = Literal["moisture", "slurry", "factor", "times", "density"]


@dataclass(frozen=True, kw_only=True)
class Basis:
    """Where an uncertainty comes from."""

    kind: Literal["planning value", "certificate", "duplicates", "history"] = "planning value"
    document: str = ""
    day: date | None = None


@dataclass(frozen=True, kw_only=True)
class Section:
    """A part of the site with a balance of its own, for example the concentrator."""

    name: str
    title: str = ""


@dataclass(frozen=True, kw_only=True)
class SiteNode:
    """
    A unit or stock place.

    Parameters
    ----------
    name, section, title : str
    conserves : tuple of str
        Quantities for which a balance is stated.
    stock : bool
        Holds a stock that is surveyed or estimated at day cuts.
    same_composition, well_mixed : bool
        Streams leaving share one composition; the stock is well mixed.
    bounds : dict
        Lowest and highest stock of a quantity [t].
    roll_limit_days : float
        A survey may be rolled at most so far to a cut [d].
    """

    name: str
    section: str
    conserves: tuple[str, ...]
    title: str = ""
    stock: bool = False
    same_composition: bool = False
    well_mixed: bool = False
    bounds: dict[str, tuple[float, float]] = field(default_factory=dict)
    roll_limit_days: float = 1.0


@dataclass(frozen=True, kw_only=True)
class SiteStream:
    """
    A flow; a missing end is the site boundary.

    Parameters
    ----------
    name, title : str
    source, target : str or None
        ``from`` and ``to`` in the file.
    carries : tuple of str
    role : str
        receipt, product, discard for boundary streams; internal for the others.
    run_signal : str or None
        Rate tag that is 0 while the stream stands and 1 while it runs.
    """

    name: str
    source: str | None = None
    target: str | None = None
    carries: tuple[str, ...]
    title: str = ""
    role: Role = "internal"
    run_signal: str | None = None


@dataclass(frozen=True, kw_only=True)
class ErrorSource:
    """
    A shared error: one offset enters many readings.

    Parameters
    ----------
    name : str
    u : float
        Standard uncertainty of the offset [- where relative, else its unit].
    relative : bool
        Multiplies the model value (True) or is added to it (False).
    lasts : str
        How long one draw lasts: a day, between logged calibrations, throughout.
    calibrated_by : str or None
        Tag whose logged calibrations end a draw, for ``lasts = "calibration"``.
    """

    name: str
    u: float
    relative: bool
    lasts: Literal["day", "calibration", "throughout"] = "throughout"
    calibrated_by: str | None = None
    basis: Basis = Basis()


@dataclass(frozen=True, kw_only=True)
class SharedBy:
    """
    How a shared error source enters an instrument's readings.

    ``factor`` is a pure number for a relative source; for an absolute one it is in the
    instrument's unit per unit of offset. ``recon.ingest`` adds the sources that enter through a
    conversion chain (moisture, density, strength) with their own signed sensitivities.
    """

    source: str
    factor: float = 1.0


@dataclass(frozen=True, kw_only=True)
class Step:
    """
    One step of a conversion chain, applied in the order written.

    Parameters
    ----------
    by : str
        ``moisture``: wet x (1 - moisture) -> dry. ``slurry``: pulp volume [m3] with pulp density
        -> dry solids [t], volume x (density - 1) x s / (s - 1), s = ``value``, the density of
        solids [t/m3]. ``times``: multiplied by another instrument's value (strength, g/L, SO2
        fraction). ``density``: volume [m3] x density [t/m3]. ``factor``: x ``value``.
    tag : str or None
        Instrument that gives the second value; a rate tag is multiplied reading by reading, an
        assay as the sample in force, a survey item as found in the same survey document.
    value : float or None
        Constant of the step.
    """

    by: StepKind
    tag: str | None = None
    value: float | None = None


@dataclass(frozen=True, kw_only=True)
class Uncertainty:
    """
    Independent standard uncertainty, ``u^2 = zero^2 + (relative x reference)^2``.

    Declared for one day of running, scaling as 1/sqrt(duration). For an assay, ``relative`` is
    split in ``sampling``, ``preparation`` and ``analysis``, which add in squares to it.

    Parameters
    ----------
    zero : float
        Part that does not fall with the reading: of an amount or stock [t of its quantity, for one
        day of running]; of a fraction, and of an instrument that only serves others [its unit].
    relative, sampling, preparation, analysis : float
        Relative parts [-].
    """

    zero: float
    relative: float = 0.0
    sampling: float = 0.0
    preparation: float = 0.0
    analysis: float = 0.0


@dataclass(frozen=True, kw_only=True)
class EstimateRule:
    """
    What stands in while a value is not yet known; the measurement is then marked *estimated*.

    Parameters
    ----------
    rule : str
        ``last``: the last known value. ``mean``: mean of the last ``days`` days.
    days : int
    """

    rule: Literal["last", "mean"] = "last"
    days: int = 7


@dataclass(frozen=True, kw_only=True)
class Instrument:
    """
    Anything that gives numbers: a tag, a scale's tickets, a sample point's analyte, a survey.

    Parameters
    ----------
    tag : str
        Exactly as in the plant; unique. For an assay, "<sample point> <analyte>".
    kind : str
        rate (integrated over running time), totaliser, tickets, assay, survey.
    stream, node : str or None
        What it measures; both None for one that only serves others' conversion chains.
    quantity : str or None
        Quantity of the stream or stock; None with the above.
    basis : str
        ``amount`` or ``fraction``.
    unit : str
        Unit of its raw values, of ``recon.units``.
    chain : tuple of Step
        From raw values to the amount of the quantity.
    point, analyte : str or None
        For assays: sample point and analyte in the laboratory's rows. For surveys ``analyte`` is
        the item surveyed (mass, volume, density, moisture, Cu, ...).
    stages : tuple of str
        Stages of a value, lowest first; only the highest known counts, stages are never averaged.
    interpolation : str
        ``step`` or ``linear`` between readings of a rate.
    low, high : float or None
        Physical range of a raw value [unit].
    modulus : float or None
        Where a totaliser rolls over [unit].
    use : str
        ``fit``, ``held`` or ``compare`` (a stack monitor is compared only).
    uncertainty : Uncertainty or None
        None for one that only serves others.
    shared : tuple of SharedBy
    sampler : str or None
        Name of the sample taker whose faults its assays share.
    estimate : EstimateRule or None
        Without a rule a missing value gives no number.
    service : tuple of str
        Other duties: protective, nuclear, molten metal, acid, custody, statutory.
    basis_of_u : Basis
    """

    tag: str
    kind: InstrumentKind
    unit: str
    stream: str | None = None
    node: str | None = None
    quantity: str | None = None
    basis: Literal["amount", "fraction"] = "amount"
    chain: tuple[Step, ...] = ()
    point: str | None = None
    analyte: str | None = None
    stages: tuple[str, ...] = ("final",)
    interpolation: Literal["step", "linear"] = "step"
    low: float | None = None
    high: float | None = None
    modulus: float | None = None
    use: Use = "fit"
    uncertainty: Uncertainty | None = None
    shared: tuple[SharedBy, ...] = ()
    sampler: str | None = None
    estimate: EstimateRule | None = None
    service: tuple[str, ...] = ()
    basis_of_u: Basis = Basis()
    title: str = ""


@dataclass(frozen=True, kw_only=True)
class Term:
    """An amount of a stream in a relation or figure."""

    stream: str
    quantity: str
    factor: float = 1.0


@dataclass(frozen=True, kw_only=True)
class SiteRelation:
    """A linear relation between amounts, stated each day."""

    name: str
    terms: tuple[Term, ...]
    equals: float = 0.0


@dataclass(frozen=True, kw_only=True)
class SiteFigure:
    """A ratio of sums of amounts reported for day, month and year, for example a recovery."""

    name: str
    of: tuple[Term, ...]
    over: tuple[Term, ...]
    unit: str = "%"


@dataclass(frozen=True, kw_only=True)
class PlausibilityWindow:
    """A ratio of day amounts expected between two values; outside it is a finding."""

    name: str
    of: tuple[Term, ...]
    over: tuple[Term, ...]
    low: float
    high: float


@dataclass(frozen=True, kw_only=True)
class Shift:
    """A shift's name and start in plant time."""

    name: str
    start: time


@dataclass(frozen=True, kw_only=True)
class SourceQuery:
    """
    Where one kind of row comes from.

    Parameters
    ----------
    kind : str
        readings, assays, tickets, surveys, events.
    query : str or None
        File of SQL in the site's ``sql`` folder; see ``sql/queries`` for the column contract.
    sheet : str or None
        CSV or XLSX file, or folder of them, instead of a query.
    """

    kind: Literal["readings", "assays", "tickets", "surveys", "events"]
    query: str | None = None
    sheet: str | None = None


@dataclass(frozen=True, kw_only=True)
class Site:
    """
    One version of a site.

    Parameters
    ----------
    name : str
    zone : str
        IANA time zone of the plant.
    valid_from : date
        First plant day of this version.
    day_cut : time
        Plant time at which a day begins; a month begins with its first day.
    quantities : tuple of str
        ``mass`` and at least Cu, Fe, S, SiO2.
    settling_hours : float
        A day is due so long after its end [h].
    alarm_level : float
        Plant-wide false-alarm rate [-].
    """

    name: str
    zone: str
    valid_from: date
    day_cut: time
    quantities: tuple[str, ...]
    sections: tuple[Section, ...]
    nodes: tuple[SiteNode, ...]
    streams: tuple[SiteStream, ...]
    instruments: tuple[Instrument, ...]
    sources: tuple[ErrorSource, ...] = ()
    relations: tuple[SiteRelation, ...] = ()
    figures: tuple[SiteFigure, ...] = ()
    windows: tuple[PlausibilityWindow, ...] = ()
    shifts: tuple[Shift, ...] = ()
    queries: tuple[SourceQuery, ...] = ()
    settling_hours: float = 30.0
    alarm_level: float = 0.05
    title: str = ""
