"""Whether rows of a source keep the column contract, and the typed rows they then are.

The contract is told in ``sql/queries/README.md``. Databases and sheets are read by the same rules;
every fault of a batch is collected before anything is refused.
"""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass, field
from datetime import datetime, timedelta
from decimal import Decimal

import numpy as np
from numpy.typing import NDArray

from recon.errors import ContractError, NoInstantError
from recon.ingest.rows import Quality, Record, RowKind
from recon.plant.instants import instant_of, instants_of, microseconds

READING = ("tag", "at", "value", "quality", "known_at")
RECORD = ("document", "subject", "item", "true_from", "true_to", "known_at", "value", "unit")
OPTIONAL = ("stage", "lot")
KEYS = ("document", "subject", "item", "stage")
NAMES = {
    RowKind.READING: "readings",
    RowKind.ASSAY: "assays",
    RowKind.TICKET: "tickets",
    RowKind.SURVEY: "surveys",
    RowKind.EVENT: "events",
}
"""How ``[[query]]`` of a site file calls each kind."""

SKEW = timedelta(minutes=10)
"""Clocks of sources may go ahead of ours by so much before a time is called future."""

SHOWN = 12
"""So many places are written out for one fault; the rest are counted."""

QUALITY = {q.name.lower(): int(q) for q in Quality}
NUMBERS = {float, int, Decimal, type(None)}


@dataclass(frozen=True, kw_only=True)
class Faults:
    """
    Faults of one batch, the same fault of many rows together.

    Parameters
    ----------
    source : str
        Query or sheet, named in the error.
    """

    source: str
    _found: dict[tuple[str, str], list[str]] = field(default_factory=lambda: defaultdict(list))
    _first: dict[tuple[str, str], object] = field(default_factory=dict)

    def add(self, column: str, what: str, found: object, place: str) -> None:
        """Note that a column holds something wrong at a place."""
        key = (column, what)
        self._first.setdefault(key, found)
        self._found[key].append(place)

    def lines(self) -> Iterator[str]:
        """Give one line a fault, in the order first met."""
        for (column, what), places in self._found.items():
            found = self._first[column, what]
            shown = ", ".join(places[:SHOWN])
            more = f" and {len(places) - SHOWN:,} more" if len(places) > SHOWN else ""
            value = "" if found is None else f", {_said(found)}"
            at = f" ({shown}{more})" if shown else ""
            yield f"{column}: {what}{value}{at}."

    def __bool__(self) -> bool:
        return bool(self._found)

    def refuse(self) -> None:
        """
        Raise what was found, if anything.

        Raises
        ------
        ContractError
        """
        if self._found:
            raise ContractError(self.source, tuple(self.lines()))


@dataclass(frozen=True, kw_only=True)
class Window:
    """
    What was asked for, and when.

    Attributes
    ----------
    since, until : datetime
        Aware; rows are true in or touch ``[since, until)``.
    now : datetime
        Aware; later rows are future.
    """

    since: datetime
    until: datetime
    now: datetime


@dataclass(frozen=True, kw_only=True)
class Columns:
    """
    Readings of one batch, column by column, as given.

    Attributes
    ----------
    at, known_at : ndarray
        UTC microseconds, shape (n,), int64.
    value : ndarray
        Shape (n,); NaN where the source gave none.
    quality : ndarray
        Shape (n,), int8.
    """

    at: NDArray[np.int64]
    value: NDArray[np.float64]
    quality: NDArray[np.int8]
    known_at: NDArray[np.int64]


def missing_columns(kind: RowKind, columns: Sequence[str], faults: Faults) -> bool:
    """Note every column that the contract needs and a source does not give, and doubled ones."""
    needed = READING if kind is RowKind.READING else RECORD
    missing = [column for column in needed if column not in columns]
    for column in missing:
        faults.add(
            column, f"this column is missing; found {', '.join(columns) or 'none'}", None, ""
        )
    for column in sorted({c for c in columns if list(columns).count(c) > 1}):
        faults.add(column, "this column stands twice", None, "")
    return bool(missing)


