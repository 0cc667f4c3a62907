"""Chunks of evidence in the book: kept once by what they hold, compressed, checked when read."""

from __future__ import annotations

import zlib
from collections.abc import Iterable
from datetime import datetime
from typing import Any

from sqlalchemy import Connection, Row, select

from recon.app.book_types import Chunk
from recon.audit.digest import digest_bytes
from recon.db.bulk import insert
from recon.db.tables import EVIDENCE_CHUNK
from recon.errors import AlteredRecordError
from recon.ingest.rows import RowKind

LEVEL = 6
"""Compression level: evidence is written once and read for years."""


def keep_chunks(
    connection: Connection, site: str, chunks: Iterable[Chunk], query: str, seen_at: datetime
) -> int:
    """Keep those chunks that the book lacks; give how many."""
    given = {chunk.digest: chunk for chunk in chunks}
    there: set[str] = set()
    names = sorted(given)
    for start in range(0, len(names), 800):
        asked = select(EVIDENCE_CHUNK.c.digest).where(
            EVIDENCE_CHUNK.c.site == site,
            EVIDENCE_CHUNK.c.digest.in_(names[start : start + 800]),
        )
        there.update(connection.execute(asked).scalars())
    new = [given[name] for name in names if name not in there]
    insert(
        connection,
        EVIDENCE_CHUNK,
        (
            (
                c.digest,
                c.kind.value,
                c.subject,
                c.day,
                c.rows,
                query,
                seen_at,
                zlib.compress(c.content, LEVEL),
            )
            for c in new
        ),
        site,
    )
    return len(new)


def read_chunk(connection: Connection, site: str, digest: str) -> Chunk:
    """
    Give rows as they came.

    Raises
    ------
    AlteredRecordError
        The chunk is missing or is not what its digest says.
    """
    row = connection.execute(
        select(EVIDENCE_CHUNK).where(
            EVIDENCE_CHUNK.c.site == site, EVIDENCE_CHUNK.c.digest == digest
        )
    ).first()
    if row is None:
        raise AlteredRecordError(f"evidence chunk {digest[:16]}", "its rows", "no such chunk")
    return open_chunk(row)


def unpacked(packed: bytes) -> bytes:
    """Uncompress what was stored; nothing where it is damaged or holds more than one stream."""
    stream = zlib.decompressobj()
    try:
        content = stream.decompress(packed)
    except zlib.error:
        return b""
    return content if stream.eof and not stream.unused_data else b""


def open_chunk(row: Row[Any]) -> Chunk:
    """Uncompress a stored chunk and check it against its digest; errors as above."""
    content = unpacked(row.content)
    found = digest_bytes(content)
    if found != row.digest:
        raise AlteredRecordError(
            f"evidence chunk of {row.kind} {row.subject} {row.day}",
            f"digest {row.digest[:16]}",
            found[:16],
        )
    return Chunk(
        digest=row.digest,
        kind=RowKind(row.kind),
        subject=row.subject,
        day=row.day,
        rows=row.row_count,
        content=content,
    )
