"""Findings of integration as text that travels with a tag-day, and back."""

from __future__ import annotations

import json
from collections.abc import Sequence

from recon.findings import Finding, Severity


def written(findings: Sequence[Finding]) -> str:
    """Write findings as canonical JSON; "" where there are none."""
    if not findings:
        return ""
    rows = [[f.code, f.subject, f.text, f.severity.value, list(f.evidence)] for f in findings]
    return json.dumps(rows, ensure_ascii=False, separators=(",", ":"))


def read_back(text: str, period: int | None) -> tuple[Finding, ...]:
    """
    Read them again, for the day's place in the month.

    Examples
    --------
    >>> told = Finding(code="gap", subject="FT-1", text="FT-1: no reading for 2.0 h.")
    >>> read_back(written([told]), 3)[0].period
    3
    """
    if not text:
        return ()
    return tuple(
        Finding(
            code=code,
            subject=subject,
            text=words,
            severity=Severity(severity),
            period=period,
            evidence=tuple((name, value) for name, value in evidence),
        )
        for code, subject, words, severity, evidence in json.loads(text)
    )
