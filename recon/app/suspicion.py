"""What chance does not explain in a fit: the alarm, and who is named; the one place that asks."""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.stats import chi2, norm

from recon.findings import Finding, Severity
from recon.reconcile.figures import REDUNDANT
from recon.suspects.alarm import Alarm, raise_alarm, standardised
from recon.suspects.naming import Suspect, name_suspects
from recon.suspects.words import sentence_on

if TYPE_CHECKING:
    from collections.abc import Collection, Mapping

    from recon.declare.site import Site
    from recon.ingest.measured import IngestedMonth
    from recon.reconcile.answer import Answer
    from recon.reconcile.solver import Sensitivities

SIMULATED = 800
"""Up to so many checked readings the limits are simulated; beyond, they are bounded."""


@dataclass(frozen=True, kw_only=True)
class Suspicion:
    """The alarm of a fit and the groups named for it."""

    alarm: Alarm
    suspects: tuple[Suspect, ...]


def suspicion_of(answer: Answer, level: float) -> Suspicion:
    """
    Test a fit at a stated false-alarm rate and name what would explain an alarm.

    Parameters
    ----------
    answer : Answer
    level : float
        Plant-wide false-alarm rate [-].
    """
    tests = answer.tests
    small = int(np.count_nonzero(tests.leverage > REDUNDANT)) <= SIMULATED
    alarm = raise_alarm(tests, level) if small else bounded_alarm(tests, level)
    return Suspicion(alarm=alarm, suspects=name_suspects(answer, alarm))


def bounded_alarm(tests: Sensitivities, level: float) -> Alarm:
    """
    Raise the alarm of a large fit without simulating it.

    Each of the two tests stands at half the level; the largest residual's limit is by Sidak's
    inequality, which holds for any correlation of normal residuals. The rate of false alarms is
    at most ``level``, and somewhat lower where residuals are strongly correlated.
    """
    if tests.degrees_of_freedom <= 0:
        return Alarm(raised=False, level=level, global_p=None, largest=None, limit=None)
    checked = int(np.count_nonzero(tests.leverage > REDUNDANT))
    each = -np.expm1(np.log1p(-level / 2) / checked)
    limit = float(norm.isf(each / 2))
    residuals = tests.residuals
    global_p = float(chi2.sf(float(residuals @ residuals), tests.degrees_of_freedom))
    largest = float(np.max(np.abs(standardised(tests))))
    return Alarm(
        raised=global_p < level / 2 or largest > limit,
        level=level,
        global_p=global_p,
        largest=largest,
        limit=limit,
    )


def suspect_findings(
    suspects: tuple[Suspect, ...],
    *,
    period: int | None,
    when: str,
    services: Mapping[str, Collection[str]],
) -> list[Finding]:
    """
    Say in words who is named, by how much it would be off, and what else explains it.

    Parameters
    ----------
    suspects : tuple of Suspect
    period : int or None
        Day of a day's own test; one alarm in so many such tests is chance, so it is a warning.
    when : str
        Month or day, for the sentence.
    services : mapping
        Other duties of what stands behind each name; see ``services_by_name``.
    """
    return [
        Finding(
            code="suspect" if suspect.names else "unexplained",
            subject=suspect.names[0] if suspect.names else "site",
            severity=Severity.SERIOUS if period is None else Severity.WARNING,
            period=period,
            text=f"{when}: {sentence_on(suspect, _duties(suspect, services))}",
            evidence=(
                ("names", ", ".join(suspect.names)),
                ("size", "" if suspect.size is None else repr(suspect.size)),
                ("u", "" if suspect.u is None else repr(suspect.u)),
                ("unit", suspect.unit),
                ("probability", "" if suspect.probability is None else repr(suspect.probability)),
            ),
        )
        for suspect in suspects
    ]


def services_by_name(site: Site, month: IngestedMonth) -> dict[str, frozenset[str]]:
    """
    Give the other duties behind every name a suspect may carry.

    A sampler, a shared source and a place carry the duties of every instrument they touch, so that
    nobody is sent to a guarded instrument by way of a neighbour's name.
    """
    found: dict[str, set[str]] = defaultdict(set)
    ends = {s.name: (s.source, s.target) for s in site.streams}
    for i in site.instruments:
        touched = [i.tag, i.sampler, i.node, i.stream, *(s.source for s in i.shared)]
        touched += ends.get(i.stream or "", ())
        for name in touched:
            if name is not None:
                found[name].update(i.service)
    for m in month.measured:
        found[m.measurement.name] |= found[m.tag]
    return {name: frozenset(duties) for name, duties in found.items()}


def _duties(suspect: Suspect, services: Mapping[str, Collection[str]]) -> set[str]:
    names = {*suspect.names, *(a.name for a in suspect.alternatives)}
    return {duty for name in names for duty in services.get(name, ())}
