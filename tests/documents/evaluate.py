"""Recalculate a workbook: read its formulas with openpyxl and work them out, caches ignored.

Knows what our workbooks use: numbers, cells of any sheet, SUM over a column, + - * / and brackets.
"""

from __future__ import annotations

import io
import re
from typing import Any

from openpyxl import load_workbook
from openpyxl.utils import range_boundaries

TOKEN = re.compile(
    r"\s*(?:(?P<sum>SUM\()|(?P<ref>(?:'[^']+'!)?[A-Z]+[0-9]+(?::[A-Z]+[0-9]+)?)"
    r"|(?P<number>[0-9]+(?:\.[0-9]+)?(?:e[+-]?[0-9]+)?)|(?P<sign>[-+*/()]))"
)


class Recalculated:
    """A workbook whose formulas are worked out from its numbers."""

    def __init__(self, content: bytes) -> None:
        self.book = load_workbook(io.BytesIO(content))
        self.cached = load_workbook(io.BytesIO(content), data_only=True)
        self._known: dict[tuple[str, str], float] = {}

    def formulas(self) -> list[tuple[str, str, str]]:
        """Sheet, address and text of every formula."""
        return [
            (sheet.title, cell.coordinate, str(cell.value))
            for sheet in self.book.worksheets
            for row in sheet.iter_rows()
            for cell in row
            if cell.data_type == "f"
        ]

    def value(self, sheet: str, address: str) -> float:
        """Work a cell out; blank and text count as nothing."""
        key = (sheet, address)
        if key not in self._known:
            content: Any = self.book[sheet][address].value
            if isinstance(content, str) and self.book[sheet][address].data_type == "f":
                self._known[key] = _Parser(self, sheet, content[1:]).whole()
            else:
                self._known[key] = float(content) if isinstance(content, int | float) else 0.0
        return self._known[key]


class _Parser:
    def __init__(self, book: Recalculated, sheet: str, text: str) -> None:
        self._book, self._sheet = book, sheet
        self._tokens: list[tuple[str, str]] = []
        at = 0
        while at < len(text):
            found = TOKEN.match(text, at)
            if found is None:
                raise ValueError(f"formula not understood at {text[at:]!r}")
            kind = found.lastgroup or ""
            self._tokens.append((kind, found.group(kind)))
            at = found.end()
        self._at = 0

    def whole(self) -> float:
        total = self._sum()
        if self._at != len(self._tokens):
            raise ValueError("formula goes on after its end")
        return total

    def _sum(self) -> float:
        total = self._product()
        while (sign := self._sign("+-")) is not None:
            total = total + self._product() if sign == "+" else total - self._product()
        return total

    def _product(self) -> float:
        total = self._factor()
        while (sign := self._sign("*/")) is not None:
            total = total * self._factor() if sign == "*" else total / self._factor()
        return total

    def _factor(self) -> float:
        if self._sign("-") is not None:
            return -self._factor()
        kind, text = self._tokens[self._at]
        self._at += 1
        if kind == "number":
            return float(text)
        if kind == "ref":
            sheet, cell = self._place(text)
            return self._book.value(sheet, cell)
        if kind == "sum":
            total = self._range(self._tokens[self._at][1])
            self._at += 1
        else:
            total = self._sum()
        self._at += 1  # the closing bracket
        return total

    def _sign(self, signs: str) -> str | None:
        if self._at < len(self._tokens):
            kind, text = self._tokens[self._at]
            if kind == "sign" and text in signs:
                self._at += 1
                return text
        return None

    def _place(self, text: str) -> tuple[str, str]:
        if "!" not in text:
            return self._sheet, text
        sheet, cell = text.rsplit("!", 1)
        return sheet.strip("'"), cell

    def _range(self, text: str) -> float:
        sheet, cells = self._place(text)
        left, top, right, bottom = range_boundaries(cells)
        assert left == right
        column = "".join(c for c in cells.split(":")[0] if c.isalpha())
        return sum(self._book.value(sheet, f"{column}{i}") for i in range(top or 1, bottom + 1))
