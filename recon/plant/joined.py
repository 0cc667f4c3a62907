"""The plant as one source: each kind of row from where the site file says."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from datetime import UTC, datetime
from pathlib import Path
from typing import Protocol

from recon.declare.site import Site
from recon.errors import FaultyFileError
from recon.findings import Finding
from recon.ingest.rows import Record, RowKind, Series
from recon.plant.connection import connect
from recon.plant.contract import NAMES
from recon.plant.queries import read_queries
from recon.plant.sheets import SheetPlant
from recon.plant.sql import SqlPlant

KINDS = {name: kind for kind, name in NAMES.items()}


class Source(Protocol):
    """What a plant is joined from."""

    def readings(self, tags: Sequence[str], since: datetime, until: datetime) -> Iterator[Series]:
        """As ``recon.app.ports.Plant``."""
        ...

    def records(self, kind: RowKind, since: datetime, until: datetime) -> Iterator[Record]:
        """As ``recon.app.ports.Plant``."""
        ...

    def query(self, kind: RowKind) -> str:
        """As ``recon.app.ports.Plant``."""
        ...

    def noted(self) -> tuple[Finding, ...]:
        """Give what was found in passing since this was last asked."""
        ...

    def close(self) -> None:
        """Let go of what is open."""
        ...


class JoinedPlant:
    """
    Takes each kind from its source; implements ``recon.app.ports.Plant``.

    A kind without a source has no rows: a site may have no tickets. ``recon check`` says where an
    instrument would need one.
    """

    def __init__(self, sources: Mapping[RowKind, Source]) -> None:
        self._sources = dict(sources)

    def readings(self, tags: Sequence[str], since: datetime, until: datetime) -> Iterator[Series]:
        """Yield each tag's readings from the source of readings."""
        if not tags:
            return
        if RowKind.READING not in self._sources:
            raise FaultyFileError("site file", ['query: no source is declared for "readings".'])
        yield from self._sources[RowKind.READING].readings(tags, since, until)

    def records(self, kind: RowKind, since: datetime, until: datetime) -> Iterator[Record]:
        """Yield records from the source of their kind."""
        if kind in self._sources:
            yield from self._sources[kind].records(kind, since, until)

    def query(self, kind: RowKind) -> str:
        """Say what is asked for one kind; empty where it has no source."""
        return self._sources[kind].query(kind) if kind in self._sources else ""

    def noted(self) -> tuple[Finding, ...]:
        """Give what was found in passing since this was last asked: revisions, missing values."""
        return tuple(finding for source in self._each() for finding in source.noted())

    def close(self) -> None:
        """Let go of databases; reading again opens them again."""
        for source in self._each():
            source.close()

    def _each(self) -> list[Source]:
        return list({id(source): source for source in self._sources.values()}.values())


def open_plant(
    site: Site,
    *,
    url: str | None,
    folder: Path,
    queries: Sequence[Path],
    now: Callable[[], datetime] = lambda: datetime.now(UTC),
) -> JoinedPlant:
    """
    Join the sources that a site declares; nothing is asked yet.

    Parameters
    ----------
    site : Site
    url : str or None
        Address of the plant's database, for the kinds that come from a query.
    folder : Path
        Where sheets lie, the folder of the site file.
    queries : sequence of Path
        Folders in which SQL files are looked for, in this order.
    now : callable
        The clock, aware.

    Raises
    ------
    PlantAddressError, FaultyFileError
        The address or an SQL file is wrong.
    """
    asked = {KINDS[q.kind]: q.query for q in site.queries if q.query is not None}
    sources: dict[RowKind, Source] = {
        KINDS[q.kind]: SheetPlant(KINDS[q.kind], folder / q.sheet, zone=site.zone, now=now)
        for q in site.queries
        if q.sheet is not None
    }
    if asked:
        found = read_queries(asked, queries)
        if url is None:
            raise FaultyFileError(
                "plant",
                [
                    f"{NAMES[kind]} come from {name}: no plant database is named."
                    for kind, name in asked.items()
                ],
            )
        database = SqlPlant(connect(url), found, now=now)
        sources.update(dict.fromkeys(found, database))
    return JoinedPlant(sources)
