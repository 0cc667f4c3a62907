"""From a month's answer to the rows a run publishes; sorted by natural key, canonical units."""

from __future__ import annotations

import json
from collections import defaultdict
from collections.abc import Sequence
from datetime import date
from typing import TYPE_CHECKING

from recon.app.period import EstimateRow, FigureRow, MeasurementRow, OffsetRow
from recon.flowsheet.balances import Amount, Linear

if TYPE_CHECKING:
    from recon.ingest.measured import IngestedMonth, Measured
    from recon.reconcile.answer import Answer, FigureValue, Reconciled
    from recon.reconcile.problem import Draw, Measurement

STILL = 1e-12
"""A denominator below this share of a tonne is a stream that stands [t]."""


def measurement_rows(month: IngestedMonth, answer: Answer) -> tuple[MeasurementRow, ...]:
    """
    List every measurement with what the fit made of it, those only compared included.

    Those compared are evaluated at the fit's estimates; they took no part in it.
    """
    moved = {(r.measurement.name, r.measurement.period): r for r in answer.measurements}
    rows = [
        _measurement_row(m, moved.get((m.measurement.name, m.measurement.period)), answer, month)
        for m in month.measured
    ]
    return tuple(sorted(rows, key=lambda row: (row.day, row.name)))


def estimate_rows(days: tuple[date, ...], answer: Answer) -> tuple[EstimateRow, ...]:
    """List every amount, stock and fraction; a stock before the first day is its *opening*."""
    rows = []
    for e in answer.estimates:
        unknown = e.unknown
        if isinstance(unknown, Amount):
            day, place, boundary = days[unknown.period - 1], unknown.stream, ""
        else:
            day, place = days[max(unknown.boundary, 1) - 1], unknown.node
            boundary = "closing" if unknown.boundary else "opening"
        rows.append(
            EstimateRow(
                day=day,
                place=place,
                boundary=boundary,
                quantity=unknown.quantity,
                basis="fraction" if e.fraction else "amount",
                value=e.value,
                u=e.u,
                determined=e.determined,
                at_bound=e.at_bound,
                reason=e.reason,
            )
        )
    return tuple(sorted(rows, key=lambda r: (r.day, r.place, r.boundary, r.quantity, r.basis)))


def offset_rows(days: tuple[date, ...], answer: Answer) -> tuple[OffsetRow, ...]:
    """List the offset of every draw of a shared error source."""
    rows = [
        OffsetRow(
            source=o.draw.source,
            draw_from=days[o.draw.first - 1],
            value=o.offset,
            u=o.u,
            standardised=o.standardised,
        )
        for o in answer.offsets
    ]
    return tuple(sorted(rows, key=lambda row: (row.source, row.draw_from)))


def figure_rows(
    month: IngestedMonth, answer: Answer, unaccounted: Sequence[FigureValue] = ()
) -> tuple[FigureRow, ...]:
    """List fitted figures of days and month, and unaccounted as measured, each with its budget."""
    tags = {(m.measurement.name, m.measurement.period): m.tag for m in month.measured}
    rows = [
        FigureRow(
            name=f.name,
            period=(
                month.days[0].strftime("%Y-%m")
                if f.period is None
                else month.days[f.period - 1].isoformat()
            ),
            value=f.value,
            u=f.u,
            basis=basis if f.determined else "",
            budget=_budget(f, tags),
            reason=f.reason,
        )
        for basis, figures in (("fitted", answer.figures), ("computed", unaccounted))
        for f in figures
    ]
    return tuple(sorted(rows, key=lambda row: (row.name, row.period)))


def model_value(measurement: Measurement, answer: Answer) -> float | None:
    """Evaluate what a measurement is of at the fit's estimates; None where its ratio stands."""
    total = 0.0
    for part in measurement.parts:
        value = _at(part.of, answer)
        if part.over is not None:
            below = _at(part.over, answer)
            if below is None or below <= STILL or value is None:
                return None
            value /= below
        if value is None:
            return None
        total += part.share * value
    return total


def _at(form: Linear, answer: Answer) -> float | None:
    index, x = answer.state.index, answer.solution.point.x
    if any(unknown not in index for unknown, _ in form):
        return None
    return float(sum(c * x[index[unknown]] for unknown, c in form))


def _measurement_row(
    m: Measured, moved: Reconciled | None, answer: Answer, month: IngestedMonth
) -> MeasurementRow:
    measurement = m.measurement
    if moved is None:
        reconciled = model_value(measurement, answer)
        u = _stated(measurement, month.all_draws)
    else:
        reconciled, u = moved.reconciled, moved.u
    return MeasurementRow(
        day=m.day,
        name=measurement.name,
        kind=measurement.kind.value,
        stream=m.stream,
        node=m.node,
        boundary=m.boundary or None,
        quantity=m.quantity,
        basis=m.basis,
        unit="t" if m.basis == "amount" else "1",
        value=measurement.value,
        u_random=measurement.u,
        u=u,
        held=measurement.held,
        estimated=m.estimated,
        reconciled=reconciled,
        adjustment=None if reconciled is None else reconciled - measurement.value,
        standardised=moved.standardised if moved is not None else None,
        redundant=moved is not None and moved.redundant,
        sources=_sources(m, month),
    )


def _stated(measurement: Measurement, draws: tuple[Draw, ...]) -> float | None:
    """Uncertainty of a reading outside the fit, shared sources included."""
    if measurement.u is None:
        return None
    total = measurement.u**2
    for effect in measurement.effects:
        size = effect.factor * draws[effect.draw].u
        total += (size * measurement.value if effect.relative else size) ** 2
    return float(total**0.5)


def _sources(m: Measured, month: IngestedMonth) -> str:
    """What a measurement was made from and which shared errors enter it, as canonical JSON."""
    draws = month.all_draws
    return canonical(
        {
            "tag": m.tag,
            "use": m.use,
            "stage": m.stage,
            "raw": m.raw,
            "raw_unit": m.raw_unit,
            "moisture": m.moisture,
            "coverage": m.coverage,
            "rolled_hours": m.rolled_hours,
            "set_aside": m.set_aside,
            "evidence": sorted(m.evidence),
            "shared": [
                {
                    "source": draws[e.draw].source,
                    "from": month.days[draws[e.draw].first - 1].isoformat(),
                    "factor": e.factor,
                    "relative": e.relative,
                }
                for e in m.measurement.effects
            ],
            "corrections": [
                {"decision": c.decision, "kind": c.kind, "before": c.before, "after": c.after}
                for c in m.corrections
            ],
        }
    )


def _budget(figure: FigureValue, tags: dict[tuple[str, int], str]) -> str:
    """Shares of a figure's variance by instrument and by source, largest first; they add to 1."""
    shares: dict[tuple[str, bool], float] = defaultdict(float)
    for share in figure.budget:
        name = share.name if share.source else tags.get((share.name, share.period), share.name)
        shares[name, share.source] += share.share
    return canonical(
        [
            {"name": name, "source": source, "share": share}
            for (name, source), share in sorted(shares.items(), key=lambda s: (-s[1], s[0]))
        ]
    )


def canonical(value: object) -> str:
    """Write JSON with sorted keys and shortest numbers; refuses NaN."""
    return json.dumps(
        value, sort_keys=True, separators=(",", ":"), allow_nan=False, ensure_ascii=False
    )
