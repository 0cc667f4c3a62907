"""What approved decisions do to one raw value; each leaves its trace."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from recon.findings import Severity
from recon.ingest.measured import Correction

if TYPE_CHECKING:
    from datetime import date

    from recon.ingest.context import Context

KINDS = ("set aside", "corrected reading", "override", "held")


@dataclass(frozen=True, kw_only=True)
class Decided:
    """
    A raw value after decisions.

    Attributes
    ----------
    raw : float or None
        None where there is neither a reading nor an override.
    corrections : tuple of Correction
        ``before`` and ``after`` in the raw value's unit; ``in_canonical`` converts them.
    set_aside, held : bool
    overridden : bool
        The value is a person's, not the instrument's.
    """

    raw: float | None
    corrections: tuple[Correction, ...] = ()
    set_aside: bool = False
    held: bool = False
    overridden: bool = False


def decide(context: Context, tag: str, day: date, raw: float | None) -> Decided:
    """
    Apply the decisions on a tag that cover a day, in their order.

    ``corrected reading`` multiplies, ``override`` replaces (for a rate: its mean over running time
    times that time is formed by the caller), ``set aside`` and ``held`` mark. A correction of a
    reading that does not exist does nothing and is a finding.
    """
    value = raw
    corrections: list[Correction] = []
    aside = held = overridden = False
    for decision in context.decided(tag, day):
        before = value
        if decision.kind == "corrected reading" and decision.value is not None:
            if value is None:
                context.find(
                    "correction-without-reading",
                    tag,
                    f"{tag}, {day}: decision {decision.decision} corrects a reading, but there is "
                    "none on this day. Withdraw it or state an override.",
                    day=day,
                )
                continue
            value *= decision.value
        elif decision.kind == "override" and decision.value is not None:
            value, overridden = decision.value, True
        elif decision.kind == "set aside":
            aside = True
        elif decision.kind == "held":
            held = True
        else:
            context.find(
                "unusable-decision",
                tag,
                f"{tag}, {day}: decision {decision.decision} of kind {decision.kind!r} with value "
                f"{decision.value} cannot be applied; kinds are {', '.join(KINDS)}, and a "
                "correction or override needs a value.",
                day=day,
                severity=Severity.SERIOUS,
            )
            continue
        corrections.append(
            Correction(
                decision=decision.decision,
                kind=decision.kind,
                before=before,
                after=None if decision.kind == "set aside" else value,
                reason=decision.reason,
                by=decision.by,
            )
        )
    return Decided(
        raw=value,
        corrections=tuple(corrections),
        set_aside=aside,
        held=held,
        overridden=overridden,
    )


def in_canonical(corrections: tuple[Correction, ...], per_unit: float) -> tuple[Correction, ...]:
    """Convert corrections by the canonical value of one raw unit."""
    return tuple(
        replace(
            c,
            before=None if c.before is None else c.before * per_unit,
            after=None if c.after is None else c.after * per_unit,
        )
        for c in corrections
    )
