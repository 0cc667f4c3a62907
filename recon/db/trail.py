"""The audit chain in the book: entries are appended inside the transaction they speak of."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import datetime

from sqlalchemy import Connection, select

from recon.audit.canonical import canonical
from recon.audit.chain import FIRST, Entry, Head, link
from recon.db.engines import Database
from recon.db.tables import AUDIT_ENTRY


def append(
    database: Database,
    connection: Connection,
    site: str,
    *,
    at: datetime,
    actor: str,
    action: str,
    subject: str,
    body: object,
) -> Entry:
    """Append an entry to a site's chain; one at a time, so that ``seq`` has no gap."""
    database.lock(connection, f"chain of {site}")
    last = connection.execute(
        select(AUDIT_ENTRY.c.seq, AUDIT_ENTRY.c.hash)
        .where(AUDIT_ENTRY.c.site == site)
        .order_by(AUDIT_ENTRY.c.seq.desc())
        .limit(1)
    ).first()
    entry = link(
        site=site,
        after=Head(seq=last.seq, hash=last.hash) if last else Head(seq=0, hash=FIRST),
        at=at,
        actor=actor,
        action=action,
        subject=subject,
        body=canonical(body),
    )
    connection.execute(
        AUDIT_ENTRY.insert().values(
            site=entry.site,
            seq=entry.seq,
            at=entry.at,
            actor=entry.actor,
            action=entry.action,
            subject=entry.subject,
            body=entry.body,
            prev_hash=entry.prev_hash,
            hash=entry.hash,
        )
    )
    return entry


def record(
    database: Database,
    site: str,
    *,
    at: datetime,
    actor: str,
    action: str,
    subject: str,
    body: object,
) -> Entry:
    """Append an entry of its own."""
    with database.writing() as connection:
        return append(
            database,
            connection,
            site,
            at=at,
            actor=actor,
            action=action,
            subject=subject,
            body=body,
        )


def entries(connection: Connection, site: str, after: int = 0) -> Iterator[Entry]:
    """Yield a site's entries after one, in order, a few at a time."""
    columns = [c for c in AUDIT_ENTRY.columns if c.name != "site"]
    asked = (
        select(*columns)
        .where(AUDIT_ENTRY.c.site == site, AUDIT_ENTRY.c.seq > after)
        .order_by(AUDIT_ENTRY.c.seq)
    )
    with connection.execute(asked.execution_options(yield_per=1000)) as found:
        for row in found:
            yield Entry(site=site, **row._mapping)
