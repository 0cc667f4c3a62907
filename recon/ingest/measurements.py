"""Readings become measurements: what they are of, how sure, and which draws they share."""

from __future__ import annotations

from collections import Counter, defaultdict
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Literal

from recon.flowsheet.balances import Amount, Stock
from recon.flowsheet.network import MASS
from recon.ingest.laboratory import canonical
from recon.ingest.measured import Measured, Recipe
from recon.ingest.meters import running
from recon.ingest.uncertainty import Reference, reference_of, spread_of
from recon.reconcile.problem import Draw, Effect, Measurement, MeasurementKind, Part

if TYPE_CHECKING:
    from collections.abc import Sequence

    from recon.declare.site import Instrument
    from recon.flowsheet.balances import Linear
    from recon.ingest.context import Context
    from recon.ingest.reading import Error, Reading

KIND = {
    "rate": MeasurementKind.METER,
    "totaliser": MeasurementKind.METER,
    "tickets": MeasurementKind.METER,
    "assay": MeasurementKind.ASSAY,
    "survey": MeasurementKind.STOCK,
}


@dataclass(frozen=True, kw_only=True)
class Candidate:
    """
    A reading with its instrument, on its way to being a measurement of the month.

    ``boundary`` is the stock boundary of a survey (0 opens the month); ``compare`` keeps it out of
    the problem whatever the instrument's use.
    """

    instrument: Instrument
    reading: Reading
    boundary: int | None = None
    compare: bool = False


@dataclass(frozen=True, kw_only=True)
class Stated:
    """The month's measurements with their draws and the recipes of their uncertainties."""

    measured: tuple[Measured, ...]
    draws: tuple[Draw, ...]
    recipes: tuple[Recipe, ...]


def state_measurements(
    context: Context,
    candidates: Sequence[Candidate],
    known: dict[str, list[Reading]],
) -> Stated:
    """
    State every candidate as a measurement.

    Parameters
    ----------
    context : Context
    candidates : sequence of Candidate
        Of the month; names are made unique by document where a tag speaks twice of one period.
    known : dict
        Every reading by tag, history included: what references are taken from.

    Returns
    -------
    Stated
        An own error of an input that two or more measurements share is a draw; one that a single
        measurement has goes into that measurement's ``u``.
    """
    candidates = [c for c in candidates if c.instrument.uncertainty is not None]
    uses = Counter(e for c in candidates for e in {p.error for p in c.reading.pulls if p.error.own})
    kept = sorted({p.error for c in candidates for p in c.reading.pulls if _is_draw(p.error, uses)})
    place = {error: i for i, error in enumerate(kept)}
    names = _names(context, candidates)
    references = {
        tag: reference_of(_instrument(candidates, tag), known.get(tag, ()), context.days[-1])
        for tag in {c.instrument.tag for c in candidates}
    }
    pairs = [
        _state(context, c, name, place, references[c.instrument.tag])
        for c, name in zip(candidates, names, strict=True)
    ]
    return Stated(
        measured=tuple(m for m, _ in pairs),
        draws=tuple(Draw(source=e.name, first=context.period(e.first) or 1, u=e.u) for e in kept),
        recipes=tuple(r for _, r in pairs),
    )


def _is_draw(error: Error, uses: Counter[Error]) -> bool:
    return not error.own or uses[error] > 1


def _instrument(candidates: Sequence[Candidate], tag: str) -> Instrument:
    return next(c.instrument for c in candidates if c.instrument.tag == tag)


def _period(context: Context, candidate: Candidate) -> int:
    """Period a measurement is listed under."""
    if candidate.boundary is not None:
        return max(1, candidate.boundary)
    return max(p for d, _ in candidate.reading.days if (p := context.period(d)) is not None)


def _names(context: Context, candidates: Sequence[Candidate]) -> list[str]:
    """Name each candidate by its tag, with boundary or document where that is not unique."""
    plain = []
    for c in candidates:
        at = {None: "", 0: " opening"}.get(c.boundary, " closing")
        plain.append(f"{c.instrument.tag}{at}")
    periods = [_period(context, c) for c in candidates]
    often = Counter(zip(plain, periods, strict=True))
    names = [
        f"{name} {c.reading.document}".rstrip() if often[name, p] > 1 else name
        for name, p, c in zip(plain, periods, candidates, strict=True)
    ]
    counted: dict[tuple[str, int], int] = defaultdict(int)
    unique = []
    for name, p in zip(names, periods, strict=True):
        counted[name, p] += 1
        n = counted[name, p]
        unique.append(name if n == 1 else f"{name} ({n})")
    return unique


