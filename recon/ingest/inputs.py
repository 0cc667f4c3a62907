"""Values that serve others' conversion chains: moisture, density, strength, as in force then."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date, timedelta
from typing import TYPE_CHECKING

import numpy as np

from recon.findings import Severity
from recon.ingest.context import FULL
from recon.ingest.decided import decide
from recon.ingest.estimates import stand_in
from recon.ingest.laboratory import canonical
from recon.ingest.reading import Error, Pull, together
from recon.ingest.sources import shared_pulls

if TYPE_CHECKING:
    from collections.abc import Iterable

    from recon.declare.site import Instrument
    from recon.ingest.context import Context
    from recon.ingest.laboratory import Laboratory
    from recon.ingest.measured import Correction


@dataclass(frozen=True, kw_only=True)
class Input:
    """
    A second value of a chain.

    Attributes
    ----------
    tag : str
    value : float
        Canonical unit, after decisions.
    as_read : float
        Before decisions.
    pulls : tuple of Pull
        How its errors enter it, absolute [canonical unit per unit of the error].
    estimated : bool
    evidence : tuple of str
    corrections : tuple of Correction
        Of the input itself; ``set aside`` leaves no input.
    """

    tag: str
    value: float
    as_read: float
    pulls: tuple[Pull, ...]
    estimated: bool = False
    evidence: tuple[str, ...] = ()
    corrections: tuple[Correction, ...] = ()


class Inputs:
    """
    Finds the input in force for a tag on a day.

    Parameters
    ----------
    context : Context
    laboratory : Laboratory
    """

    def __init__(self, context: Context, laboratory: Laboratory) -> None:
        self._context = context
        self._laboratory = laboratory
        self._found: dict[tuple[str, date, str], Input | None] = {}

    def on(self, tag: str, day: date, lot: str = "") -> Input | None:
        """
        Give an input, or None with a finding where there is no number.

        An assay is the sample in force (of the lot where one is named), a rate or totaliser its
        mean of the day. Missing values stand in by the instrument's estimate rule only.
        """
        key = (tag, day, lot)
        if key not in self._found:
            self._found[key] = self._look(tag, day, lot)
        return self._found[key]

    def _look(self, tag: str, day: date, lot: str) -> Input | None:
        context = self._context
        instrument = context.version(day).instrument[tag]
        found = (
            self._assayed(instrument, day, lot)
            if instrument.kind == "assay"
            else self._metered(instrument, day)
        )
        if found is None:
            found = self._by_rule(instrument, day)
        if found is None:
            context.find(
                "missing-input",
                tag,
                f"{tag}, {day}: no usable value and no estimate rule that gives one; what is "
                "computed with it has no number. Enter the result or declare a rule.",
                day=day,
            )
        return found

    def _assayed(self, instrument: Instrument, day: date, lot: str) -> Input | None:
        speaking = self._laboratory.on(instrument.tag, day, lot)
        if not speaking:
            return None
        factor = canonical(instrument)
        read = sum(s.value * w for s, w in speaking)
        decided = decide(self._context, instrument.tag, day, read)
        if decided.set_aside or decided.raw is None:
            return None
        own = own_u(instrument, read, self._laboratory.daily(instrument.tag).values())
        pulls = [
            Pull(
                error=Error(
                    name=f"{instrument.tag} {s.document}", first=s.hours[0][0], u=own, own=True
                ),
                factor=weight * factor,
                relative=False,
            )
            for s, weight in speaking
            if own > 0
        ]
        return Input(
            tag=instrument.tag,
            value=decided.raw * factor,
            as_read=read * factor,
            pulls=(*pulls, *_absolute(self._context, instrument, day, decided.raw * factor)),
            evidence=tuple(s.evidence for s, _ in speaking),
            corrections=decided.corrections,
        )

    def _metered(self, instrument: Instrument, day: date) -> Input | None:
        tag_day = self._context.tag_days.get((instrument.tag, day))
        if tag_day is None or tag_day.mean is None or tag_day.amount is None:
            return None
        if tag_day.covered_hours < FULL * tag_day.running_hours:
            return None
        decided = decide(self._context, instrument.tag, day, tag_day.mean)
        if decided.set_aside or decided.raw is None:
            return None
        factor = canonical(instrument)
        own = own_u(instrument, tag_day.mean, ())
        error = Error(name=f"{instrument.tag} {day}", first=day, u=own, own=True)
        pulls = (Pull(error=error, factor=factor, relative=False),) if own > 0 else ()
        return Input(
            tag=instrument.tag,
            value=decided.raw * factor,
            as_read=tag_day.mean * factor,
            pulls=(*pulls, *_absolute(self._context, instrument, day, decided.raw * factor)),
            evidence=(tag_day.chunk,),
            corrections=decided.corrections,
        )

    def _by_rule(self, instrument: Instrument, day: date) -> Input | None:
        if instrument.estimate is None or instrument.kind != "assay":
            return None
        known = self._laboratory.daily(instrument.tag)
        standin = stand_in(instrument.estimate, known, day)
        if standin is None:
            return None
        say_estimate(self._context, instrument, day, standin.value, standin.u, standin.revisions)
        factor = canonical(instrument)
        since = max(d for d in known if d < day) + timedelta(days=1)
        error = Error(name=f"{instrument.tag} by rule", first=since, u=1.0, own=True)
        return Input(
            tag=instrument.tag,
            value=standin.value * factor,
            as_read=standin.value * factor,
            pulls=(
                Pull(error=error, factor=standin.u * factor, relative=False),
                *_absolute(self._context, instrument, day, standin.value * factor),
            ),
            estimated=True,
        )


def own_u(instrument: Instrument, value: float, known: Iterable[float]) -> float:
    """Own standard uncertainty of an input [its unit]; relative to the median of known values."""
    declared = instrument.uncertainty
    if declared is None:
        return 0.0
    values = list(known)
    reference = float(np.median(values)) if values else value
    relative = np.sqrt(
        declared.relative**2 + declared.sampling**2 + declared.preparation**2 + declared.analysis**2
    )
    return float(np.hypot(declared.zero, relative * reference))


def say_estimate(
    context: Context, instrument: Instrument, day: date, value: float, u: float, revisions: int
) -> None:
    """Note a value that stands in by rule, and where its uncertainty comes from."""
    rule = instrument.estimate
    assert rule is not None
    words = "last known value" if rule.rule == "last" else f"mean of the last {rule.days} days"
    basis = f"{revisions} past revisions" if revisions else "an assumed 10 %"
    context.find(
        "estimated",
        instrument.tag,
        f"{instrument.tag}, {day}: not yet known; the {words}, {value:g} {instrument.unit} with "
        f"u {u:.2g} from {basis}, stands in.",
        day=day,
        severity=Severity.NOTE,
    )


def _absolute(
    context: Context, instrument: Instrument, day: date, value: float
) -> tuple[Pull, ...]:
    """Declared sources of an input as absolute pulls on its value."""
    pulls = shared_pulls(context, instrument, day, per_unit=canonical(instrument))
    return together(
        Pull(error=p.error, factor=p.factor * (value if p.relative else 1.0), relative=False)
        for p in pulls
    )