def columns_of(
    tag: str,
    columns: Sequence[str],
    rows: Sequence[Sequence[object]],
    window: Window,
    faults: Faults,
    place: Callable[[int, str], str],
) -> Columns:
    """
    Turn rows of readings of one tag into columns of numbers.

    Parameters
    ----------
    tag : str
        What was asked for.
    columns : sequence of str
        All of the contract's are there.
    rows : sequence
        As the source gave them.
    window : Window
    faults : Faults
        Grows; the result is of no use where it did.
    place : callable
        Gives the words for a row and column, for messages.
    """
    by_name = dict(zip(columns, zip(*rows, strict=True), strict=True))
    for n, found in enumerate(by_name["tag"]):
        if found != tag:
            faults.add(
                "tag", f'another tag than "{tag}", which was asked for', found, place(n, "tag")
            )
    times = {}
    for name in ("at", "known_at"):
        times[name] = instants_of(
            by_name[name],
            lambda n, error, name=name: faults.add(name, error.what, error.found, place(n, name)),  # type: ignore[misc]
        )
    at, known_at = times["at"], times["known_at"]
    if not faults:
        since, until = microseconds(window.since), microseconds(window.until)
        for n in np.flatnonzero((at < since) | (at >= until)).tolist():
            faults.add(
                "at",
                "outside the window asked for; does the query use :since and :until",
                by_name["at"][n],
                place(n, "at"),
            )
        latest = microseconds(window.now + SKEW)
        for name, numbers in times.items():
            for n in np.flatnonzero(numbers > latest).tolist():
                faults.add(name, "in the future", by_name[name][n], place(n, name))
    return Columns(
        at=at,
        value=_values(by_name["value"], faults, place),
        quality=_qualities(by_name["quality"], faults, place),
        known_at=known_at,
    )


def _values(
    column: Sequence[object], faults: Faults, place: Callable[[int, str], str]
) -> NDArray[np.float64]:
    if not set(map(type, column)) <= NUMBERS:
        column = [_number(v, n, "value", faults, place) for n, v in enumerate(column)]
    values = np.array(column, dtype=np.float64)
    for n in np.flatnonzero(np.isinf(values)):
        faults.add("value", "an infinite number", values[n], place(int(n), "value"))
    return values


def _number(
    found: object, n: int, column: str, faults: Faults, place: Callable[[int, str], str]
) -> float | None:
    """Give a number, None for a missing one and NaN for one that the source calls so."""
    if found is None:
        return None
    if isinstance(found, float | int | Decimal | np.number) and not isinstance(found, bool):
        return float(found)
    what = "text where a number is due" if isinstance(found, str) else "not a number"
    faults.add(column, what, found, place(n, column))
    return None


def _qualities(
    column: Sequence[object], faults: Faults, place: Callable[[int, str], str]
) -> NDArray[np.int8]:
    if set(map(type, column)) == {int}:
        numbers = np.array(column)
        if ((numbers >= 0) & (numbers <= 2)).all():
            return numbers.astype(np.int8)
    codes = list(column)
    for n, found in enumerate(column):
        code = QUALITY.get(found.strip().lower(), -1) if isinstance(found, str) else found
        if not (isinstance(code, int) and not isinstance(code, bool) and code in (0, 1, 2)):
            faults.add("quality", "0 good, 1 uncertain or 2 bad is due", found, place(n, "quality"))
            code = int(Quality.BAD)
        codes[n] = code
    return np.array(codes, dtype=np.int8)


