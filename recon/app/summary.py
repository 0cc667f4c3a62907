"""The run in sentences that are read first: recoveries, unaccounted metal, suspects, what lacks."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Sequence
from datetime import date
from math import floor, log10
from typing import TYPE_CHECKING

from recon.findings import Finding, NotApplicable

if TYPE_CHECKING:
    from recon.app.suspicion import Suspicion
    from recon.declare.site import Site
    from recon.ingest.measured import IngestedMonth
    from recon.reconcile.answer import Answer
    from recon.tabulate.cells import Cell

COVER = 2.0
"""Standard uncertainties in a printed +/-, about 95 %."""
MOST = 5
"""So many places or kinds are named; the rest are counted."""
SUSPECT = "suspect"


def with_uncertainty(value: float, u: float | None, unit: str) -> str:
    """
    Print a value with its 95 % half-width, which keeps two significant digits.

    Examples
    --------
    >>> with_uncertainty(97.3124, 0.2117, "%")
    '97.31 +/- 0.42 %'
    >>> with_uncertainty(1234.5, 61.0, "t")
    '1230 +/- 120 t'
    """
    if not u:
        return f"{value:.6g} {unit}".rstrip()
    half = COVER * u
    places = 1 - floor(log10(half))
    shown = (
        f"{round(value, places):.{max(places, 0)}f} +/- {round(half, places):.{max(places, 0)}f}"
    )
    return f"{shown} {unit}".rstrip()


def summary_of(
    site: Site,
    days: tuple[date, ...],
    month: IngestedMonth,
    answer: Answer,
    cells: Iterable[Cell],
    suspicion: Suspicion,
    findings: Sequence[Finding],
) -> tuple[tuple[str, str], ...]:
    """
    Write a month to date in sentences, by name.

    Parameters
    ----------
    site : Site
        In force on the last day.
    days, month, answer
        The month to date, as ingested and as fitted.
    cells : iterable of Cell
        Its tables.
    suspicion, findings
        What chance does not explain, and everything found.
    """
    name = days[0].strftime("%Y-%m")
    at = {(c.table, c.row, c.column): c for c in cells if c.period == name}
    said = [("period", f"{name} through {days[-1].isoformat()}, {len(days)} days in one fit.")]
    said += [(f"recovery {f.name}", _recovery(f.name, at)) for f in site.figures]
    said += [
        (f"unaccounted {q}", _unaccounted(q, at))
        for q in site.quantities
        if ("site-balance", q, "unaccounted") in at
    ]
    said.append(("fit", _fit(answer, suspicion)))
    named = [f for f in findings if f.code == SUSPECT and f.period is None]
    said += [(f"suspect {n}", f.text) for n, f in enumerate(named, start=1)]
    said.append(("missing", _missing(month, answer)))
    said.append(("findings", _counted(findings)))
    return tuple(said)


def _recovery(name: str, at: dict[tuple[str, str, str], Cell]) -> str:
    fitted, measured = (at.get(("recoveries", name, column)) for column in ("fitted", "measured"))
    if fitted is None or fitted.value is None:
        return f"{name}: no figure, {fitted.reason if fitted else 'not tabulated'}."
    text = f"{name}: {with_uncertainty(fitted.value, fitted.u, fitted.unit)} (95 %) reconciled"
    if measured is not None and measured.value is not None:
        text += f"; {with_uncertainty(measured.value, measured.u, measured.unit)} as measured"
    return f"{text}."


def _unaccounted(quantity: str, at: dict[tuple[str, str, str], Cell]) -> str:
    cell = at["site-balance", quantity, "unaccounted"]
    if cell.value is None:
        reason = cell.reason.removeprefix("not determined: ")
        return f"{quantity} unaccounted: not determined, {reason}."
    z, hidden = (at.get(("site-balance", quantity, c)) for c in ("z", "loss_not_shown"))
    text = f"{quantity} unaccounted: {with_uncertainty(cell.value, cell.u, 't')} (95 %)"
    if z is not None and z.value is not None:
        text += f", z {z.value:+.1f}"
    if hidden is not None and hidden.value is not None:
        text += f"; a loss below {hidden.value:.3g} t would not show"
    return f"{text}."


def _fit(answer: Answer, suspicion: Suspicion) -> str:
    if isinstance(answer.test, NotApplicable):
        return f"Overall test: none, {answer.test.reason}."
    word = "alarm" if suspicion.alarm.raised else "no alarm"
    return (
        f"Overall test: p {answer.test.p_value:.3g} with {answer.degrees_of_freedom} degrees of "
        f"freedom; {word} at a false-alarm rate of {100 * suspicion.alarm.level:g} %."
    )


def _missing(month: IngestedMonth, answer: Answer) -> str:
    estimated = sorted({m.tag for m in month.measured if m.estimated})
    unknown = sorted({e.unknown[1] for e in answer.estimates if e.reason == "cannot be found"})
    parts = []
    if estimated:
        parts.append(f"estimated by rule: {_first(estimated)}")
    if unknown:
        parts.append(f"cannot be found: {_first(unknown)}")
    return f"Missing: {'; '.join(parts)}." if parts else "Missing: nothing."


def _first(names: Sequence[str]) -> str:
    more = f" and {len(names) - MOST} more" if len(names) > MOST else ""
    return ", ".join(names[:MOST]) + more


def _counted(findings: Sequence[Finding]) -> str:
    kinds = Counter(f.code for f in findings).most_common()
    if not kinds:
        return "Findings: none."
    return f"Findings: {len(findings)} ({_first([f'{n} {code}' for code, n in kinds])})."
