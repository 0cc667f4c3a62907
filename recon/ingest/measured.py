"""What ingest hands on: measurements with their evidence, day by day, and what it found."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date
from typing import Literal

from recon.declare.site import Use
from recon.findings import Finding
from recon.reconcile.problem import Draw, Measurement, Problem


@dataclass(frozen=True, kw_only=True)
class Correction:
    """
    What one approved decision did to one measurement, in the measurement's canonical unit.

    Attributes
    ----------
    decision, kind, reason, by : str
        As decided; ``kind`` is ``set aside``, ``corrected reading``, ``override`` or ``held``.
    before, after : float or None
        Value before and after this decision; ``after`` is None where it was set aside, ``before``
        where there was no reading.
    """

    decision: str
    kind: str
    before: float | None
    after: float | None
    reason: str = ""
    by: str = ""


@dataclass(frozen=True, kw_only=True)
class Measured:
    """
    One measurement with where it comes from.

    Attributes
    ----------
    measurement : Measurement
        Its ``period`` is the day's place in the month, 1-based; a stock's boundary is in its
        parts.
    tag : str
        Instrument.
    day : date
        Plant day; for a stock, the day it closes, or the first day with ``boundary = "opening"``.
    stream, node, quantity, basis
        What it is of.
    use : str
        ``compare`` measurements are not in the problem.
    estimated : bool
        Stands in for a value not yet known, by a declared rule.
    stage : str
        Stage of the value that counts; "" where there is one only.
    raw : float or None
        Before the conversion chain [raw_unit]: wet tonnes, pulp volume, ...; and ``moisture``
        [1] where the chain had one.
    coverage : float
        Covered share of running time [-]; 1 for documents.
    evidence : tuple of str
        Natural keys of records, or chunk digests of readings.
    rolled_hours : float
        For a survey: how far it was rolled to the cut [h], signed. Beyond the place's roll limit
        the stock counts as *by difference* in what is signed.
    corrections : tuple of Correction
        Approved decisions that touched it, in the order applied; ``measurement.value`` is what
        the last one left, or what was read where all it did was to set it aside.
    set_aside : bool
        By decision: kept here for the bridge, not in the problem and not in what is signed.
    """

    measurement: Measurement
    tag: str
    day: date
    quantity: str
    basis: Literal["amount", "fraction"]
    use: Use
    stream: str | None = None
    node: str | None = None
    boundary: Literal["", "opening", "closing"] = ""
    estimated: bool = False
    stage: str = ""
    raw: float | None = None
    raw_unit: str = ""
    moisture: float | None = None
    coverage: float = 1.0
    evidence: tuple[str, ...] = ()
    rolled_hours: float = 0.0
    corrections: tuple[Correction, ...] = ()
    set_aside: bool = False


@dataclass(frozen=True, kw_only=True)
class Recipe:
    """
    How a measurement's independent ``u`` was formed: ``hypot(fixed, slope x reference)``.

    Attributes
    ----------
    name, period
        Of the measurement.
    tag : str
        Instrument; all its measurements of a month have one reference.
    fixed : float
        Part that does not depend on the reference [t or 1].
    slope, size : float
        Relative part, and typical size of this reading, per unit of reference [-].
    provisional : bool
        Too few running days are known: ``recon.ingest.build.with_references`` replaces it once by
        the fitted value of a first pass.
    """

    name: str
    period: int
    tag: str
    fixed: float
    slope: float
    size: float
    provisional: bool


@dataclass(frozen=True, kw_only=True)
class IngestedMonth:
    """
    A month to date, ready to be reconciled.

    Attributes
    ----------
    days : tuple of date
        Period p of the problem is ``days[p - 1]``.
    problem : Problem
        Holds the ``fit`` and ``held`` measurements.
    measured : tuple of Measured
        Every measurement, those compared only included.
    findings : tuple of Finding
    not_running : tuple of (date, str)
        Streams that stood all day: amounts zero, assays set aside with a finding.
    recipes : tuple of Recipe
        One a measurement: how its ``u`` came about.
    draws : tuple of Draw or None
        What the effects of ``measured`` index; None where that is ``problem.draws``.
    """

    days: tuple[date, ...]
    problem: Problem
    measured: tuple[Measured, ...]
    findings: tuple[Finding, ...]
    not_running: tuple[tuple[date, str], ...] = ()
    recipes: tuple[Recipe, ...] = ()
    draws: tuple[Draw, ...] | None = None

    @property
    def all_draws(self) -> tuple[Draw, ...]:
        """What the effects of ``measured`` index, those of compared readings included."""
        return self.problem.draws if self.draws is None else self.draws
