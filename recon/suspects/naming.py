"""Which instrument is lying, by how much, and what else would explain the same evidence."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

import numpy as np
from scipy.stats import chi2

from recon.suspects.beam import Evidence
from recon.suspects.explain import Blamed, Explanation, Setting, explain, setting_of
from recon.suspects.prior import log_odds_of, narrowed
from recon.suspects.signatures import Signatures, signatures_of

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from recon.reconcile.answer import Answer
    from recon.suspects.alarm import Alarm

    Vector = NDArray[np.float64]

LIKELY = 0.8
POSSIBLE = 0.3
TESTIFIES = 2.0
"""A balance testifies when it is open by more than this many of its standard uncertainties."""
PARTAKES = 0.2
"""... and when the fault would open it at this cosine or more."""
LEFT_OVER = 1e-3
"""What is named leaves something unexplained when chance leaves as much as rarely as this."""


@dataclass(frozen=True, kw_only=True)
class Alternative:
    """A member of a suspect group, with its share of the group's slot [-]."""

    kind: str
    name: str
    period: int | None
    share: float


@dataclass(frozen=True, kw_only=True)
class Part:
    """Size of one direction of a fault: one assay of a sample taker, or the fault itself."""

    name: str
    size: float
    u: float
    unit: str


@dataclass(frozen=True, kw_only=True)
class Suspect:
    """
    A group of explanations of which one is likely at fault.

    Attributes
    ----------
    kind : str
        meter, assay, sampler, stock, source, leak, unexplained: of the first name.
    names : tuple of str
        The group that cannot be told apart with 90 % certainty, most likely first.
    size, u : float or None
        Size of the fault and its standard uncertainty for the first name, in ``unit``; positive
        reads high, or is lost. For a sample taker, of the assay it shows most in.
    unit : str
    probability : float or None
        That the first name, or one that can never be told from it, is at fault.
    certainty : str
        likely, possible, cannot tell.
    copper : float or None
        Copper overstated by the fault, or lost [t a period].
    period : int or None
        Its period; None where the fault lasts through all of them.
    balances : tuple of (str, float)
        Node balances that testify and by how many standard uncertainties each is open.
    alternatives : tuple of Alternative
        The group with its members' shares.
    parts : tuple of Part
    note : str
        What else must be said.
    """

    kind: str
    names: tuple[str, ...]
    size: float | None
    u: float | None
    unit: str
    probability: float | None
    certainty: str = "cannot tell"
    copper: float | None = None
    period: int | None = None
    balances: tuple[tuple[str, float], ...] = ()
    alternatives: tuple[Alternative, ...] = field(default=())
    parts: tuple[Part, ...] = ()
    note: str = ""


def name_suspects(
    answer: Answer,
    alarm: Alarm,
    *,
    signatures: Signatures | None = None,
    log_odds: Vector | None = None,
) -> tuple[Suspect, ...]:
    """
    Name what explains an alarm, as groups that cannot be told apart.

    Parameters
    ----------
    answer : Answer
    alarm : Alarm
        Nothing is named without one, so chance is blamed as rarely as the alarm's level says.
    signatures : Signatures, optional
        Of the same answer, where they are known already.
    log_odds : ndarray, optional
        Prior log odds of every choice, calibrated before; else they are calibrated here, to the
        alarm's level.

    Returns
    -------
    tuple of Suspect
        Most probable first; empty where no alarm is raised.
    """
    if not alarm.raised:
        return ()
    known = signatures or signatures_of(answer)
    if not known.candidates:
        return (unexplained("no instrument, source or leak is visible here"),)
    odds = log_odds_of(known, alarm.level) if log_odds is None else log_odds
    known, odds = narrowed(known, odds)
    setting = setting_of(known.candidates, known.columns, known.classes)
    found, p_left = best_explanation(known, setting, odds, alarm.level)
    if not found.blamed:
        return (unexplained("no admissible set of faults explains the residuals", p_left),)
    result = tuple(_suspect(b, found, setting, known) for b in found.blamed)
    if p_left < LEFT_OVER:
        result += (unexplained("something more is wrong than what is named above", p_left),)
    return result


