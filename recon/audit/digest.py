"""Digests: SHA-256 over canonical bytes, of one thing or of a table's rows."""

from __future__ import annotations

import hashlib
from collections.abc import Iterable, Mapping, Sequence

from recon.audit.canonical import canonical, canonical_lines


def digest_bytes(content: bytes) -> str:
    """SHA-256 of bytes, 64 hexadecimal digits."""
    return hashlib.sha256(content).hexdigest()


def digest(value: object) -> str:
    """SHA-256 of a value's canonical bytes."""
    return digest_bytes(canonical(value))


def table_digest(name: str, columns: Sequence[str], rows: Iterable[Sequence[object]]) -> str:
    """
    SHA-256 of a table: its name and columns on one line, then its rows, one a line.

    Parameters
    ----------
    name : str
    columns : sequence of str
    rows : iterable of sequences
        Values in the order of ``columns``, rows sorted by natural key by the caller.
    """
    head = canonical({"table": name, "columns": list(columns)}) + b"\n"
    return digest_bytes(head + canonical_lines(rows))


def result_digest(tables: Mapping[str, str]) -> str:
    """Digest of the digests of a run's tables, by name of table."""
    return digest({"tables": dict(tables)})
