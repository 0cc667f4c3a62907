"""What a check returns: a finding in words, a statistic with its law, or why there is none."""

from __future__ import annotations

from dataclasses import dataclass, field
from enum import StrEnum


class Severity(StrEnum):
    """How much a person must care; a site may set it per code."""

    NOTE = "note"
    WARNING = "warning"
    SERIOUS = "serious"


@dataclass(frozen=True, kw_only=True)
class Finding:
    """
    One thing a person should know about, with its evidence.

    Parameters
    ----------
    code : str
        Stable short name of the kind, for example ``frozen-value``; listed in DEVELOPERS.md.
    subject : str
        Tag, stream, node, stock place or document the finding is about.
    text : str
        One sentence: who, expected, found with unit, by how much, what to do.
    severity : Severity
        Default severity of this code.
    period : int or None
        Day number within the problem, 1-based, where the finding belongs to one day.
    evidence : tuple of (str, str)
        Names and values that testify, in the order shown.
    """

    code: str
    subject: str
    text: str
    severity: Severity = Severity.WARNING
    period: int | None = None
    evidence: tuple[tuple[str, str], ...] = field(default=())


@dataclass(frozen=True, kw_only=True)
class Statistic:
    """
    A test statistic that carries its null hypothesis.

    Parameters
    ----------
    null : str
        The hypothesis tested, as a sentence.
    value : float
        Value of the statistic [-].
    degrees_of_freedom : int or None
        Of the chi-square law; None where the law has none.
    p_value : float
        Probability of a value at least as extreme if the null holds [-].
    """

    null: str
    value: float
    degrees_of_freedom: int | None
    p_value: float


@dataclass(frozen=True, kw_only=True)
class NotApplicable:
    """Stands where a statistic would stand and says why there is none."""

    reason: str
