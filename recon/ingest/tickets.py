"""Tickets of a day: found twice by key, found alike, summed with the moisture of their lot."""

from __future__ import annotations

import re
from collections import defaultdict
from datetime import timedelta
from itertools import pairwise
from typing import TYPE_CHECKING

from recon.findings import Severity
from recon.ingest.chain import convert
from recon.ingest.decided import decide, in_canonical
from recon.ingest.meters import running
from recon.ingest.reading import Pull, Reading, together
from recon.ingest.rows import RowKind
from recon.ingest.sources import shared_pulls
from recon.ingest.stages import highest, in_instrument_unit, rank

if TYPE_CHECKING:
    from datetime import date

    from recon.declare.site import Instrument
    from recon.ingest.context import Context
    from recon.ingest.inputs import Input, Inputs
    from recon.ingest.rows import Record

ALIKE_WITHIN = timedelta(hours=2)
"""Two tickets of one carrier with the same weights closer than this are said to be alike."""


class Weighbridge:
    """
    The tickets of a month and its history, by instrument and plant day.

    Parameters
    ----------
    context : Context
        Its ticket rows are read once; doubles and likenesses become findings.
    """

    def __init__(self, context: Context) -> None:
        self._context = context
        self._days: dict[tuple[str, date], list[Record]] = defaultdict(list)
        groups: dict[tuple[str, str], list[Record]] = defaultdict(list)
        for row in context.records[RowKind.TICKET]:
            groups[row.subject, plain_key(row.document)].append(row)
        for (tag, _), rows in sorted(groups.items()):
            day = context.day_of(rows[0].true_to)
            instrument = context.version(day).instrument.get(tag)
            if instrument is None or instrument.kind != "tickets":
                continue
            self._say_doubles(tag, rows)
            best, _values = highest(context, instrument, rows)
            if best is not None:
                self._days[tag, context.day_of(best.true_to)].append(best)
        for (tag, day), rows in self._days.items():
            rows.sort(key=lambda r: (r.true_to, r.document))
            _say_alike(context, tag, day, rows)

    def on(self, tag: str, day: date) -> tuple[Record, ...]:
        """List the tickets that count for a day, in time order."""
        return tuple(self._days.get((tag, day), ()))

    def _say_doubles(self, tag: str, rows: list[Record]) -> None:
        keys = {(r.document, r.stage) for r in rows}
        stages = {r.stage for r in rows}
        if len(keys) == len(stages):
            return
        self._context.find(
            "duplicate-ticket",
            tag,
            f"{tag}: ticket {rows[0].document} was entered {len(keys)} times "
            f"({', '.join(sorted({r.document for r in rows}))}); it counts once, as last known. "
            "Void the others at the weighbridge.",
            day=self._context.day_of(rows[0].true_to),
            severity=Severity.SERIOUS,
            evidence=tuple(
                (r.natural_key, f"{r.value} {r.unit} {r.true_to:%F %H:%M}Z") for r in rows
            ),
        )


def plain_key(document: str) -> str:
    """
    Strip a ticket number of what people type differently: case, spaces, dashes, leading zeros.

    Examples
    --------
    >>> plain_key("wb 00417"), plain_key("WB-417")
    ('WB-417', 'WB-417')
    """
    parts = re.findall(r"[A-Z]+|\d+", document.upper())
    return "-".join(p.lstrip("0") or "0" if p.isdigit() else p for p in parts)


def ticketed(
    context: Context, inputs: Inputs, weighbridge: Weighbridge, instrument: Instrument, day: date
) -> Reading | None:
    """
    Sum a day's tickets through the chain, lot by lot.

    Returns
    -------
    Reading or None
        None where the stream stands, no ticket is there, or the chain lacks a value.
    """
    if running(context, instrument.stream, day).stands:
        return None
    rows = weighbridge.on(instrument.tag, day)
    lots: dict[str, float] = defaultdict(float)
    for row in rows:
        lots[row.lot if instrument.chain else ""] += in_instrument_unit(instrument, row) or 0.0
    read = sum(lots.values()) if rows else None
    decided = decide(context, instrument.tag, day, read)
    if decided.raw is None:
        return None
    if not read:
        lots = {"": decided.raw}
    scale = decided.raw / read if read else 1.0
    parts = []
    for lot, raw in sorted(lots.items()):

        def lookup(tag: str, lot: str = lot) -> Input | None:
            return inputs.on(tag, day, lot)

        parts.append((raw * scale, convert(context, instrument, day, raw * scale, lookup)))
    done = [c for _, c in parts if c is not None]
    if len(done) < len(parts):
        return None
    value = sum(c.value for c in done)
    share = [c.value / value if value else 1.0 / len(done) for c in done]
    per_unit = value / decided.raw if decided.raw else done[0].per_unit
    dried = [(c.moisture, raw) for raw, c in parts if c is not None and c.moisture is not None]
    wet = sum(raw for _, raw in dried)
    return Reading(
        tag=instrument.tag,
        day=day,
        raw=decided.raw,
        value=value,
        days=((day, context.hours(day)),),
        pulls=together(
            (
                *shared_pulls(context, instrument, day, per_unit=per_unit),
                *(
                    Pull(error=p.error, factor=p.factor * w, relative=True)
                    for c, w in zip(done, share, strict=True)
                    for p in c.pulls
                ),
            )
        ),
        moisture=sum(m * raw for m, raw in dried) / wet if wet else None,
        estimated=any(c.estimated for c in done),
        stage=_lowest_stage(instrument, rows),
        evidence=(
            *(r.natural_key for r in rows),
            *dict.fromkeys(e for c in done for e in c.evidence),
        ),
        corrections=(
            *in_canonical(decided.corrections, per_unit),
            *(k for c in done for k in c.corrections),
        ),
        set_aside=decided.set_aside,
        held=decided.held,
    )


def _lowest_stage(instrument: Instrument, rows: tuple[Record, ...]) -> str:
    """Stage that a sum of tickets has reached as a whole."""
    return min((r.stage for r in rows), key=lambda s: rank(instrument.stages, s) or 0, default="")


def _say_alike(context: Context, tag: str, day: date, rows: list[Record]) -> None:
    """Find two tickets of one carrier with the same weights within two hours."""
    for first, second in pairwise(rows):
        if second.true_to - first.true_to > ALIKE_WITHIN or first.value != second.value:
            continue
        a, b = dict(first.extra), dict(second.extra)
        weights = [n for n in ("gross", "tare") if a.get(n) and a.get(n) == b.get(n)]
        same_unit = a.get("carrier") and a.get("carrier") == b.get("carrier")
        if not weights and not same_unit:
            continue
        context.find(
            "alike-tickets",
            tag,
            f"{tag}: tickets {first.document} and {second.document} agree in net "
            f"{first.value:g} {first.unit}{''.join(f', {n} {a[n]}' for n in weights)} and lie "
            f"{(second.true_to - first.true_to).total_seconds() / 60:.0f} min apart; both count. "
            "Check the weighbridge log; set one aside by decision if it is the same load.",
            day=day,
            evidence=((first.natural_key, first.document), (second.natural_key, second.document)),
        )
