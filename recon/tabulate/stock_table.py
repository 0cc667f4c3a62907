"""Table 7: stocks at the month's two cuts, as signed, with the fit's opinion beside them."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from recon.flowsheet.network import MASS
from recon.ingest.given import OpeningStock
from recon.tabulate.accounts import closing_stock
from recon.tabulate.columns import grade_unit
from recon.tabulate.rounding import leaf_decimals, printed
from recon.tabulate.stream_table import PER_UNIT

if TYPE_CHECKING:
    from recon.ingest.measured import Measured
    from recon.tabulate.as_measured import Stated
    from recon.tabulate.month import Month, Sheet

TABLE = "stocks"


def write_stocks(sheet: Sheet) -> tuple[OpeningStock, ...]:
    """
    Write every stock, for the month and the year, and for days where something states it.

    Returns
    -------
    tuple of OpeningStock
        Next month's opening: each place and quantity as printed, or that there is none.
    """
    month = sheet.month
    found = []
    for node in month.sites[-1].nodes:
        if not node.stock:
            continue
        for q in month.quantities:
            stated = closing_stock(month.measured, node.name, q, 1, len(month.days))
            if stated.number is None and q not in node.conserves:
                continue
            _write(sheet, node.name, q, stated)
            _write_days(sheet, node.name, q)
            number = stated.number
            found.append(
                OpeningStock(
                    node=node.name,
                    quantity=q,
                    value=None if number is None else _printed(number.value, q),
                    u=None if number is None else month.measured.readings.uncertainty(number),
                    basis="by difference" if number is None else stated.basis,
                )
            )
    return tuple(found)


def _printed(value: float, q: str) -> float:
    return float(printed(value, leaf_decimals(q)))


def _write(sheet: Sheet, node: str, q: str, closing: Stated) -> None:
    month, row, name = sheet.month, f"{node} {q}", sheet.month.name
    u = month.measured.readings.uncertainty
    opening = month.measured.stock(0, node, q)
    sheet.words(TABLE, name, row, "method", _method(opening, closing))
    counted = _closing_readings(month, closing)
    sheet.words(TABLE, name, row, "time", _rolled(counted))
    evidence = dict.fromkeys(key for m in counted for key in m.evidence)
    sheet.words(TABLE, name, row, "document", ", ".join(evidence))
    _write_counted(sheet, row, [m for m in counted if m.quantity == q])
    signed = next((o for o in month.opening if (o.node, o.quantity) == (node, q)), None)
    if signed is not None:
        value = None if signed.value is None else _printed(signed.value, q)
        sheet.number(
            TABLE,
            name,
            row,
            "opening_signed",
            value,
            u=signed.u,
            basis=opening.basis,
            reason=opening.reason,
        )
        sheet.number(
            TABLE, name, row, "opening_booked", _printed(signed.booked, q), basis="corrected"
        )
    for column, stated in (("opening", opening), ("closing", closing)):
        number = stated.number
        sheet.number(
            TABLE,
            name,
            row,
            column,
            None if number is None else _printed(number.value, q),
            u=None if number is None else u(number),
            basis=stated.basis,
            reason=stated.reason,
        )
    if opening.number is not None and closing.number is not None:
        change = printed(closing.number.value, leaf_decimals(q)) - printed(
            opening.number.value, leaf_decimals(q)
        )
        sheet.number(
            TABLE,
            name,
            row,
            "change",
            change,
            u=u(closing.number - opening.number),
            basis="computed",
        )
    _write_grade(sheet, node, q, closing)
    _write_fitted(sheet, node, q, closing)
    _write_year(sheet, row, opening, closing, q)


def _write_grade(sheet: Sheet, node: str, q: str, closing: Stated) -> None:
    if q == MASS or closing.number is None:
        return
    month = sheet.month
    dry = closing_stock(month.measured, node, MASS, 1, len(month.days)).number
    if dry is None or not _printed(dry.value, MASS):
        return
    unit = grade_unit(q)
    sheet.number(
        TABLE,
        month.name,
        f"{node} {q}",
        "closing_grade",
        _printed(closing.number.value, q) / _printed(dry.value, MASS) * PER_UNIT[unit],
        u=month.measured.readings.uncertainty(closing.number / dry) * PER_UNIT[unit],
        unit=unit,
        basis=closing.basis,
    )


def _write_fitted(sheet: Sheet, node: str, q: str, closing: Stated) -> None:
    month, row = sheet.month, f"{node} {q}"
    value = None
    for column, boundary in (("fitted_opening", 0), ("fitted_closing", len(month.days))):
        fit = month.fitted.stock(boundary, node, q)
        value = None if fit.value is None else _printed(fit.value, q)
        sheet.number(
            TABLE, month.name, row, column, value, u=fit.u, basis="fitted", reason=fit.reason
        )
    if value is not None and closing.number is not None:
        difference = printed(value, leaf_decimals(q)) - printed(
            closing.number.value, leaf_decimals(q)
        )
        sheet.number(TABLE, month.name, row, "fitted_difference", difference, basis="computed")


def _write_year(sheet: Sheet, row: str, opening: Stated, closing: Stated, q: str) -> None:
    month = sheet.month
    earlier = month.year.this_year
    own = None if opening.number is None else _printed(opening.number.value, q)
    first = month.year.value(earlier[0], TABLE, row, "opening") if earlier else own
    last = None if closing.number is None else _printed(closing.number.value, q)
    if own is not None:
        sheet.leaf(TABLE, row, "opening", own)
    year = month.name[:4]
    sheet.number(
        TABLE,
        year,
        row,
        "opening",
        first,
        basis=opening.basis if not earlier else "read",
        reason="the year's first month states no opening",
    )
    sheet.number(TABLE, year, row, "closing", last, basis=closing.basis, reason=closing.reason)
    if first is not None and last is not None:
        change = printed(last, leaf_decimals(q)) - printed(first, leaf_decimals(q))
        sheet.number(TABLE, year, row, "change", change, basis="computed")


def _write_days(sheet: Sheet, node: str, q: str) -> None:
    """A day's closing: as surveyed where it was, and the slice of the fit."""
    month, row = sheet.month, f"{node} {q}"
    for span in month.spans[:-1]:
        stated = month.measured.stock(span.last, node, q)
        if stated.number is not None:
            sheet.number(
                TABLE,
                span.name,
                row,
                "closing",
                _printed(stated.number.value, q),
                u=month.measured.readings.uncertainty(stated.number),
                basis=stated.basis,
            )
        fit = month.fitted.stock(span.last, node, q)
        sheet.number(
            TABLE,
            span.name,
            row,
            "fitted_closing",
            None if fit.value is None else _printed(fit.value, q),
            u=fit.u,
            basis="fitted",
            reason=fit.reason,
        )


