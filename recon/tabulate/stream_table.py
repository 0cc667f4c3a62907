"""Table 4: what each stream carried, in a measured block and a fitted block that recompute."""

from __future__ import annotations

from collections.abc import Sequence
from decimal import Decimal
from typing import TYPE_CHECKING

from recon.flowsheet.balances import Amount, Linear
from recon.flowsheet.network import MASS
from recon.tabulate.accounts import Sum, first_few, leaf_decimals_of, summed
from recon.tabulate.as_measured import Stated
from recon.tabulate.columns import grade_unit
from recon.tabulate.derived import Derived
from recon.tabulate.rounding import footed, printed

if TYPE_CHECKING:
    from recon.declare.site import SiteStream
    from recon.tabulate.fitted import Fit, Ratio
    from recon.tabulate.month import Sheet, Span

TABLE = "streams"
PER_UNIT = {"%": 100.0, "g/t": 1e6, "-": 1.0, "1": 1.0}


def write_streams(sheet: Sheet) -> None:
    """Write both blocks of every stream for each day, the month and the year to date."""
    month = sheet.month
    for stream in month.streams:
        for column, text in (
            ("from", stream.source or ""),
            ("to", stream.target or ""),
            ("role", stream.role),
        ):
            sheet.words(TABLE, month.name, stream.name, column, text)
        for span in month.spans:
            _measured(sheet, stream, span)
    _fitted(sheet)
    _year_ratios(sheet)


def _year_ratios(sheet: Sheet) -> None:
    """Grades and moistures of the year to date, from its printed totals."""
    month = sheet.month
    year = month.name[:4]
    amounts = {
        (c.row, c.column): c.value
        for c in sheet.cells
        if c.table == TABLE and c.period == year and c.value is not None
    }
    for stream in month.streams:
        row = stream.name
        wet, dry = amounts.get((row, "measured_wet")), amounts.get((row, "measured_dry"))
        if wet and dry is not None:
            share = 100.0 * (1.0 - dry / wet)
            sheet.number(TABLE, year, row, "measured_moisture", share, basis="computed")
        for q in month.components:
            if MASS not in stream.carries or q not in stream.carries:
                continue
            for block in ("measured", "fitted"):
                metal = amounts.get((row, f"{block}_contained_{q}"))
                mass = amounts.get((row, f"{block}_dry"))
                unit = grade_unit(q)
                known = metal is not None and mass
                value = metal / mass * PER_UNIT[unit] if metal is not None and mass else None
                sheet.number(
                    TABLE,
                    year,
                    row,
                    f"{block}_grade_{q}",
                    value,
                    unit=unit,
                    basis="computed",
                    reason="" if known else "no figure of contained metal and dry mass",
                )


def _measured(sheet: Sheet, stream: SiteStream, span: Span) -> None:
    month = sheet.month
    sums: dict[str, Sum] = {}
    for q in month.quantities:
        days = month.carried(stream.name, q, span)
        if not days:
            continue
        decimals = leaf_decimals_of(stream.role, q)
        stated = [month.measured.amount(p, stream.name, q) for p in days]
        if q == MASS:
            _wet(sheet, stream, span, stated, decimals)
        sums[q] = summed([(s, decimals) for s in stated])
        column = "measured_dry" if q == MASS else f"measured_contained_{q}"
        _write_sum(sheet, stream.name, span, column, sums[q])
    if MASS in sums:
        for q in month.components:
            if q in sums:
                _grade(sheet, stream.name, span, q, sums[MASS], sums[q])
    _provisional(sheet, stream.name, span, sums)


def _write_sum(sheet: Sheet, row: str, span: Span, column: str, total: Sum) -> None:
    u = sheet.month.measured.readings.uncertainty(total.number) if total.number else None
    if span.day:
        sheet.number(
            TABLE, span.name, row, column, total.footed, u=u, basis=total.basis, reason=total.reason
        )
        return
    sheet.total(
        TABLE,
        row,
        column,
        total.footed,
        exact=total.number.value if total.number else None,
        u=u,
        basis=total.basis,
        reason=total.reason,
    )


def _wet(
    sheet: Sheet, stream: SiteStream, span: Span, dry: Sequence[Stated], decimals: int
) -> None:
    """Wet mass where every day of the span had a moisture or carried nothing."""
    terms: list[Stated] = []
    for s in dry:
        if s.wet is not None:
            terms.append(Stated(number=s.wet, basis=s.basis))
        elif s.number is not None and s.number.value == 0.0:
            terms.append(s)
        else:
            return
    if not any(s.wet is not None for s in dry):
        return
    wet = summed([(t, decimals) for t in terms])
    _write_sum(sheet, stream.name, span, "measured_wet", wet)
    total = footed(printed(s.number.value, decimals) for s in dry if s.number is not None)
    if wet.footed:
        share = float(100 * (1 - total / wet.footed))
        sheet.number(TABLE, span.name, stream.name, "measured_moisture", share, basis="computed")


