"""Whether each instrument of a site file can give the number it is declared to give."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from recon.declare.faults import did_you_mean
from recon.declare.site import (
    ErrorSource,
    Instrument,
    SiteNode,
    SiteStream,
    Step,
    Uncertainty,
)
from recon.declare.site_meaning import Known, Placed, check_unit
from recon.flowsheet.network import MASS
from recon.units import UNITS, Kind

SERVICES = ("protective", "nuclear", "molten metal", "acid", "custody", "statutory")

INTEGRAL = {
    Kind.MASS_FLOW: Kind.MASS,
    Kind.VOLUME_FLOW: Kind.VOLUME,
    Kind.CURRENT: Kind.CHARGE,
}
"""What a rate becomes when it is integrated over running time."""

RAW = {
    "rate": tuple(INTEGRAL),
    "totaliser": (Kind.MASS, Kind.VOLUME, Kind.CHARGE, Kind.COUNT),
    "tickets": (Kind.MASS, Kind.VOLUME, Kind.COUNT),
    "survey": (Kind.MASS, Kind.VOLUME, Kind.COUNT),
    "assay": (),
}
"""Kinds of unit from which an amount can be made."""

PRODUCT = {
    (Kind.MASS, Kind.FRACTION): Kind.MASS,
    (Kind.VOLUME, Kind.DENSITY): Kind.MASS,
    (Kind.VOLUME, Kind.FRACTION): Kind.VOLUME,
    (Kind.COUNT, Kind.MASS): Kind.MASS,
}
"""What ``times`` gives."""


@dataclass(frozen=True, kw_only=True)
class Places:
    """Names and entries that instruments refer to."""

    known: Known
    nodes: Mapping[str, SiteNode]
    instruments: Mapping[str, Instrument]
    served: frozenset[str]


def served_tags(
    instruments: Placed[Instrument],
    streams: Placed[SiteStream],
    sources: Placed[ErrorSource],
) -> frozenset[str]:
    """List tags that chains, run signals or shared sources refer to."""
    tags = {step.tag for _, i in instruments for step in i.chain}
    tags |= {s.run_signal for _, s in streams} | {s.calibrated_by for _, s in sources}
    return frozenset(tag for tag in tags if tag is not None)


def check_instruments(instruments: Placed[Instrument], at: Places, faults: list[str]) -> None:
    """
    Check every instrument by itself, and that no laboratory value counts twice.

    Parameters
    ----------
    instruments : sequence of (str, Instrument)
    at : Places
    faults : list of str
        Grows by one sentence a fault.
    """
    samples: dict[tuple[str, str], str] = {}
    for place, instrument in instruments:
        check_unit(instrument.unit, Kind, f"{place}, unit", faults)
        _place(place, instrument, at, faults)
        _rows(place, instrument, faults)
        _range(place, instrument, faults)
        _uncertainty(place, instrument, faults)
        _shared(place, instrument, at.known, faults)
        _chain(place, instrument, at, faults)
        if instrument.kind == "assay" and instrument.point and instrument.analyte:
            key = (instrument.point, instrument.analyte)
            if key in samples:
                faults.append(
                    f"{place}: {key[1]} of sample point {key[0]} is read by {samples[key]} "
                    "already; one value must not count twice."
                )
            samples.setdefault(key, place)


def _place(place: str, i: Instrument, at: Places, faults: list[str]) -> None:
    if i.stream is not None and i.node is not None:
        faults.append(f"{place}: measures either a stream or the stock of a node, not both.")
    elif i.stream is None and i.node is None:
        _serving(place, i, at, faults)
        return
    if i.quantity is None:
        faults.append(f"{place}, quantity: is required where a stream or node is measured.")
    else:
        at.known.quantity(i.quantity, f"{place}, quantity", faults)
    if i.stream is not None:
        _stream(place, i, i.stream, at, faults)
    if i.node is not None:
        _node(place, i, i.node, at, faults)
    if i.basis == "fraction" and i.quantity == MASS:
        faults.append(f"{place}, basis: dry mass has no fraction; measure its amount.")


def _serving(place: str, i: Instrument, at: Places, faults: list[str]) -> None:
    if i.quantity is not None:
        faults.append(f"{place}, quantity: needs a stream or a node that it is of.")
    if i.tag not in at.served:
        faults.append(
            f"{place}: measures no stream or node, and no conversion chain, run signal or shared "
            "source refers to it. Attach it or take it out."
        )


def _stream(place: str, i: Instrument, name: str, at: Places, faults: list[str]) -> None:
    if name not in at.known.streams:
        close = did_you_mean(name, at.known.streams)
        faults.append(f'{place}, stream: unknown stream "{name}". {close}')
        return
    if i.quantity is not None and i.quantity in at.known.quantities:
        at.known.carries(name, i.quantity, f"{place}, quantity", faults)
    if i.basis == "fraction":
        at.known.carries(name, MASS, f"{place}, basis (a fraction is of dry mass)", faults)
    if i.kind == "survey":
        faults.append(f"{place}, kind: a survey is of the stock of a node, not of a stream.")


def _node(place: str, i: Instrument, name: str, at: Places, faults: list[str]) -> None:
    if name not in at.known.nodes:
        close = did_you_mean(name, at.known.nodes)
        faults.append(f'{place}, node: unknown node "{name}". {close}')
        return
    node = at.nodes.get(name)
    if node is not None and not node.stock:
        faults.append(f"{place}, node: {name} holds no stock; set stock = true there.")
    if i.kind != "survey":
        faults.append(f'{place}, kind: a stock is measured by a survey; found "{i.kind}".')


def _rows(place: str, i: Instrument, faults: list[str]) -> None:
    """Check the keys by which an instrument finds its rows."""
    if i.kind == "assay" and not (i.point and i.analyte):
        faults.append(f"{place}: an assay needs point and analyte, as the laboratory writes them.")
    if i.kind == "survey" and not i.analyte:
        faults.append(
            f"{place}, analyte: a survey needs the item surveyed: mass, volume, density, "
            "moisture, or a component."
        )
    for key, kinds, said in (
        ("point", ("assay", "survey"), i.point is not None),
        ("analyte", ("assay", "survey"), i.analyte is not None),
        ("sampler", ("assay",), i.sampler is not None),
        ("interpolation", ("rate",), i.interpolation != "step"),
        ("modulus", ("totaliser",), i.modulus is not None),
        ("stages", ("assay", "survey", "tickets"), i.stages != ("final",)),
    ):
        if said and i.kind not in kinds:
            faults.append(
                f"{place}, {key}: is for {' and '.join(kinds)} instruments; this is a {i.kind}."
            )
    if i.kind == "totaliser" and i.modulus is None:
        faults.append(f"{place}, modulus: a totaliser needs the value at which it rolls over.")
    if not i.stages or len(set(i.stages)) < len(i.stages):
        faults.append(f"{place}, stages: name each stage once, lowest first.")
    for service in i.service:
        if service not in SERVICES:
            known = did_you_mean(service, SERVICES)
            faults.append(f'{place}, service: unknown service "{service}". {known}')


def _range(place: str, i: Instrument, faults: list[str]) -> None:
    if i.low is not None and i.high is not None and i.low >= i.high:
        faults.append(f"{place}: low < high is expected, found {i.low:g} and {i.high:g} {i.unit}.")
    if i.modulus is not None and i.modulus <= 0:
        faults.append(f"{place}, modulus: must be > 0, found {i.modulus:g} {i.unit}.")
    if i.estimate is not None and i.estimate.days < 1:
        faults.append(f"{place}, estimate.days: must be 1 or more, found {i.estimate.days}.")


def _uncertainty(place: str, i: Instrument, faults: list[str]) -> None:
    attached = i.stream is not None or i.node is not None
    if i.uncertainty is None:
        if attached and i.use != "compare":
            faults.append(
                f'{place}, uncertainty: is required where use = "{i.use}". Without a standard '
                "uncertainty a reading has no weight; name a planning value and its basis_of_u."
            )
        return
    if i.uncertainty.zero <= 0:
        unit = "t" if attached and i.basis == "amount" else i.unit
        faults.append(
            f"{place}, uncertainty.zero: a standard uncertainty > 0 is expected [{unit}], "
            f"found {i.uncertainty.zero:g}."
        )
    for key, value in _relative_parts(i.uncertainty):
        if value < 0:
            faults.append(f"{place}, uncertainty.{key}: must be 0 or more, found {value:g}.")
        elif value >= 1:
            faults.append(
                f"{place}, uncertainty.{key}: {value:g} means {value:.0%}; write 1 % as 0.01."
            )
        if value != 0 and key != "relative" and i.kind not in ("assay", "survey"):
            faults.append(
                f"{place}, uncertainty.{key}: is for assays; a {i.kind} has zero and relative."
            )


def _relative_parts(u: Uncertainty) -> tuple[tuple[str, float], ...]:
    return (
        ("relative", u.relative),
        ("sampling", u.sampling),
        ("preparation", u.preparation),
        ("analysis", u.analysis),
    )


def _shared(place: str, i: Instrument, known: Known, faults: list[str]) -> None:
    seen: set[str] = set()
    for shared in i.shared:
        if shared.source not in known.sources:
            close = did_you_mean(shared.source, known.sources)
            faults.append(f'{place}, shared: unknown source "{shared.source}". {close}')
        if shared.source in seen:
            faults.append(f'{place}, shared: source "{shared.source}" is named twice.')
        if shared.factor == 0:
            faults.append(f'{place}, shared: "{shared.source}" has factor 0; leave it out.')
        seen.add(shared.source)


def _chain(place: str, i: Instrument, at: Places, faults: list[str]) -> None:
    """Follow the kinds of unit through the chain to an amount or a fraction."""
    before = len(faults)
    for n, step in enumerate(i.chain, start=1):
        _step(f"{place}, chain[{n}]", i, step, at, faults)
    attached = i.stream is not None or i.node is not None
    if len(faults) > before or i.unit not in UNITS or not attached:
        return
    raw = UNITS[i.unit].kind
    if i.basis == "fraction":
        if raw is not Kind.FRACTION or any(step.by != "factor" for step in i.chain):
            faults.append(
                f'{place}, unit: a fraction is read in "%", "1", "g/t" or the like, with no step '
                f'but factor; found "{i.unit}".'
            )
        elif i.kind in ("totaliser", "tickets"):
            faults.append(f"{place}, basis: a {i.kind} gives an amount, not a fraction.")
        return
    if raw not in RAW[i.kind]:
        wanted = " or ".join(RAW[i.kind])
        faults.append(
            f'{place}, unit: "{i.unit}" is a unit of {raw}; an amount by {i.kind} needs a unit '
            f"of {wanted}."
            if wanted
            else f'{place}, basis: an assay gives a fraction; write basis = "fraction".'
        )
        return
    kinds = {INTEGRAL.get(raw, raw)}
    for n, step in enumerate(i.chain, start=1):
        after = {k for kind in kinds for k in _after(kind, step, at)}
        if not after:
            faults.append(
                f"{place}, chain[{n}]: {_words(step, at)} does not apply to "
                f"{' or '.join(sorted(kinds))}."
            )
            return
        kinds = after
    if Kind.MASS not in kinds:
        faults.append(
            f"{place}, chain: ends as {' or '.join(sorted(kinds))}; an amount must end as mass. "
            "Add a density, slurry, times or factor step."
        )


def _words(step: Step, at: Places) -> str:
    other = at.instruments.get(step.tag or "")
    return step.by if other is None else f"{step.by} {other.tag} [{other.unit}]"


def _after(kind: Kind, step: Step, at: Places) -> set[Kind]:
    """Kinds that a step can give; a factor may stand for tonnes per unit of anything."""
    if step.by == "factor":
        return {kind, Kind.MASS}
    if step.by == "moisture":
        return {kind} if kind is Kind.MASS else set()
    if step.by in ("slurry", "density"):
        return {Kind.MASS} if kind is Kind.VOLUME else set()
    other = at.instruments.get(step.tag or "")
    if other is None or other.unit not in UNITS:
        return {kind, Kind.MASS}
    result = PRODUCT.get((kind, UNITS[other.unit].kind))
    return set() if result is None else {result}


def _step(place: str, i: Instrument, step: Step, at: Places, faults: list[str]) -> None:
    if step.by == "slurry":
        if step.value is None or step.value <= 1:
            faults.append(f"{place}, value: slurry needs the density of solids [t/m3], above 1.")
        if step.tag is None:
            faults.append(f"{place}, tag: slurry needs the instrument of the pulp density.")
    elif step.by == "factor":
        if step.value is None or step.value == 0:
            faults.append(f"{place}, value: factor needs a value other than 0.")
        if step.tag is not None:
            faults.append(f"{place}, tag: factor takes a value alone; use times for a tag.")
    elif step.by == "times":
        if step.tag is None or step.value is not None:
            faults.append(f"{place}: times needs a tag and no value; use factor for a constant.")
    elif (step.tag is None) == (step.value is None):
        faults.append(f"{place}: {step.by} needs a tag or a value, one of the two.")
    elif step.by == "moisture" and step.value is not None and not 0 <= step.value < 1:
        faults.append(f"{place}, value: moisture is a fraction of wet mass, found {step.value:g}.")
    elif step.by == "density" and step.value is not None and step.value <= 0:
        faults.append(f"{place}, value: a density > 0 [t/m3] is expected, found {step.value:g}.")
    if step.tag is not None:
        _step_tag(place, i, step, step.tag, at, faults)


def _step_tag(
    place: str, i: Instrument, step: Step, tag: str, at: Places, faults: list[str]
) -> None:
    if tag == i.tag:
        faults.append(f"{place}, tag: is the instrument itself.")
    elif tag not in at.known.tags:
        faults.append(f'{place}, tag: unknown tag "{tag}". {did_you_mean(tag, at.known.tags)}')
    elif tag in at.instruments:
        other = at.instruments[tag]
        wanted = {"moisture": Kind.FRACTION, "slurry": Kind.DENSITY, "density": Kind.DENSITY}
        if step.by in wanted:
            check_unit(other.unit, (wanted[step.by],), f"{place}, tag {tag}", faults)
        if any(s.by != "factor" for s in other.chain):
            faults.append(
                f"{place}, tag: {tag} is itself converted by a chain; write its steps here."
            )
