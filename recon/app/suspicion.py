"""What chance does not explain in a fit: the alarm, and who is named; the one place that asks."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.stats import chi2, norm

from recon.findings import Finding, Severity
from recon.reconcile.figures import REDUNDANT
from recon.suspects.alarm import Alarm, raise_alarm, standardised
from recon.suspects.naming import Suspect, name_suspects

if TYPE_CHECKING:
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
    suspects: tuple[Suspect, ...], *, period: int | None, when: str
) -> list[Finding]:
    """Say in words who is named, by how much it would be off, and what else explains it."""
    return [_finding(suspect, period, when) for suspect in suspects]


def _finding(suspect: Suspect, period: int | None, when: str) -> Finding:
    if not suspect.names:
        return Finding(
            code="unexplained",
            subject="site",
            severity=Severity.WARNING,
            period=period,
            text=(
                f"{when}: the readings disagree more than their uncertainties allow, and no single "
                "instrument explains it. Look for several small faults, a wrong uncertainty, or a "
                "stream that is not drawn."
            ),
        )
    first, *others = suspect.names
    size = (
        ""
        if suspect.size is None or suspect.u is None
        else f" by {suspect.size:+.4g} +/- {2 * suspect.u:.2g} {suspect.unit} (95 %)".rstrip()
    )
    also = f" Not to be told apart from it: {', '.join(others)}." if others else ""
    return Finding(
        code="suspect",
        subject=first,
        severity=Severity.SERIOUS,
        period=period,
        text=(
            f"{when}: {suspect.kind} {first} would explain the disagreement, being off{size}."
            f"{also} Check it first; nothing was set aside."
        ),
        evidence=(
            ("names", ", ".join(suspect.names)),
            ("size", "" if suspect.size is None else repr(suspect.size)),
            ("u", "" if suspect.u is None else repr(suspect.u)),
            ("unit", suspect.unit),
            ("probability", "" if suspect.probability is None else repr(suspect.probability)),
        ),
    )
