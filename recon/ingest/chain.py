"""From a raw value to the amount of its quantity, with the sign and size of every shared error.

Each step multiplies by a factor of a second value ``v``: ``1 - v`` for moisture, ``v - 1`` for pulp
density, ``v`` for strength, grade or density. An error ``d`` of ``v`` therefore changes the result
by the relative amount ``f'(v) / f(v) d``: minus ``1 / (1 - v)`` for moisture, ``1 / (v - 1)`` for
pulp density (four-fold at 1.25), ``1 / v`` otherwise. A moisture that dries two tonnages pulls both
with this one error (law of propagation of uncertainty with correlation, JCGM 100:2008, 5.2).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from recon.ingest.laboratory import canonical
from recon.ingest.reading import Pull, together

if TYPE_CHECKING:
    from datetime import date

    from recon.declare.site import Instrument, Step
    from recon.ingest.context import Context
    from recon.ingest.inputs import Input
    from recon.ingest.measured import Correction

Lookup = Callable[[str], "Input | None"]
"""Gives the input of a tag, already bound to the day, lot or survey document."""


@dataclass(frozen=True, kw_only=True)
class Converted:
    """
    What a chain made of one raw value.

    Attributes
    ----------
    value : float
        In the canonical unit of the quantity.
    per_unit : float
        Canonical value of one raw unit.
    pulls : tuple of Pull
        Errors of the second values, all relative.
    moisture : float or None
    estimated : bool
    evidence : tuple of str
    corrections : tuple of Correction
        Of second values, as what they did to this value.
    """

    value: float
    per_unit: float
    pulls: tuple[Pull, ...] = ()
    moisture: float | None = None
    estimated: bool = False
    evidence: tuple[str, ...] = ()
    corrections: tuple[Correction, ...] = ()


def convert(
    context: Context, instrument: Instrument, day: date, raw: float, lookup: Lookup
) -> Converted | None:
    """
    Apply an instrument's conversion chain.

    Parameters
    ----------
    context : Context
    instrument : Instrument
    day : date
    raw : float
        Raw amount or value [instrument's unit; x h for a rate]; of a product instrument the
        integrated product, see ``recon.ingest.rows.TagDay``.
    lookup : callable
        Gives second values.

    Returns
    -------
    Converted or None
        None, with a finding, where a second value is missing or impossible.
    """
    result = Converted(value=raw * canonical(instrument), per_unit=canonical(instrument))
    for step in instrument.chain:
        applied = _apply(context, instrument, day, result, step, lookup)
        if applied is None:
            return None
        result = applied
    return replace(result, pulls=together(result.pulls))


def by_reading(context: Context, instrument: Instrument, step: Step, day: date) -> bool:
    """Whether a step was already done reading by reading when the day was integrated."""
    if instrument.kind != "rate" or step.tag is None:
        return False
    second = context.version(day).instrument.get(step.tag)
    return second is not None and second.kind == "rate"


def step_factor(step: Step, v: float) -> tuple[float, float]:
    """
    Give a step's factor and its relative derivative at a second value.

    Parameters
    ----------
    step : Step
    v : float
        Canonical second value: moisture [1], density [t/m3], strength or grade [1 or t/m3].

    Returns
    -------
    factor, slope : float
        ``f(v)`` and ``f'(v) / f(v)``; the slope is 0 where the factor is.

    Examples
    --------
    >>> from recon.declare.site import Step
    >>> factor, slope = step_factor(Step(by="slurry", value=2.8), 1.25)
    >>> round(factor, 4), slope
    (0.3889, 4.0)
    """
    if step.by == "moisture":
        factor, derivative = 1.0 - v, -1.0
    elif step.by == "slurry":
        solids = float(step.value or 0.0)
        share = solids / (solids - 1.0)
        factor, derivative = (v - 1.0) * share, share
    else:
        factor, derivative = v, 1.0
    return factor, derivative / factor if factor else 0.0


def _apply(
    context: Context,
    instrument: Instrument,
    day: date,
    so_far: Converted,
    step: Step,
    lookup: Lookup,
) -> Converted | None:
    if step.tag is None:
        factor, _ = step_factor(step, float(step.value or 0.0))
        return replace(
            so_far,
            value=so_far.value * factor,
            per_unit=so_far.per_unit * factor,
            moisture=step.value if step.by == "moisture" else so_far.moisture,
        )
    second = lookup(step.tag)
    if second is None:
        return None
    factor, slope = step_factor(step, second.value)
    if factor < 0 or (step.by in ("moisture", "slurry") and factor == 0):
        context.find(
            "impossible-input",
            instrument.tag,
            f"{instrument.tag}, {day}: {step.by} {second.value:g} of {step.tag} leaves a factor of "
            f"{factor:g}; there is no number. Check the unit and the value of {step.tag}.",
            day=day,
        )
        return None
    done = by_reading(context, instrument, step, day)
    applied = 1.0 if done else factor
    as_read, _ = step_factor(step, second.as_read)
    value = so_far.value * applied
    return replace(
        so_far,
        value=value,
        per_unit=so_far.per_unit * applied,
        pulls=(
            *so_far.pulls,
            *(Pull(error=p.error, factor=p.factor * slope, relative=True) for p in second.pulls),
        ),
        moisture=second.value if step.by == "moisture" else so_far.moisture,
        estimated=so_far.estimated or second.estimated,
        evidence=(*so_far.evidence, *second.evidence),
        corrections=(
            *so_far.corrections,
            *(
                replace(c, before=value * as_read / factor, after=value)
                for c in second.corrections
                if factor
            ),
        ),
    )
