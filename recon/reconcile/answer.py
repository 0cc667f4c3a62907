"""What a fit says: estimates, moved readings, offsets and figures, each with how sure it is."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from recon.flowsheet.balances import Unknown

if TYPE_CHECKING:
    from recon.findings import NotApplicable, Statistic
    from recon.reconcile.accept import Acceptance
    from recon.reconcile.linearise import Local
    from recon.reconcile.problem import Draw, Measurement
    from recon.reconcile.solver import Sensitivities, Solution
    from recon.reconcile.state import State


@dataclass(frozen=True, kw_only=True)
class Estimate:
    """
    One unknown, as an amount or as a fraction of its dry mass.

    Attributes
    ----------
    unknown : Amount or Stock
    fraction : bool
    value, u : float or None
        Estimate and standard uncertainty [t or 1]; None where it is not determined.
    determined : bool
    at_bound : bool
        A bound holds it; its uncertainty is stated as if the bound were not there.
    reason : str
        Why there is no value; empty where there is one.
    """

    unknown: Unknown
    fraction: bool
    value: float | None
    u: float | None
    determined: bool
    at_bound: bool
    reason: str = ""


@dataclass(frozen=True, kw_only=True)
class Reconciled:
    """
    One measurement and what the fit made of it, in canonical units.

    Attributes
    ----------
    measurement : Measurement
    u : float or None
        Standard uncertainty of the reading, shared sources included.
    reconciled : float or None
        The model value without offsets; None where a ratio stands.
    adjustment : float or None
        Reconciled less measured.
    standardised : float or None
        Residual of the independent part by its own standard deviation, positive = reads high;
        None where nothing checks the reading.
    redundant : bool
    """

    measurement: Measurement
    u: float | None
    reconciled: float | None
    adjustment: float | None
    standardised: float | None
    redundant: bool


@dataclass(frozen=True, kw_only=True)
class Offset:
    """One draw of a shared source: its offset, that offset's standard uncertainty, and its test."""

    draw: Draw
    offset: float
    u: float
    standardised: float | None


@dataclass(frozen=True, kw_only=True)
class Share:
    """Share of a figure's variance owed to one reading (period) or one draw (its first period)."""

    name: str
    period: int
    source: bool
    share: float


@dataclass(frozen=True, kw_only=True)
class FigureValue:
    """A reported figure with its uncertainty and what that rests on, largest share first."""

    name: str
    period: int | None
    value: float | None
    u: float | None
    determined: bool
    budget: tuple[Share, ...]
    reason: str = ""


@dataclass(frozen=True, kw_only=True)
class Answer:
    """
    Everything read off an accepted solution.

    Attributes
    ----------
    objective : float
        Sum of squared standardised misfits, bounds in force [-].
    test : Statistic or NotApplicable
        The overall test, from the problem without inequality bounds.
    test_objective : float
    degrees_of_freedom : int
    acceptance : Acceptance
    state, test_state, solution
        What it was read from.
    sensitivities, tests : Sensitivities
        At the printed solution: with held figures as equalities, and with held figures that have
        an uncertainty as ordinary measurements. ``test_local`` is the latter's local problem.
    """

    estimates: tuple[Estimate, ...]
    measurements: tuple[Reconciled, ...]
    offsets: tuple[Offset, ...]
    figures: tuple[FigureValue, ...]
    objective: float
    test: Statistic | NotApplicable
    test_objective: float
    degrees_of_freedom: int
    acceptance: Acceptance
    state: State
    test_state: State
    solution: Solution
    sensitivities: Sensitivities
    tests: Sensitivities
    test_local: Local
