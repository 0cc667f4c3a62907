"""The audit chain: each entry's hash covers the entry before it, so that none can be changed alone.

A chain agrees with itself after any change by somebody who rewrites all of it. Only a head kept
where that person cannot reach proves more.
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterable
from dataclasses import dataclass, replace
from datetime import datetime

from recon.audit.canonical import canonical

FIRST = "0" * 64
"""The previous hash of entry 1."""


@dataclass(frozen=True, kw_only=True)
class Entry:
    """
    One entry of a site's chain.

    Attributes
    ----------
    seq : int
        From 1, without gap.
    at : datetime
        Aware.
    body : bytes
        Canonical bytes, hashed as they stand and never written anew.
    prev_hash, hash : str
    """

    site: str
    seq: int
    at: datetime
    actor: str
    action: str
    subject: str
    body: bytes
    prev_hash: str
    hash: str


@dataclass(frozen=True, kw_only=True)
class Head:
    """Where a chain ends: what is kept elsewhere to prove that it was not written anew."""

    seq: int
    hash: str


@dataclass(frozen=True, kw_only=True)
class Break:
    """
    The first thing that is wrong with a chain.

    Attributes
    ----------
    seq : int
        Entry at which it was noticed.
    what : str
        Expected and found, in a sentence.
    last_intact_actor : str
        Account named in the last intact entry; the record cannot say who altered it.
    """

    seq: int
    what: str
    last_intact_actor: str


def entry_bytes(entry: Entry) -> bytes:
    """Everything of an entry but its own hash, as bytes: what the hash and the tree cover."""
    head = {
        "site": entry.site,
        "seq": entry.seq,
        "at": entry.at,
        "actor": entry.actor,
        "action": entry.action,
        "subject": entry.subject,
        "prev_hash": entry.prev_hash,
    }
    return canonical(head) + b"\n" + entry.body


def link(
    *,
    site: str,
    after: Head,
    at: datetime,
    actor: str,
    action: str,
    subject: str,
    body: bytes,
) -> Entry:
    """Make the entry that follows a head; the head of an empty chain is ``Head(0, FIRST)``."""
    bare = Entry(
        site=site,
        seq=after.seq + 1,
        at=at,
        actor=actor,
        action=action,
        subject=subject,
        body=body,
        prev_hash=after.hash,
        hash="",
    )
    return replace(bare, hash=hashlib.sha256(entry_bytes(bare)).hexdigest())


def check_chain(entries: Iterable[Entry], outside: Head | None = None) -> Head | Break:
    """
    Follow a chain from its first entry.

    Parameters
    ----------
    entries : iterable of Entry
        All of a site's entries in the order of ``seq``.
    outside : Head, optional
        A head kept elsewhere; the chain must hold it.

    Returns
    -------
    Head or Break
        Where the chain ends, or the first thing that is wrong.
    """
    head = Head(seq=0, hash=FIRST)
    actor = "nobody"
    for entry in entries:
        wrong = _wrong(entry, head)
        if wrong is None and outside is not None and entry.seq == outside.seq:
            wrong = _against_outside(entry.hash, outside)
        if wrong is not None:
            return Break(seq=head.seq + 1, what=wrong, last_intact_actor=actor)
        head, actor = Head(seq=entry.seq, hash=entry.hash), entry.actor
    if outside is not None and outside.seq > head.seq:
        what = f"the chain ends with entry {head.seq}; the head kept outside is of {outside.seq}"
        return Break(seq=head.seq + 1, what=what, last_intact_actor=actor)
    return head


def _wrong(entry: Entry, before: Head) -> str | None:
    if entry.seq != before.seq + 1:
        return f"entry {before.seq + 1} expected, entry {entry.seq} found"
    if entry.prev_hash != before.hash:
        return (
            f"entry {entry.seq} follows {entry.prev_hash[:16]}, "
            f"the entry before has hash {before.hash[:16]}"
        )
    try:
        made = hashlib.sha256(entry_bytes(entry)).hexdigest()
    except ValueError as error:
        return f"entry {entry.seq} cannot be read: {error}"
    if made != entry.hash:
        return f"entry {entry.seq} has hash {entry.hash[:16]}, its content gives {made[:16]}"
    return None


def _against_outside(found: str, outside: Head) -> str | None:
    if found == outside.hash:
        return None
    return (
        f"entry {outside.seq} has hash {found[:16]}, the head kept outside is {outside.hash[:16]}"
    )
