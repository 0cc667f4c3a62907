"""What long work says of itself, for pages and the command line to show."""

from __future__ import annotations

from sqlalchemy import Connection, select

from recon.app.book_types import Progress
from recon.db.tables import PROGRESS
from recon.db.upsert import upsert


def note(connection: Connection, site: str, progress: Progress) -> None:
    """Say what work is doing; replaces what it said before."""
    upsert(connection, PROGRESS, {"site": site, **progress.__dict__})


def every(connection: Connection, site: str) -> tuple[Progress, ...]:
    """List what work said last, by its name."""
    columns = [column for column in PROGRESS.columns if column.name != "site"]
    asked = select(*columns).where(PROGRESS.c.site == site).order_by(PROGRESS.c.work)
    return tuple(Progress(**row._mapping) for row in connection.execute(asked))
