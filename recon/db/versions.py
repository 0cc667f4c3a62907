"""Site versions in the book: the text of every site file that ever was in force."""

from __future__ import annotations

from datetime import date, datetime

from sqlalchemy import Connection, select

from recon.app.book_types import StoredVersion
from recon.audit.digest import digest_bytes
from recon.db import trail
from recon.db.engines import Database
from recon.db.tables import SITE_VERSION
from recon.errors import DataError


def add(database: Database, version: StoredVersion) -> bool:
    """Keep a version with an audit entry; False where exactly this text is already there."""
    made = digest_bytes(version.content.encode())
    if made != version.digest:
        raise DataError(
            f"site {version.site}, version {version.digest[:16]}: its text has digest {made[:16]}. "
            "Nothing was kept."
        )
    values = {column.name: getattr(version, column.name) for column in SITE_VERSION.columns}
    with database.writing() as connection:
        database.lock(connection, f"chain of {version.site}")
        there = select(SITE_VERSION.c.digest).where(
            SITE_VERSION.c.site == version.site, SITE_VERSION.c.digest == version.digest
        )
        if connection.execute(there).first() is not None:
            return False
        connection.execute(SITE_VERSION.insert().values(**values))
        trail.append(
            database,
            connection,
            version.site,
            at=version.known_at,
            actor=version.added_by,
            action="add site version",
            subject=version.digest,
            body={"valid_from": version.valid_from},
        )
    return True


def every(connection: Connection, site: str) -> tuple[StoredVersion, ...]:
    """List all versions of a site, rising by ``valid_from`` and ``known_at``."""
    asked = (
        select(SITE_VERSION)
        .where(SITE_VERSION.c.site == site)
        .order_by(SITE_VERSION.c.valid_from, SITE_VERSION.c.known_at, SITE_VERSION.c.digest)
    )
    return tuple(StoredVersion(**row._mapping) for row in connection.execute(asked))


def sites(connection: Connection) -> tuple[str, ...]:
    """List the sites that have a version, by name."""
    asked = select(SITE_VERSION.c.site).distinct()
    return tuple(sorted(connection.execute(asked).scalars()))


def in_force(
    versions: tuple[StoredVersion, ...], *, month: date, through: date, cut: datetime
) -> tuple[StoredVersion, ...]:
    """
    Choose the versions a month to date is computed with, as known at a cut.

    Of several with the same first day the one known last counts. The first one given is in force
    on the month's first day, or is the earliest where none reaches back so far.
    """
    latest = {v.valid_from: v for v in versions if v.known_at <= cut and v.valid_from <= through}
    days = sorted(latest)
    before = [day for day in days if day <= month]
    return tuple(latest[day] for day in days if not before or day >= before[-1])