def records_of(
    kind: RowKind,
    columns: Sequence[str],
    rows: Iterable[Sequence[object]],
    window: Window,
    faults: Faults,
    place: Callable[[int, str], str],
    instant: Callable[[object], datetime] = instant_of,
) -> list[Record]:
    """
    Turn rows of one kind into records, in natural-key order.

    A number that is not a number becomes a missing value; what the source gave is kept in
    ``extra`` as ``value as given``.

    Parameters
    ----------
    kind : RowKind
        Not READING.
    columns : sequence of str
        All of the contract's are there; others are kept in ``extra``.
    rows : iterable
    window : Window
        ``since`` and ``until`` are not looked at here.
    faults : Faults
        Grows; the result is of no use where it did.
    place : callable
        Gives the words for a row and column, for messages.
    instant : callable
        Reads a time.
    """
    result: list[Record] = []
    seen: dict[tuple[str, datetime], str] = {}
    extra = [c for c in columns if c not in RECORD and c not in OPTIONAL]
    for n, row in enumerate(rows):
        given = dict(zip(columns, row, strict=True))
        record = _record(kind, given, extra, n, window, faults, place, instant)
        if record is None:
            continue
        key = (record.natural_key, record.known_at)
        if key in seen:
            faults.add(
                "document, subject, item, stage, known_at",
                "the same key twice",
                record.natural_key,
                f"{seen[key]} and {place(n, 'document')}",
            )
        seen[key] = place(n, "document")
        result.append(record)
    result.sort(key=lambda r: (r.natural_key, r.known_at))
    return result


def _record(
    kind: RowKind,
    given: dict[str, object],
    extra: Sequence[str],
    n: int,
    window: Window,
    faults: Faults,
    place: Callable[[int, str], str],
    instant: Callable[[object], datetime],
) -> Record | None:
    texts = {
        column: _text(given.get(column), column, n, faults, place)
        for column in ("document", "subject", "item", "unit", *OPTIONAL)
    }
    times: dict[str, datetime] = {}
    for column in ("true_from", "true_to", "known_at"):
        try:
            times[column] = instant(given[column])
        except NoInstantError as error:
            faults.add(column, error.what, error.found, place(n, column))
            continue
        if times[column] > window.now + SKEW:
            faults.add(column, "in the future", given[column], place(n, column))
    number = _number(given["value"], n, "value", faults, place)
    if len(times) < 3:
        return None
    if times["true_to"] < times["true_from"]:
        faults.add("true_to", "before true_from", given["true_to"], place(n, "true_to"))
    if number is not None and math.isinf(number):
        faults.add("value", "an infinite number", number, place(n, "value"))
    if number is not None and not texts["unit"] and kind is not RowKind.EVENT:
        faults.add("unit", "is empty beside a value", None, place(n, "unit"))
    kept = {c: _plain(given[c]) for c in extra if given[c] is not None}
    if number is not None and math.isnan(number):
        kept["value as given"], number = str(given["value"]), None
    return Record(
        kind=kind,
        true_from=times["true_from"],
        true_to=times["true_to"],
        known_at=times["known_at"],
        value=number,
        extra=tuple(sorted(kept.items())),
        **texts,
    )


def _text(
    found: object, column: str, n: int, faults: Faults, place: Callable[[int, str], str]
) -> str:
    if isinstance(found, str):
        text = found.strip()
    elif isinstance(found, int) and not isinstance(found, bool):
        text = str(found)
    elif isinstance(found, float) and found.is_integer():
        text = str(int(found))
    elif found is None:
        text = ""
    else:
        faults.add(column, "text is due", found, place(n, column))
        return ""
    if not text and column in ("document", "subject", "item"):
        faults.add(column, "is empty", None, place(n, column))
    if "|" in text and column in KEYS:
        faults.add(column, 'holds "|", which parts the natural key', found, place(n, column))
    return text


def _plain(found: object) -> str:
    return found.isoformat() if isinstance(found, datetime) else str(found)


def _said(found: object) -> str:
    text = f'"{found}"' if isinstance(found, str) else _plain(found)
    return text if len(text) <= 60 else text[:57] + "..."
