"""Is the stored record what was written: chain, results, evidence, protection; first fault first.

Everything is checked against the audit chain, entry by entry, and the chain against a head kept
outside where one is given. Without one a record can only be said to agree with itself: whoever
rewrites all of it, hashes included, leaves no trace inside it.
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from sqlalchemy import Connection, select

from recon.audit.chain import FIRST, Break, Head, check_chain
from recon.db import trail
from recon.db.engines import Database
from recon.db.migrate import check_schema
from recon.db.tables import AUDIT_ENTRY, CURRENT_RUN
from recon.db.verify_rows import (
    check_decision,
    check_evidence,
    check_run,
    check_version,
    find_unspoken,
)
from recon.errors import AlteredRecordError, AuditError

CONSISTENT = "consistent with itself; not proven unchanged"
PROVEN = "unchanged up to the head kept outside"


@dataclass(frozen=True, kw_only=True)
class Verified:
    """
    What was found of one site.

    Attributes
    ----------
    head : Head
        Where the chain ends, as far as it is intact.
    entries, runs, chunks : int
        Checked.
    fault : str
        The first thing that is wrong; empty where nothing is.
    last_intact_actor : str
        Account named in the last intact entry; the record cannot say who altered it.
    outside : bool
        The chain was held against a head kept outside.
    """

    site: str
    head: Head
    entries: int
    runs: int
    chunks: int
    fault: str
    last_intact_actor: str
    outside: bool

    @property
    def verdict(self) -> str:
        """One sentence for people."""
        if not self.fault:
            return PROVEN if self.outside else CONSISTENT
        return (
            f"NOT WHAT WAS WRITTEN: {self.fault}. Account named in the last intact entry: "
            f"{self.last_intact_actor}; the record cannot say who altered it"
        )


def verify(
    url: str, *, outside: Mapping[str, Head] | None = None, folder: Path | None = None
) -> tuple[Verified, ...]:
    """
    Check every site of a book, or those that outside heads name as well.

    Parameters
    ----------
    url : str
        Address of the book; nothing is written.
    outside : mapping, optional
        Heads kept elsewhere, by site.

    Raises
    ------
    AuditError
        The database as a whole is damaged or its protection is not as it was made.
    BookUnavailableError
        It cannot be reached.
    """
    heads = dict(outside or {})
    database = Database(url)
    try:
        check_schema(database, folder)
        with database.reading() as connection:
            _check_file(database, connection)
            sites = sorted({*heads, *connection.execute(select(AUDIT_ENTRY.c.site)).scalars()})
            return tuple(_site(connection, site, heads.get(site)) for site in sites)
    finally:
        database.close()


def _check_file(database: Database, connection: Connection) -> None:
    """SQLite's own check of its file: structure, not content."""
    if not database.sqlite:
        return
    said = connection.exec_driver_sql("PRAGMA integrity_check").scalar()
    if said != "ok":
        raise AlteredRecordError(f"file of {database.shown}", "a sound file", str(said))


@dataclass
class _Count:
    entries: int = 0
    runs: int = 0
    chunks: int = 0
    actor: str = "nobody"


def _site(connection: Connection, site: str, outside: Head | None) -> Verified:
    count = _Count()
    head = Head(seq=0, hash=FIRST)
    fault = ""
    try:
        found = check_chain(trail.entries(connection, site), outside)
        if isinstance(found, Break):
            fault, count.actor = f"entry {found.seq}: {found.what}", found.last_intact_actor
        else:
            head = found
            _follow(connection, site, count)
    except AuditError as error:
        fault = str(error).removesuffix(". No number of it is shown.")
    except (ValueError, TypeError, KeyError) as error:
        fault = f"entry {count.entries + 1} or what it speaks of cannot be read: {error}"
    return Verified(
        site=site,
        head=head,
        entries=count.entries,
        runs=count.runs,
        chunks=count.chunks,
        fault=fault,
        last_intact_actor=count.actor,
        outside=outside is not None,
    )


def _follow(connection: Connection, site: str, count: _Count) -> None:
    """Check what every entry speaks of, in order; then what no entry speaks of."""
    pointers: dict[tuple[str, str], int] = {}
    spoken: set[tuple[str, str]] = set()
    manifests: list[str] = []
    for entry in list(trail.entries(connection, site)):
        body = json.loads(entry.body)
        spoken.add((entry.action, entry.subject))
        if entry.action == "publish":
            check_run(connection, entry, body)
            manifests.append(body["manifest"])
            count.runs += 1
        elif entry.action == "move pointer":
            pointers[body["month"], body["through_day"]] = int(body["to_run"])
        elif entry.action == "add site version":
            check_version(connection, entry)
        elif entry.action in ("decide", "approve", "refuse"):
            check_decision(connection, entry, body)
        count.entries, count.actor = entry.seq, entry.actor
    _check_pointers(connection, site, pointers)
    for what in find_unspoken(connection, site, spoken):
        raise AlteredRecordError(what, "an audit entry that speaks of it", "none")
    count.chunks = check_evidence(connection, site, manifests)


def _check_pointers(
    connection: Connection, site: str, expected: Mapping[tuple[str, str], int]
) -> None:
    found = {
        (row.month.isoformat(), row.through_day.isoformat()): row.run
        for row in connection.execute(select(CURRENT_RUN).where(CURRENT_RUN.c.site == site))
    }
    for key in sorted({*expected, *found}):
        if expected.get(key) != found.get(key):
            raise AlteredRecordError(
                f"site {site}, pointer of month {key[0]} through {key[1]}",
                f"run {expected.get(key)}",
                f"run {found.get(key)}",
            )
