"""Readings as evidence: one tag's plant day as text that anybody can read, and back."""

from __future__ import annotations

import hashlib
from collections.abc import Iterable
from datetime import date
from typing import TYPE_CHECKING

import numpy as np

from recon.app.book_types import Chunk
from recon.errors import AuditError
from recon.ingest.rows import RowKind, Series

if TYPE_CHECKING:
    from numpy.typing import NDArray

HEAD = "at,value,quality,known_at"


def chunk_of(series: Series, day: date) -> Chunk:
    """
    Write one tag's day of readings down.

    Parameters
    ----------
    series : Series
        All readings of the day, and the one in force at its start.
    day : date

    Returns
    -------
    Chunk
        Lines ``at,value,quality,known_at``: times in UTC microseconds since 1970, values in
        shortest form that gives the same double back, ``nan`` where the source gave none.
    """
    lines = [f"{series.tag},{day.isoformat()}", HEAD]
    lines += [
        f"{at},{value!r},{quality},{known}"
        for at, value, quality, known in zip(
            series.at.tolist(),
            series.value.tolist(),
            series.quality.tolist(),
            series.known_at.tolist(),
            strict=True,
        )
    ]
    content = ("\n".join(lines) + "\n").encode()
    return Chunk(
        digest=hashlib.sha256(content).hexdigest(),
        kind=RowKind.READING,
        subject=series.tag,
        day=day,
        rows=len(series.at),
        content=content,
    )


def series_of(chunk: Chunk) -> Series:
    """
    Read a chunk of readings back.

    Raises
    ------
    AuditError
        It is not what ``chunk_of`` writes.
    """
    lines = chunk.content.decode().splitlines()
    if len(lines) < 2 or lines[1] != HEAD:
        raise AuditError(f"evidence {chunk.digest[:12]}: not a chunk of readings.")
    tag = lines[0].rpartition(",")[0]
    columns = list(zip(*(line.split(",") for line in lines[2:]), strict=True)) or [()] * 4
    return Series(
        tag=tag,
        at=np.array(columns[0], dtype=np.int64),
        value=np.array(columns[1], dtype=np.float64),
        quality=np.array(columns[2], dtype=np.int8),
        known_at=np.array(columns[3], dtype=np.int64),
    )


def no_readings(tag: str) -> Series:
    """Give a tag's series without any row."""
    return Series(
        tag=tag,
        at=np.array([], dtype=np.int64),
        value=np.array([], dtype=np.float64),
        quality=np.array([], dtype=np.int8),
        known_at=np.array([], dtype=np.int64),
    )


def joined(pieces: Iterable[Series]) -> dict[str, Series]:
    """Put the pieces in which tags came together, by tag; pieces of a tag are in time order."""
    parts: dict[str, list[Series]] = {}
    for piece in pieces:
        parts.setdefault(piece.tag, []).append(piece)
    return {tag: found[0] if len(found) == 1 else _one(tag, found) for tag, found in parts.items()}


def _one(tag: str, pieces: list[Series]) -> Series:
    def column(name: str) -> NDArray[np.generic]:
        return np.concatenate([getattr(piece, name) for piece in pieces])

    return Series(
        tag=tag,
        at=column("at").astype(np.int64),
        value=column("value").astype(np.float64),
        quality=column("quality").astype(np.int8),
        known_at=column("known_at").astype(np.int64),
    )