def _grade(sheet: Sheet, row: str, span: Span, q: str, dry: Sum, metal: Sum) -> None:
    unit = grade_unit(q)
    value, u, reason = None, None, metal.reason or dry.reason
    if dry.number and metal.number and dry.footed is not None and metal.footed is not None:
        if dry.footed == 0 or dry.number.value == 0.0:
            reason = "stream stands"
        else:
            value = float(metal.footed / dry.footed) * PER_UNIT[unit]
            ratio: Derived = metal.number / dry.number
            u = sheet.month.measured.readings.uncertainty(ratio) * PER_UNIT[unit]
    sheet.number(
        TABLE,
        span.name,
        row,
        f"measured_grade_{q}",
        value,
        u=u,
        unit=unit,
        basis=metal.basis,
        reason=reason,
    )


def _provisional(sheet: Sheet, row: str, span: Span, sums: dict[str, Sum]) -> None:
    """Share on provisional values of the leading metal, or of dry mass where there is none."""
    leading = next((q for q in sheet.month.components if q in sums), MASS)
    total = sums.get(leading)
    if total is None or total.number is None or total.number.value == 0.0:
        return
    share = 100.0 * total.provisional / abs(total.number.value)
    sheet.number(TABLE, span.name, row, "provisional_share", share, basis="computed")


def _fitted(sheet: Sheet) -> None:
    month = sheet.month
    asked: list[Ratio] = []
    places: list[tuple[SiteStream, str, bool]] = []
    for stream in month.streams:
        for q in month.quantities:
            days = month.carried(stream.name, q, month.whole)
            if not days:
                continue
            of: Linear = tuple((Amount(p, stream.name, q), 1.0) for p in days)
            places.append((stream, q, False))
            asked.append((of, None))
            if q != MASS and MASS in stream.carries:
                over: Linear = tuple((Amount(p, stream.name, MASS), 1.0) for p in days)
                places.append((stream, q, True))
                asked.append((of, over))
    found = month.fitted.ratios(asked)
    totals: dict[tuple[str, str], Decimal] = {}
    for (stream, q, grade), fit in zip(places, found, strict=True):
        if grade:
            _fitted_grade(sheet, stream.name, month.whole, q, totals, fit)
        else:
            total = _fitted_total(sheet, stream, q, fit)
            if total is not None:
                totals[stream.name, q] = total
    for span in month.spans[:-1]:
        _fitted_day(sheet, span)


def _fitted_total(sheet: Sheet, stream: SiteStream, q: str, fit: Fit) -> Decimal | None:
    month = sheet.month
    leaves: list[Decimal] = []
    missing: list[str] = []
    for p in month.carried(stream.name, q, month.whole):
        day = month.fitted.amount(p, stream.name, q)
        if day.value is None:
            missing.append(f"{month.days[p - 1].isoformat()}: {day.reason}")
        else:
            leaves.append(printed(day.value, leaf_decimals_of(stream.role, q)))
    total = None if missing else footed(leaves)
    sheet.total(
        TABLE,
        stream.name,
        "fitted_dry" if q == MASS else f"fitted_contained_{q}",
        total,
        exact=fit.value,
        u=fit.u,
        basis="fitted",
        reason=first_few(missing),
    )
    return total


def _fitted_grade(
    sheet: Sheet,
    row: str,
    span: Span,
    q: str,
    totals: dict[tuple[str, str], Decimal],
    fit: Fit,
) -> None:
    dry, metal = totals.get((row, MASS)), totals.get((row, q))
    unit = grade_unit(q)
    value = float(metal / dry) * PER_UNIT[unit] if metal is not None and dry else None
    sheet.number(
        TABLE,
        span.name,
        row,
        f"fitted_grade_{q}",
        value,
        u=None if fit.u is None else fit.u * PER_UNIT[unit],
        unit=unit,
        basis="fitted",
        reason=fit.reason or ("stream stands" if value is None else ""),
    )


def _fitted_day(sheet: Sheet, span: Span) -> None:
    month, p = sheet.month, span.first
    for stream in month.sites[p - 1].streams:
        totals: dict[tuple[str, str], Decimal] = {}
        for q in month.quantities:
            if q not in stream.carries:
                continue
            fit = month.fitted.amount(p, stream.name, q)
            value = (
                None if fit.value is None else printed(fit.value, leaf_decimals_of(stream.role, q))
            )
            if value is not None:
                totals[stream.name, q] = value
            sheet.number(
                TABLE,
                span.name,
                stream.name,
                "fitted_dry" if q == MASS else f"fitted_contained_{q}",
                value,
                u=fit.u,
                basis="fitted",
                reason=fit.reason,
            )
            if q != MASS and MASS in stream.carries:
                grade = month.fitted.grade(p, stream.name, q)
                _fitted_grade(sheet, stream.name, span, q, totals, grade)