def best_explanation(
    signatures: Signatures, setting: Setting, log_odds: Vector, level: float
) -> tuple[Explanation, float]:
    """
    Explain an alarm, or find that nothing does: what is blamed, and how well chance does the rest.

    Parameters
    ----------
    signatures : Signatures
    setting : Setting
        Of the same signatures.
    log_odds : ndarray
        Prior log odds of each choice.
    level : float
        Of the alarm [-].

    Returns
    -------
    Explanation
        Nobody is blamed where the best explanation is improbable and leaves too much.
    p_left : float
        How often chance leaves as much as what is blamed does.
    """
    evidence = Evidence(N=signatures.G.T @ signatures.z, M=signatures.G.T @ signatures.G)
    found = explain(evidence, setting, log_odds, something=True)
    left = float(signatures.z @ signatures.z) - found.explained
    freedom = len(signatures.z) - found.directions
    p_left = float(chi2.sf(max(left, 0.0), freedom)) if freedom > 0 else 1.0
    if all(b.probability < POSSIBLE for b in found.blamed) and p_left < level / 2:
        return replace(found, blamed=()), p_left
    return found, p_left


def unexplained(why: str, p_left: float | None = None) -> Suspect:
    """Raise a fault that nothing admissible explains."""
    chance = "" if p_left is None else f"; chance leaves as much in {p_left:.1g} of cases"
    return Suspect(
        kind="unexplained",
        names=(),
        size=None,
        u=None,
        unit="",
        probability=None,
        note=f"{why}{chance}",
    )


def certainty_of(probability: float) -> str:
    """
    Put a probability in words.

    Examples
    --------
    >>> certainty_of(0.93), certainty_of(0.5), certainty_of(0.1)
    ('likely', 'possible', 'cannot tell')
    """
    if probability >= LIKELY:
        return "likely"
    return "possible" if probability >= POSSIBLE else "cannot tell"


def _suspect(
    blamed: Blamed, found: Explanation, setting: Setting, signatures: Signatures
) -> Suspect:
    candidate = setting.candidates[blamed.candidate]
    columns = [setting.columns[k] for k in candidate.columns]
    lead = int(np.argmax(np.abs(blamed.sizes) / np.maximum(blamed.spread, 1e-300)))
    column = columns[lead]
    copper = [
        c.copper * float(size)
        for c, size in zip(columns, blamed.sizes, strict=True)
        if c.copper is not None
    ]
    names = dict.fromkeys(setting.candidates[m.candidate].name for m in blamed.group)
    return Suspect(
        kind=candidate.kind,
        names=tuple(names),
        size=float(blamed.sizes[lead]) * column.scale,
        u=float(blamed.spread[lead]) * column.scale,
        unit=column.unit,
        probability=blamed.probability,
        certainty=certainty_of(blamed.probability),
        copper=sum(copper) if copper else None,
        period=candidate.period,
        balances=testimony(signatures, candidate.columns, blamed.sizes),
        alternatives=tuple(
            Alternative(
                kind=setting.candidates[m.candidate].kind,
                name=setting.candidates[m.candidate].name,
                period=setting.candidates[m.candidate].period,
                share=m.share,
            )
            for m in blamed.group
        ),
        parts=tuple(
            Part(
                name=_part_name(signatures, k, candidate.name),
                size=float(size) * c.scale,
                u=float(sd) * c.scale,
                unit=c.unit,
            )
            for k, c, size, sd in zip(
                candidate.columns, columns, blamed.sizes, blamed.spread, strict=True
            )
        ),
        note="" if found.bounded else "every explanation breaks a bound; this one does too",
    )


def _part_name(signatures: Signatures, column: int, otherwise: str) -> str:
    for candidate in signatures.candidates:
        if candidate.columns == (column,):
            return candidate.name
    return otherwise


def testimony(
    signatures: Signatures, columns: tuple[int, ...], sizes: Vector
) -> tuple[tuple[str, float], ...]:
    """Balances that are open and that the fault would open: name and statistic, widest first."""
    if not signatures.balances:
        return ()
    g = signatures.G[:, list(columns)] @ sizes
    length = np.linalg.norm(signatures.openings, axis=0)
    seen = length > 1e-9 * max(float(length.max(initial=0.0)), 1e-300)
    safe = np.where(seen, length, 1.0)
    statistic = np.where(seen, signatures.openings.T @ signatures.z / safe, 0.0)
    partakes = np.abs(signatures.openings.T @ g) / safe / max(float(np.linalg.norm(g)), 1e-300)
    told = np.flatnonzero(seen & (np.abs(statistic) > TESTIFIES) & (partakes >= PARTAKES))
    order = told[np.argsort(-np.abs(statistic[told]), kind="stable")][:4]
    return tuple((signatures.balances[i], float(statistic[i])) for i in order)
