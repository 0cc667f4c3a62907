"""Stocks: the items of one survey document combined, before they are rolled to a cut."""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass
from typing import TYPE_CHECKING

from recon.ingest.chain import convert
from recon.ingest.decided import decide, in_canonical
from recon.ingest.inputs import Input, own_u
from recon.ingest.laboratory import canonical
from recon.ingest.reading import Error, Pull, Reading, together
from recon.ingest.rows import RowKind
from recon.ingest.sources import shared_pulls
from recon.ingest.stages import highest

if TYPE_CHECKING:
    from datetime import date, datetime

    from recon.declare.site import Instrument
    from recon.ingest.context import Context
    from recon.ingest.rows import Record


@dataclass(frozen=True, kw_only=True)
class Surveyed:
    """
    What one survey document says of one place at one time.

    Attributes
    ----------
    place, document : str
    at : datetime
    readings : tuple of Reading
        Of each instrument of the place that the document has an item for, as found, not rolled.
    """

    place: str
    document: str
    at: datetime
    readings: tuple[Reading, ...]


def surveyed(context: Context) -> list[Surveyed]:
    """Combine survey documents, in time order; what cannot be used becomes a finding."""
    groups: dict[tuple[str, str], dict[str, list[Record]]] = defaultdict(lambda: defaultdict(list))
    for row in context.records[RowKind.SURVEY]:
        groups[row.subject, row.document][row.item].append(row)
    found = []
    for (place, document), items in sorted(groups.items()):
        at = max(r.true_to for rows in items.values() for r in rows)
        day = context.day_of(at)
        version = context.version(day)
        if not any(n.name == place and n.stock for n in version.site.nodes):
            context.find(
                "unknown-place",
                place,
                f"Survey {document}: {place!r} is not a stock place of the site; its "
                f"{len(items)} items are set aside. Correct the document or declare the place.",
                day=day,
            )
            continue
        readings = [
            reading
            for instrument in version.site.instruments
            if instrument.kind == "survey"
            and instrument.node == place
            and instrument.analyte in items
            and (reading := _reading(context, instrument, document, at, items)) is not None
        ]
        found.append(Surveyed(place=place, document=document, at=at, readings=tuple(readings)))
    return sorted(found, key=lambda s: (s.at, s.place, s.document))


def _reading(
    context: Context,
    instrument: Instrument,
    document: str,
    at: datetime,
    items: dict[str, list[Record]],
) -> Reading | None:
    day = context.day_of(at)
    best, values = highest(context, instrument, items[str(instrument.analyte)])
    read = None if best is None else values[best.stage]
    decided = decide(context, instrument.tag, day, read)
    if decided.raw is None:
        return None

    def lookup(tag: str) -> Input | None:
        return _item(context, tag, document, day, items)

    converted = convert(context, instrument, day, decided.raw, lookup)
    if converted is None:
        return None
    return Reading(
        tag=instrument.tag,
        day=day,
        document=document,
        raw=decided.raw,
        value=converted.value,
        days=((day, 24.0),),
        pulls=together(
            (
                *shared_pulls(context, instrument, day, per_unit=converted.per_unit),
                *converted.pulls,
            )
        ),
        moisture=converted.moisture,
        estimated=converted.estimated,
        stage=best.stage if best else "",
        evidence=(*((best.natural_key,) if best else ()), *converted.evidence),
        corrections=(
            *in_canonical(decided.corrections, converted.per_unit),
            *converted.corrections,
        ),
        set_aside=decided.set_aside,
        held=decided.held,
    )


def _item(
    context: Context, tag: str, document: str, day: date, items: dict[str, list[Record]]
) -> Input | None:
    """Give a second value as found in the same survey document."""
    instrument = context.version(day).instrument[tag]
    best, values = highest(context, instrument, items.get(str(instrument.analyte), []))
    if best is None:
        context.find(
            "missing-input",
            tag,
            f"{tag}: survey {document} has no usable {instrument.analyte}; what is computed with "
            "it has no number. Complete the survey document.",
            day=day,
        )
        return None
    read = values[best.stage]
    decided = decide(context, tag, day, read)
    if decided.set_aside or decided.raw is None:
        return None
    factor = canonical(instrument)
    own = own_u(instrument, read, ())
    error = Error(name=f"{tag} {document}", first=day, u=own, own=True)
    value = decided.raw * factor
    pulls = [Pull(error=error, factor=factor, relative=False)] if own > 0 else []
    pulls += [
        Pull(error=p.error, factor=p.factor * (value if p.relative else 1.0), relative=False)
        for p in shared_pulls(context, instrument, day, per_unit=factor)
    ]
    return Input(
        tag=tag,
        value=value,
        as_read=read * factor,
        pulls=together(pulls),
        evidence=(best.natural_key,),
        corrections=decided.corrections,
    )
