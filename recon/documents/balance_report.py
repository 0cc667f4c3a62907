"""A solved balance file for machines (one JSON object) and for people (tables of text)."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING, Any

from recon.findings import Statistic
from recon.flowsheet.balances import Amount, name_of
from recon.flowsheet.network import MASS
from recon.suspects.words import sentence_on

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from recon.app.solve_file import SolvedFile
    from recon.reconcile.answer import Estimate, FigureValue, Reconciled

DASH = "-"


def as_json(solved: SolvedFile) -> str:
    """Write the JSON object described in the README under `recon solve`."""
    return json.dumps(as_object(solved), indent=2, allow_nan=False)


def as_object(solved: SolvedFile) -> dict[str, Any]:
    """Give the JSON object as plain values; measurements in their own units."""
    answer = solved.answer
    solution, test = answer.solution, answer.test
    notes = []
    if not isinstance(test, Statistic):
        notes.append(f"p_value: {test.reason}")
        notes.append(f"alarm: {test.reason}")
    notes += [
        f"{_place_words(e)}{' fraction' if e.fraction else ''}: {e.reason}"
        for e in answer.estimates
        if e.reason
    ]
    return {
        "status": "solved",
        "title": solved.title,
        "objective": answer.objective,
        "test_objective": answer.test_objective,
        "degrees_of_freedom": answer.degrees_of_freedom,
        "p_value": test.p_value if isinstance(test, Statistic) else None,
        "estimates": [_estimate(e) for e in answer.estimates],
        "measurements": [_measurement(m) for m in answer.measurements],
        "sources": [
            {
                "name": o.draw.source,
                "draw": o.draw.first,
                "offset": o.offset,
                "u": o.u,
                "standardised": o.standardised,
            }
            for o in answer.offsets
        ],
        "figures": [_figure(f) for f in answer.figures],
        "suspects": [
            {
                "kind": s.kind,
                "names": list(s.names),
                "size": s.size,
                "u": s.u,
                "unit": s.unit,
                "probability": s.probability,
                "certainty": s.certainty,
                "copper": s.copper,
                "period": s.period,
                "balances": [{"name": n, "standardised": z} for n, z in s.balances],
                "alternatives": [
                    {"kind": a.kind, "name": a.name, "period": a.period, "share": a.share}
                    for a in s.alternatives
                ],
                "note": s.note,
            }
            for s in solved.suspects
        ],
        "alarm": {
            "raised": solved.alarm.raised,
            "level": solved.alarm.level,
            "global_p": solved.alarm.global_p,
            "largest": solved.alarm.largest,
            "limit": solved.alarm.limit,
        },
        "undetermined": undetermined(solved),
        "solver": {
            "engine": solution.engine,
            "iterations": solution.iterations,
            "balance_residual": answer.acceptance.balance_residual,
            "optimality_residual": answer.acceptance.optimality_residual,
            "seconds": solution.seconds,
        },
        "notes": notes,
    }


def undetermined(solved: SolvedFile) -> list[str]:
    """Name every amount and stock that cannot be found."""
    return [
        name_of(e.unknown) for e in solved.answer.estimates if not e.determined and not e.fraction
    ]


def _place_words(estimate: Estimate) -> str:
    return name_of(estimate.unknown)


def _estimate(estimate: Estimate) -> dict[str, Any]:
    unknown = estimate.unknown
    if isinstance(unknown, Amount):
        place: dict[str, Any] = {"period": unknown.period, "stream": unknown.stream}
    elif unknown.boundary == 0:
        place = {"period": 1, "node": unknown.node, "at": "opening"}
    else:
        place = {"period": unknown.boundary, "node": unknown.node, "at": "closing"}
    return {
        **place,
        "quantity": unknown.quantity,
        "basis": "fraction" if estimate.fraction else "amount",
        "unit": "1" if estimate.fraction else "",
        "value": estimate.value,
        "u": estimate.u,
        "determined": estimate.determined,
        "at_bound": estimate.at_bound,
    }


def _measurement(row: Reconciled) -> dict[str, Any]:
    m = row.measurement

    def printed(value: float | None) -> float | None:
        return None if value is None else value / m.unit_factor

    return {
        "name": m.name,
        "period": m.period,
        "measured": printed(m.value),
        "u": printed(row.u),
        "reconciled": printed(row.reconciled),
        "adjustment": printed(row.adjustment),
        "standardised": row.standardised,
        "redundant": row.redundant,
        "unit": m.unit,
    }


def _figure(figure: FigureValue) -> dict[str, Any]:
    return {
        "name": figure.name,
        "period": figure.period,
        "value": figure.value,
        "u": figure.u,
        "determined": figure.determined,
        "budget": [
            {
                "name": share.name,
                ("draw" if share.source else "period"): share.period,
                "share": share.share,
            }
            for share in figure.budget
        ],
    }


def as_text(solved: SolvedFile) -> str:
    """Write tables a person reads from top to bottom."""
    answer = solved.answer
    test, alarm = answer.test, solved.alarm
    lines = [solved.title or "balance", ""]
    if isinstance(test, Statistic):
        lines.append(
            f"Overall test: {test.value:.3f} on {test.degrees_of_freedom} degrees of freedom, "
            f"p = {test.p_value:.4g}."
        )
        lines.append(
            f"Alarm {'RAISED' if alarm.raised else 'not raised'} at {alarm.level:.0%} false "
            f"alarms: largest single test {alarm.largest:.2f}, limit {alarm.limit:.2f}."
        )
    else:
        lines.append(f"Nothing is tested: {test.reason}.")
    lines += [sentence_on(suspect) for suspect in solved.suspects]
    if solved.suspects:
        lines.append("None of this is a statement on any protective duty.")
    lines += ["", *_table(_reading_rows(answer.measurements)), ""]
    lines += _table(_estimate_rows(answer.estimates))
    if answer.figures:
        lines += ["", *_table(_figure_rows(answer.figures))]
    if undetermined(solved):
        lines += ["", "Cannot be found (no number is given): " + "; ".join(undetermined(solved))]
    lines += [
        "",
        f"Solved by {answer.solution.engine} in {answer.solution.iterations} passes; open "
        f"balances at most {answer.acceptance.balance_residual:.1e} of flow.",
    ]
    return "\n".join(lines)


def _reading_rows(measurements: Iterable[Reconciled]) -> list[list[str]]:
    rows = [["measurement", "period", "measured", "±", "reconciled", "moved by", "T", ""]]
    for row in measurements:
        m = row.measurement
        by = m.unit_factor
        rows.append(
            [
                m.name,
                str(m.period),
                _number(m.value / by),
                _number(None if row.u is None else row.u / by, 3),
                _number(None if row.reconciled is None else row.reconciled / by),
                _number(None if row.adjustment is None else row.adjustment / by, 3),
                DASH if row.standardised is None else f"{row.standardised:.2f}",
                ("held; " if m.held else "")
                + ("can be checked" if row.redundant else "cannot be checked"),
            ]
        )
    return rows


def _estimate_rows(estimates: Iterable[Estimate]) -> list[list[str]]:
    rows = [["amount", "quantity", "value", "±", ""]]
    for e in estimates:
        place = name_of(e.unknown).rsplit(" ", 1)[0]
        quantity = e.unknown.quantity + (" %" if e.fraction else "")
        shown = 100.0 if e.fraction else 1.0
        if e.unknown.quantity == MASS:
            quantity = "dry mass"
        unsure = e.value is not None and e.u is not None and e.u > abs(e.value) > 0
        words = e.reason or ("at a bound" if e.at_bound else "")
        if unsure:
            words = f"{words}; ± exceeds the value".removeprefix("; ")
        value, u = (None if v is None else v * shown for v in (e.value, e.u))
        rows.append([place, quantity, _number(value), _number(u, 3), words])
    return rows


def _figure_rows(figures: Iterable[FigureValue]) -> list[list[str]]:
    rows = [["figure", "period", "value", "±", "rests most on"]]
    for f in figures:
        most = ", ".join(f"{s.name} {s.share:.0%}" for s in f.budget[:3])
        period = "all" if f.period is None else str(f.period)
        rows.append([f.name, period, _number(f.value), _number(f.u, 3), f.reason or most])
    return rows


def _number(value: float | None, digits: int = 6) -> str:
    return DASH if value is None else f"{value:.{digits}g}"


def _table(rows: Sequence[Sequence[str]]) -> list[str]:
    widths = [max(len(row[i]) for row in rows) for i in range(len(rows[0]))]
    lines = []
    for row in rows:
        cells = [
            cell.ljust(w) if i == 0 or i == len(row) - 1 else cell.rjust(w)
            for i, (cell, w) in enumerate(zip(row, widths, strict=True))
        ]
        lines.append("  ".join(cells).rstrip())
    return lines
