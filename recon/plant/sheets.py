"""Sheets as a source: laboratory results, surveys, tickets, the cut-off sheet of trucks and cells.

The columns are those of the queries (``sql/queries/README.md``). A file, or a folder of files, is
read as a whole or not at all: whoever fills it in sees every fault by its cell.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Iterator, Sequence
from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path

import numpy as np

from recon.errors import ContractError, NoInstantError, UnreadableFileError
from recon.findings import Finding
from recon.ingest.rows import Record, RowKind, Series
from recon.plant.cells import Table, read_table
from recon.plant.contract import (
    NAMES,
    READING,
    Columns,
    Faults,
    Window,
    columns_of,
    missing_columns,
    records_of,
)
from recon.plant.instants import EARLIEST, EPOCH, LATEST, local_instant_of, microseconds
from recon.plant.one_instant import in_time_order, joined

TIMES = ("at", "true_from", "true_to", "known_at")
LOCAL = "_local"


class SheetPlant:
    """
    Reads one kind of row from a sheet or a folder of sheets.

    Parameters
    ----------
    kind : RowKind
    path : Path
        ``.csv`` or ``.xlsx`` file, or a folder of them.
    zone : str
        Plant time, for columns that end in ``_local``.
    now : callable
        The clock, aware.
    """

    def __init__(
        self,
        kind: RowKind,
        path: Path,
        *,
        zone: str,
        now: Callable[[], datetime] = lambda: datetime.now(UTC),
    ) -> None:
        self._kind = kind
        self._path = path
        self._zone = zone
        self._now = now
        self._noted: list[Finding] = []

    def readings(self, tags: Sequence[str], since: datetime, until: datetime) -> Iterator[Series]:
        """
        Yield each tag's readings with ``since <= at < until``, and the one in force at ``since``.

        Raises
        ------
        UnreadableFileError, ContractError
        """
        tables = self._tables()
        faults: list[str] = []
        parts: dict[str, list[Columns]] = {}
        for table in tables:
            for tag, columns in self._by_tag(table, faults).items():
                parts.setdefault(tag, []).append(columns)
        found = {}
        for tag in tags:
            doubled = Faults(source=tag)
            found[tag] = in_time_order(joined(parts.get(tag, [])), tag, doubled, self._noted)
            faults.extend(f"{tag}: {line}" for line in doubled.lines())
        if faults:
            raise ContractError(str(self._path), faults)
        for tag in tags:
            yield _between(tag, found[tag], microseconds(since), microseconds(until))

    def records(self, kind: RowKind, since: datetime, until: datetime) -> Iterator[Record]:
        """
        Yield records whose span touches ``[since, until)``, every stage, in natural-key order.

        Raises
        ------
        UnreadableFileError, ContractError
            The whole sheet is checked, not only what is asked for.
        """
        if kind is not self._kind:
            return
        faults: list[str] = []
        seen: dict[tuple[str, datetime], str] = {}
        every: list[Record] = []
        for table in self._tables():
            for record in self._records(table, faults):
                key = (record.natural_key, record.known_at)
                if key in seen and seen[key] != table.path:
                    faults.append(
                        f"{table.path}: {record.natural_key}, known at "
                        f"{record.known_at.isoformat(sep=' ')}, stands in {seen[key]} as well."
                    )
                seen.setdefault(key, table.path)
                every.append(record)
        if faults:
            raise ContractError(str(self._path), faults)
        every.sort(key=lambda r: (r.natural_key, r.known_at))
        yield from (r for r in every if r.true_from < until and r.true_to >= since)

    def query(self, kind: RowKind) -> str:
        """Say which files are read, each with the SHA-256 of its bytes."""
        if kind is not self._kind:
            return ""
        lines = []
        for path in self._files():
            try:
                digest = hashlib.sha256(path.read_bytes()).hexdigest()
            except OSError as error:
                raise UnreadableFileError(
                    str(path), f"cannot be read: {error.strerror}."
                ) from error
            lines.append(f"{path.name} {digest}")
        return "\n".join(lines)

    def noted(self) -> tuple[Finding, ...]:
        """Give what was found in passing since this was last asked."""
        noted, self._noted = tuple(self._noted), []
        return noted

    def close(self) -> None:
        """Nothing is kept open."""

    def _files(self) -> list[Path]:
        if not self._path.is_dir():
            return [self._path]
        files = [
            p
            for p in sorted(self._path.iterdir())
            if p.suffix.lower() in (".csv", ".xlsx") and not p.name.startswith(("~$", "."))
        ]
        if not files:
            raise UnreadableFileError(str(self._path), "holds no .csv or .xlsx file.")
        return files

    def _tables(self) -> list[Table]:
        """Read every file; faults of all of them together."""
        tables = []
        faults: list[str] = []
        for path in self._files():
            try:
                tables.append(read_table(path, NAMES[self._kind]))
            except ContractError as error:
                faults.extend(f"{error.source}: {fault}" for fault in error.faults)
            except UnreadableFileError as error:
                faults.append(f"{error.path}: {error.reason}")
        if faults:
            raise ContractError(str(self._path), faults)
        return tables

    def _records(self, table: Table, faults: list[str]) -> list[Record]:
        own = Faults(source=table.path)
        table = in_utc(table, self._zone, own)
        records: list[Record] = []
        if not missing_columns(self._kind, table.columns, own):
            records = records_of(
                self._kind, table.columns, table.rows, self._window(), own, table.address
            )
        faults.extend(f"{table.path}: {line}" for line in own.lines())
        return records

    def _by_tag(self, table: Table, faults: list[str]) -> dict[str, Columns]:
        own = Faults(source=table.path)
        table = in_utc(table, self._zone, own)
        result = {}
        if not missing_columns(RowKind.READING, table.columns, own):
            kept = [table.columns.index(name) for name in READING]
            places: dict[str, list[int]] = {}
            for n, row in enumerate(table.rows):
                if row[kept[0]] is None:
                    own.add("tag", "is empty", None, table.address(n, "tag"))
                places.setdefault(str(row[kept[0]]), []).append(n)
            for tag, numbers in places.items():
                rows = [(tag, *(table.rows[n][i] for i in kept[1:])) for n in numbers]
                place = _of_rows(table, numbers)
                result[tag] = columns_of(tag, READING, rows, self._window(), own, place)
        faults.extend(f"{table.path}: {line}" for line in own.lines())
        return result

    def _window(self) -> Window:
        return Window(since=EARLIEST, until=LATEST, now=self._now())


def in_utc(table: Table, zone: str, faults: Faults) -> Table:
    """Read columns of plant time, ``true_from_local`` and the like, as instants."""
    local = {i for i, c in enumerate(table.columns) if c.removesuffix(LOCAL) in TIMES}
    local = {i for i in local if table.columns[i].endswith(LOCAL)}
    rows = []
    for n, row in enumerate(table.rows):
        cells = list(row)
        for i in local:
            name = table.columns[i]
            try:
                cells[i] = local_instant_of(row[i], zone)
            except NoInstantError as error:
                faults.add(name, error.what, error.found, table.address(n, name))
                cells[i] = EPOCH
        rows.append(tuple(cells))
    columns = tuple(c.removesuffix(LOCAL) if i in local else c for i, c in enumerate(table.columns))
    return replace(table, columns=columns, rows=tuple(rows))


def _of_rows(table: Table, numbers: Sequence[int]) -> Callable[[int, str], str]:
    return lambda n, column: table.address(numbers[n], column)


def _between(tag: str, columns: Columns, since: int, until: int) -> Series:
    """Cut a window out, with the reading in force at its start."""
    first = int(np.searchsorted(columns.at, since))
    last = int(np.searchsorted(columns.at, until))
    chosen = slice(max(first - 1, 0), max(first, last))
    return Series(
        tag=tag,
        at=columns.at[chosen],
        value=columns.value[chosen],
        quality=columns.quality[chosen],
        known_at=columns.known_at[chosen],
    )
