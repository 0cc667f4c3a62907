"""What use cases need from the outside, as protocols; ``recon.wiring`` supplies the real parts."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from datetime import datetime
from typing import Protocol

from recon.ingest.rows import Record, RowKind, Series


class Plant(Protocol):
    """The plant's sources, read-only."""

    def readings(self, tags: Sequence[str], since: datetime, until: datetime) -> Iterator[Series]:
        """
        Yield each tag's readings with ``since <= at < until``, and the one in force at ``since``.

        Memory stays bounded: one tag and a limited span are held at a time; a tag may come in
        several pieces, in time order.

        Raises
        ------
        DataError
            The source cannot be read after retries, or a row breaks the column contract.
        """
        ...

    def records(self, kind: RowKind, since: datetime, until: datetime) -> Iterator[Record]:
        """
        Yield records whose span touches ``[since, until)``, every stage, in natural-key order.

        Raises
        ------
        DataError
            As above.
        """
        ...