def _method(opening: Stated, closing: Stated) -> str:
    words = {
        "read": "surveyed",
        "settled": "settled",
        "corrected": "surveyed, corrected by decision",
        "estimated": "estimated by rule",
        "by difference": "by difference: opening rolled with measured flows",
    }
    how = "nothing states it" if closing.number is None else words[closing.basis]
    return f"{how}; opening is the take-on" if opening.take_on else how


def _closing_readings(month: Month, closing: Stated) -> list[Measured]:
    """Surveys and samples that the closing rests on."""
    if closing.number is None:
        return []
    measured = month.ingested.measured
    places = [i for i in closing.number.slopes if i < len(measured)]
    return [measured[i] for i in sorted(places) if measured[i].boundary == "closing"]


def _write_counted(sheet: Sheet, row: str, readings: Sequence[Measured]) -> None:
    """What the surveyor counted, before anything was converted."""
    if len(readings) != 1 or readings[0].raw is None or readings[0].basis != "amount":
        return
    m, name = readings[0], sheet.month.name
    sheet.number(TABLE, name, row, "surveyed", m.raw, unit=m.raw_unit, basis="read")
    if m.moisture is not None:
        sheet.number(TABLE, name, row, "moisture", 100.0 * m.moisture, basis="read")


def _rolled(readings: Sequence[Measured]) -> str:
    """How far the survey that counts was moved to the cut."""
    if not readings:
        return ""
    far = max((m.rolled_hours for m in readings), key=abs)
    if far == 0.0:
        return "at the cut"
    return f"rolled {abs(far):.1f} h {'forward' if far > 0 else 'back'} to the cut"