def _state(
    context: Context,
    candidate: Candidate,
    name: str,
    place: dict[Error, int],
    reference: Reference | None,
) -> tuple[Measured, Recipe]:
    instrument, reading = candidate.instrument, candidate.reading
    effects = tuple(
        Effect(draw=place[p.error], factor=p.factor, relative=p.relative)
        for p in reading.pulls
        if p.error in place
    )
    alone = [p for p in reading.pulls if p.error not in place]
    spread = spread_of(
        instrument,
        reading,
        folded=sum((p.factor * p.error.u) ** 2 for p in alone if p.relative) ** 0.5,
        folded_fixed=sum((p.factor * p.error.u) ** 2 for p in alone if not p.relative) ** 0.5,
    )
    own_size = abs(reading.value) / spread.size
    provisional = reference is None or reference.provisional
    size = own_size if reference is None else reference.value
    fraction = instrument.basis == "fraction"
    period = _period(context, candidate)
    measurement = Measurement(
        name=name,
        period=period,
        kind=KIND[instrument.kind],
        parts=_parts(context, candidate),
        value=reading.value,
        u=spread.u(size),
        held=reading.held or instrument.use == "held",
        effects=effects,
        unit=instrument.unit if fraction else "t",
        unit_factor=canonical(instrument) if fraction else 1.0,
        sampler=instrument.sampler,
        typical=None if provisional else size * spread.size,
    )
    measured = Measured(
        measurement=measurement,
        tag=instrument.tag,
        day=context.days[period - 1],
        quantity=str(instrument.quantity),
        basis=instrument.basis,
        use="compare" if candidate.compare else instrument.use,
        stream=instrument.stream if candidate.boundary is None else None,
        node=instrument.node if candidate.boundary is not None else None,
        boundary=_boundary(candidate),
        estimated=reading.estimated,
        stage=reading.stage,
        raw=reading.raw,
        raw_unit=raw_unit(instrument),
        moisture=reading.moisture,
        coverage=reading.coverage,
        evidence=reading.evidence,
        rolled_hours=reading.rolled_hours,
        corrections=reading.corrections,
        set_aside=reading.set_aside,
    )
    recipe = Recipe(
        name=name,
        period=period,
        tag=instrument.tag,
        fixed=spread.fixed,
        slope=spread.slope,
        size=spread.size,
        provisional=provisional,
    )
    return measured, recipe


def raw_unit(instrument: Instrument) -> str:
    """Unit of a reading's raw amount: a rate's unit times hours."""
    if instrument.kind != "rate":
        return instrument.unit
    return instrument.unit[:-2] if instrument.unit.endswith("/h") else f"{instrument.unit}.h"


def _boundary(candidate: Candidate) -> Literal["", "opening", "closing"]:
    if candidate.boundary is None:
        return ""
    return "opening" if candidate.boundary == 0 else "closing"


def _parts(context: Context, candidate: Candidate) -> tuple[Part, ...]:
    instrument, reading = candidate.instrument, candidate.reading
    quantity, fraction = str(instrument.quantity), instrument.basis == "fraction"
    if candidate.boundary is not None:
        node, boundary = str(instrument.node), candidate.boundary
        of: Linear = ((Stock(boundary, node, quantity), 1.0),)
        return (Part(of=of, over=((Stock(boundary, node, MASS), 1.0),) if fraction else None),)
    stream = str(instrument.stream)
    covered = [(p, d, h) for d, h in reading.days if (p := context.period(d)) is not None]
    if not fraction:
        return (Part(of=tuple((Amount(p, stream, quantity), 1.0) for p, _, _ in covered)),)
    if reading.shares and len(reading.shares) == len(reading.days):
        counts = [
            (p, n)
            for (d, _), n in zip(reading.days, reading.shares, strict=True)
            if (p := context.period(d)) is not None and n > 0
        ]
        whole = sum(n for _, n in counts)
        if whole > 0:
            return tuple(
                Part(
                    of=((Amount(p, stream, quantity), 1.0),),
                    over=((Amount(p, stream, MASS), 1.0),),
                    share=n / whole,
                )
                for p, n in counts
            )
    # weighted by fitted dry mass, a day that the span covers in part with that part of its mass
    weights = {p: h / running(context, stream, d).hours for p, d, h in covered}
    if len(weights) == 1:
        weights = dict.fromkeys(weights, 1.0)
    return (
        Part(
            of=tuple((Amount(p, stream, quantity), w) for p, w in weights.items()),
            over=tuple((Amount(p, stream, MASS), w) for p, w in weights.items()),
        ),
    )


def in_problem(measured: Measured) -> bool:
    """Whether a measurement takes part in the fit."""
    return measured.use != "compare" and not measured.set_aside


def renewed(measured: Measured, u: float, typical: float) -> Measured:
    """The same measurement with another frozen uncertainty."""
    return replace(measured, measurement=replace(measured.measurement, u=u, typical=typical))
