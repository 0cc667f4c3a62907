"""Which formula gives a cell from others in the workbook; none where it would not give the figure.

Formulas come from the site's drawing and from the dictionary of columns, never from text in the
data. Each is worked out here as well, in decimal for sums; where a formula would not give the
printed figure (a stream that changed its ends within the month), the figure stands as a number.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from decimal import Decimal
from typing import TYPE_CHECKING

from recon.flowsheet.network import MASS
from recon.tabulate.boundaries import Boundary, boundaries_of
from recon.tabulate.running import LIMIT_K, POWER_Z

if TYPE_CHECKING:
    from recon.declare.site import Site, SiteStream, Term
    from recon.documents.find import Cells
    from recon.documents.grid import Grid, Places
    from recon.tabulate.cells import Cell

AGREES = 1e-9
"""A formula gives its figure within this, relative to the figure or to one unit."""
BALANCES = ("site-balance", "section-balance")
Piece = tuple[int, str, Decimal]
"""Sign, address and value of one term."""


@dataclass(frozen=True, kw_only=True)
class Formula:
    """A formula without its equals sign, and what it gives."""

    text: str
    value: float


class Formulas:
    """
    Finds formulas of one workbook.

    Parameters
    ----------
    site : Site
        In force at the month's end.
    cells : Cells
    places : Places
    month : str
        Period of the month.
    """

    def __init__(self, site: Site, cells: Cells, places: Places, month: str) -> None:
        self._site, self._cells, self._places, self._month = site, cells, places, month
        self._boundaries: dict[str, Boundary] = {b.name: b for b in boundaries_of([site])}
        self._figures = {f.name: f for f in site.figures}

    def of(self, cell: Cell, grid: Grid) -> Formula | None:
        """Give the formula of a cell, checked against its figure."""
        if cell.value is None or cell.period != self._month:
            return None
        found = self._find(cell, grid.sheet)
        if found is None:
            return None
        scale = max(1.0, abs(cell.value))
        return found if abs(found.value - cell.value) <= AGREES * scale else None

    def _find(self, cell: Cell, here: str) -> Formula | None:
        if cell.table == "streams":
            return self._stream(cell, here)
        if cell.table in BALANCES:
            return self._balance(cell, here)
        if cell.table == "stocks":
            return self._stock(cell, here)
        if cell.table == "node-closure":
            return self._closure(cell, here)
        if cell.table == "recoveries":
            return self._recovery(cell, here)
        if cell.table == "measured-reconciled":
            return self._adjustment(cell, here)
        return None

    def _stream(self, cell: Cell, here: str) -> Formula | None:
        """Totals add their days on the sheet of leaves; moisture and grades divide totals."""
        column, row = cell.column, cell.row
        if column == "measured_moisture":
            dry, wet = self._pair(cell, here, "measured_dry", "measured_wet")
            if dry is None or wet is None or not wet[2]:
                return None
            return Formula(
                text=f"100*(1-{dry[1]}/{wet[1]})", value=float(100 * (1 - dry[2] / wet[2]))
            )
        for block in ("measured", "fitted"):
            if column.startswith(f"{block}_grade_"):
                metal = column.replace("grade", "contained")
                top, below = self._pair(cell, here, metal, f"{block}_dry")
                by = 1_000_000 if cell.unit == "g/t" else 100
                return _share(top, below, by)
        days = [p for p in self._cells.periods("streams") if len(p) == len("2026-01-01")]
        pieces = [
            piece for d in days if (piece := self._piece(1, cell.table, d, row, column, here))
        ]
        return _range(pieces)

    def _balance(self, cell: Cell, here: str) -> Formula | None:
        quantity = cell.row.rsplit(" ", 1)[-1]
        name = cell.row.removesuffix(quantity).strip() or "site"
        boundary = self._boundaries.get(name)
        column = cell.column
        if boundary is None:
            return None
        block = "fitted" if column.startswith("fitted_") else "measured"
        flow = column.removeprefix("fitted_")
        if flow in ("receipts", "products", "discards"):
            return _plus(self._flows(boundary, quantity, flow, block, here))
        if flow in ("opening", "closing"):
            return _plus(
                self._piece(1, "stocks", self._month, f"{n.name} {quantity}", column, here)
                for n in boundary.stocks(self._site, quantity)
            )
        lead = "fitted_" if block == "fitted" else ""
        if column in ("unaccounted", "fitted_imbalance"):
            names = ("opening", "receipts", "products", "discards", "closing")
            signs = (1, 1, -1, -1, -1)
            return _plus(
                self._piece(s, cell.table, self._month, cell.row, lead + n, here)
                for s, n in zip(signs, names, strict=True)
            )
        if column == "stock_change":
            return _plus(
                self._piece(s, cell.table, self._month, cell.row, n, here)
                for s, n in ((1, "closing"), (-1, "opening"))
            )
        return self._tested(cell, here)

    def _tested(self, cell: Cell, here: str) -> Formula | None:
        """Share of input, z, and what follows from u."""
        table, row = cell.table, cell.row
        at = self._piece(1, table, self._month, row, "unaccounted", here)
        found = self._cells.at(table, self._month, row, "unaccounted")
        u = found.u if found else None
        place = self._places.address(table, self._month, row, "unaccounted", here=here, u=True)
        if at is None or u is None or place is None or not u:
            return None
        if cell.column == "unaccounted_share":
            receipts = self._piece(1, table, self._month, row, "receipts", here)
            return _share(at, receipts, 100)
        if cell.column == "z":
            return Formula(text=f"{at[1]}/{place}", value=float(at[2]) / u)
        if cell.column == "investigate_beyond":
            return Formula(text=f"{LIMIT_K:g}*{place}", value=LIMIT_K * u)
        if cell.column == "loss_not_shown":
            text = f"({LIMIT_K:g}+{POWER_Z!r})*{place}"
            return Formula(text=text, value=(LIMIT_K + POWER_Z) * u)
        return None

    def _stock(self, cell: Cell, here: str) -> Formula | None:
        def piece(sign: int, column: str) -> Piece | None:
            return self._piece(sign, "stocks", self._month, cell.row, column, here)

        if cell.column == "change":
            return _plus([piece(1, "closing"), piece(-1, "opening")])
        if cell.column == "fitted_difference":
            return _plus([piece(1, "fitted_closing"), piece(-1, "closing")])
        if cell.column == "opening" and piece(1, "opening_signed"):
            return _plus([piece(1, "opening_signed"), piece(1, "opening_booked")])
        if cell.column == "closing_grade":
            node = cell.row.rsplit(" ", 1)[0]
            dry = self._piece(1, "stocks", self._month, f"{node} {MASS}", "closing", here)
            return _share(piece(1, "closing"), dry, 1_000_000 if cell.unit == "g/t" else 100)
        return None

    def _closure(self, cell: Cell, here: str) -> Formula | None:
        quantity = cell.row.rsplit(" ", 1)[-1]
        name = cell.row.removesuffix(quantity).strip()
        boundary = self._boundaries.get(name)
        if boundary is None or boundary.kind != "node":
            return None
        if cell.column == "z":
            found = self._cells.at(cell.table, self._month, cell.row, "raw_imbalance")
            at = self._places.address(cell.table, self._month, cell.row, "raw_imbalance", here=here)
            u = self._places.address(
                cell.table, self._month, cell.row, "raw_imbalance", here=here, u=True
            )
            if found is None or found.value is None or not found.u:
                return None
            return Formula(text=f"{at}/{u}", value=found.value / found.u)
        if cell.column != "raw_imbalance":
            return None
        pieces = list(self._flows(boundary, quantity, "receipts", "measured", here))
        for flow in ("products", "discards"):
            pieces += [_turned(p) for p in self._flows(boundary, quantity, flow, "measured", here)]
        if boundary.stocks(self._site, quantity):
            row = f"{name} {quantity}"
            pieces += [
                self._piece(s, "stocks", self._month, row, c, here)
                for s, c in ((1, "opening"), (-1, "closing"))
            ]
        return _plus(pieces)

    def _recovery(self, cell: Cell, here: str) -> Formula | None:
        figure = self._figures.get(cell.row)
        if cell.column == "fitted_less_measured":
            return _plus(
                self._piece(s, cell.table, self._month, cell.row, c, here)
                for s, c in ((1, "fitted"), (-1, "measured"))
            )
        if figure is None or cell.column not in ("measured", "fitted"):
            return None
        top = self._sum(figure.of, cell.column, here)
        below = self._sum(figure.over, cell.column, here)
        if top is None or below is None or not below.value:
            return None
        by = 100 if cell.unit == "%" else 1
        return Formula(text=f"{by}*({top.text})/({below.text})", value=by * top.value / below.value)

    def _sum(self, terms: Sequence[Term], block: str, here: str) -> Formula | None:
        texts, total = [], 0.0
        for t in terms:
            column = _amount(block, t.quantity)
            piece = self._piece(1, "streams", self._month, t.stream, column, here)
            if piece is None:
                return None
            texts.append(piece[1] if t.factor == 1.0 else f"{t.factor!r}*{piece[1]}")
            total += t.factor * float(piece[2])
        return Formula(text="+".join(texts), value=total)

    def _adjustment(self, cell: Cell, here: str) -> Formula | None:
        def piece(sign: int, column: str) -> Piece | None:
            return self._piece(sign, cell.table, self._month, cell.row, column, here)

        if cell.column == "adjustment":
            return _plus([piece(1, "reconciled"), piece(-1, "measured")])
        if cell.column == "adjustment_share":
            return _share(piece(1, "adjustment"), piece(1, "measured"), 100)
        return None

    def _flows(
        self, boundary: Boundary, quantity: str, flow: str, block: str, here: str
    ) -> Iterator[Piece | None]:
        streams: Sequence[SiteStream]
        if flow == "receipts":
            streams = boundary.entering(self._site, quantity)
        else:
            streams = [
                s
                for s in boundary.leaving(self._site, quantity)
                if (s.role == "product") == (flow == "products")
            ]
        for s in streams:
            yield self._piece(1, "streams", self._month, s.name, _amount(block, quantity), here)

    def _pair(
        self, cell: Cell, here: str, top: str, below: str
    ) -> tuple[Piece | None, Piece | None]:
        return (
            self._piece(1, cell.table, self._month, cell.row, top, here),
            self._piece(1, cell.table, self._month, cell.row, below, here),
        )

    def _piece(
        self, sign: int, table: str, period: str, row: str, column: str, here: str
    ) -> Piece | None:
        value = self._cells.value(table, period, row, column)
        address = self._places.address(table, period, row, column, here=here)
        if value is None or address is None:
            return None
        return sign, address, Decimal(repr(value))


def _amount(block: str, quantity: str) -> str:
    return f"{block}_dry" if quantity == MASS else f"{block}_contained_{quantity}"


def _turned(piece: Piece | None) -> Piece | None:
    return None if piece is None else (-piece[0], piece[1], piece[2])


def _plus(pieces: Iterator[Piece | None] | Sequence[Piece | None]) -> Formula | None:
    """Signed sum; nothing where a term is missing; 0 of no term."""
    found = list(pieces)
    if any(p is None for p in found):
        return None
    terms = [p for p in found if p is not None]
    if not terms:
        return Formula(text="0", value=0.0)
    text = "".join(f"{'+' if sign > 0 else '-'}{address}" for sign, address, _ in terms)
    total = sum((sign * value for sign, _, value in terms), Decimal(0))
    return Formula(text=text.removeprefix("+"), value=float(total))


def _range(pieces: Sequence[Piece]) -> Formula | None:
    """Sum of a column of leaves that stand one below the other."""
    if not pieces:
        return None
    first, last = pieces[0][1], pieces[-1][1]
    return Formula(
        text=f"SUM({first}:{last.rsplit('!', 1)[-1]})",
        value=float(sum((value for _, _, value in pieces), Decimal(0))),
    )


def _share(top: Piece | None, below: Piece | None, by: int) -> Formula | None:
    if top is None or below is None or not below[2]:
        return None
    return Formula(text=f"{by}*{top[1]}/{below[1]}", value=float(by * top[2]) / float(below[2]))
