"""Who may publish a month to date: claims with a lease and a token that fences off the others.

The lease runs by the clock of the database. The token rises with every owner; whoever publishes
with an older one is refused, however late they wake up.
"""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, date, datetime, timedelta

from sqlalchemy import ColumnElement, Connection, and_, or_, select, update

from recon.app.book_types import Claim
from recon.db.engines import Database
from recon.db.tables import CLAIM, CURRENT_RUN
from recon.db.upsert import insert_or
from recon.errors import LostClaimError


def claim(
    database: Database,
    site: str,
    *,
    month: date,
    through: date,
    data_digest: str,
    knowledge_cut: datetime,
    owner: str,
    lease_seconds: float,
) -> Claim | None:
    """Take the right to publish; see the port."""
    with database.writing() as connection:
        if _published_later(connection, site, month, through, knowledge_cut):
            return None
        now = _now(connection)
        values = {
            "site": site,
            "month": month,
            "through_day": through,
            "owner": owner,
            "token": 1,
            "data_digest": data_digest,
            "knowledge_cut": knowledge_cut,
            "lease_until": now + timedelta(seconds=lease_seconds),
            "done": False,
        }
        free = or_(
            and_(~CLAIM.c.done, CLAIM.c.lease_until < now),
            and_(CLAIM.c.done, CLAIM.c.data_digest != data_digest),
        )
        taken = (
            insert_or(connection, CLAIM, values)
            .on_conflict_do_update(
                index_elements=["site", "month", "through_day"],
                set_={
                    "owner": owner,
                    "token": CLAIM.c.token + 1,
                    "data_digest": data_digest,
                    "knowledge_cut": knowledge_cut,
                    "lease_until": values["lease_until"],
                    "done": False,
                },
                where=free,
            )
            .returning(CLAIM.c.token, CLAIM.c.lease_until)
        )
        row = connection.execute(taken).first()
    if row is None:
        return None
    return Claim(
        site=site,
        month=month,
        through=through,
        data_digest=data_digest,
        knowledge_cut=knowledge_cut,
        owner=owner,
        token=row.token,
        lease_until=row.lease_until,
    )


def extend(database: Database, held: Claim, *, lease_seconds: float) -> Claim:
    """Make a lease longer; see the port."""
    with database.writing() as connection:
        until = _now(connection) + timedelta(seconds=lease_seconds)
        changed = connection.execute(
            update(CLAIM).where(_same(held), _held(held)).values(lease_until=until)
        )
        if changed.rowcount == 0:
            raise _lost(connection, held)
    return replace(held, lease_until=until)


def give_back(database: Database, held: Claim) -> None:
    """End a lease at once; without effect where it is lost or done."""
    with database.writing() as connection:
        past = _now(connection) - timedelta(seconds=1)
        connection.execute(update(CLAIM).where(_same(held), _held(held)).values(lease_until=past))


def hold(connection: Connection, held: Claim) -> None:
    """
    Read a claim again for update inside the publishing transaction.

    Raises
    ------
    LostClaimError
        Its token is another's, or it is done.
    """
    row = connection.execute(
        select(CLAIM.c.token).where(_same(held), _held(held)).with_for_update()
    ).first()
    if row is None:
        raise _lost(connection, held)


def mark_done(connection: Connection, held: Claim) -> None:
    """Mark a claim done, in the transaction that publishes."""
    connection.execute(update(CLAIM).where(_same(held), _held(held)).values(done=True))


def _same(held: Claim) -> ColumnElement[bool]:
    return and_(
        CLAIM.c.site == held.site,
        CLAIM.c.month == held.month,
        CLAIM.c.through_day == held.through,
    )


def _held(held: Claim) -> ColumnElement[bool]:
    return and_(CLAIM.c.owner == held.owner, CLAIM.c.token == held.token, ~CLAIM.c.done)


def _published_later(
    connection: Connection, site: str, month: date, through: date, cut: datetime
) -> bool:
    asked = select(CURRENT_RUN.c.run).where(
        CURRENT_RUN.c.site == site,
        CURRENT_RUN.c.month == month,
        CURRENT_RUN.c.through_day == through,
        CURRENT_RUN.c.knowledge_cut > cut,
    )
    return connection.execute(asked).first() is not None


def _now(connection: Connection) -> datetime:
    """The database's clock: on SQLite that of this machine."""
    if connection.dialect.name == "sqlite":
        return datetime.now(UTC)
    now: datetime = connection.exec_driver_sql("SELECT clock_timestamp()").scalar_one()
    return now.astimezone(UTC)


def _lost(connection: Connection, held: Claim) -> LostClaimError:
    row = connection.execute(select(CLAIM).where(_same(held))).first()
    if row is None:
        reason = "there is no such claim"
    elif row.token != held.token or row.owner != held.owner:
        reason = f"{row.owner} holds token {row.token}"
    else:
        reason = "it is done"
    return LostClaimError(held.site, held.through.isoformat(), held.token, reason)
