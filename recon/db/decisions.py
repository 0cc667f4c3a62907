"""Decisions of people in the book: proposed by one, answered by another, in force or not."""

from __future__ import annotations

from datetime import date, datetime
from typing import Any

from sqlalchemy import Connection, and_, or_, select

from recon.app.book_types import Proposal
from recon.audit.digest import digest
from recon.db import trail
from recon.db.engines import Database
from recon.db.tables import DECISION, DECISION_APPROVAL
from recon.errors import ConflictError
from recon.ingest.given import Decision

WITHDRAW = "withdraw"


def decide(database: Database, site: str, proposal: Proposal) -> str:
    """Keep a decision with an audit entry; give its digest."""
    values: dict[str, Any] = {
        "site": site,
        "kind": proposal.kind,
        "subject": proposal.tag,
        "first_day": proposal.first,
        "last_day": proposal.last,
        "value": None if proposal.value is None else float(proposal.value) + 0.0,
        "reason": proposal.reason,
        "evidence": proposal.evidence,
        "previews": proposal.previews,
        "needs_approval": proposal.needs_approval,
        "made_by": proposal.by,
        "made_at": proposal.made_at,
    }
    made = digest(values)
    with database.writing() as connection:
        database.lock(connection, f"chain of {site}")
        there = select(DECISION.c.decision).where(
            DECISION.c.site == site, DECISION.c.decision == made
        )
        if connection.execute(there).first() is not None:
            return made
        connection.execute(DECISION.insert().values(decision=made, **values))
        trail.append(
            database,
            connection,
            site,
            at=proposal.made_at,
            actor=proposal.by,
            action="decide",
            subject=made,
            body={name: value for name, value in values.items() if name != "site"},
        )
    return made


def approve(
    database: Database,
    site: str,
    decision: str,
    *,
    by: str,
    at: datetime,
    digest_seen: str,
    granted: bool,
) -> None:
    """Answer a decision as a second person; see the port."""
    with database.writing() as connection:
        database.lock(connection, f"chain of {site}")
        same = and_(DECISION.c.site == site, DECISION.c.decision == decision)
        found = connection.execute(select(DECISION.c.made_by).where(same)).first()
        if found is None:
            raise ConflictError(
                f"site {site}: no decision {decision[:16]}. Look at the list again."
            )
        if found.made_by == by:
            raise ConflictError(
                f"decision {decision[:16]} was made by {by}; another person must answer it."
            )
        if digest_seen != decision:
            raise ConflictError(
                f"decision {decision[:16]}: what was seen has digest {digest_seen[:16]}. Look at "
                "the decision as it stands, then answer."
            )
        answered = connection.execute(
            select(DECISION_APPROVAL.c.approved_by).where(
                DECISION_APPROVAL.c.site == site, DECISION_APPROVAL.c.decision == decision
            )
        ).first()
        if answered is not None:
            raise ConflictError(
                f"decision {decision[:16]} was answered by {answered.approved_by} already; a "
                "change of mind is a decision of its own."
            )
        connection.execute(
            DECISION_APPROVAL.insert().values(
                site=site,
                decision=decision,
                made_by=found.made_by,
                approved_by=by,
                approved_at=at,
                digest_seen=digest_seen,
                granted=granted,
            )
        )
        trail.append(
            database,
            connection,
            site,
            at=at,
            actor=by,
            action="approve" if granted else "refuse",
            subject=decision,
            body={"digest_seen": digest_seen},
        )


def in_force(
    connection: Connection, site: str, *, first: date, last: date, cut: datetime
) -> tuple[Decision, ...]:
    """List decisions in force at a cut that touch a span of days, sorted by digest."""
    answer = DECISION_APPROVAL
    granted = and_(
        answer.c.site == DECISION.c.site,
        answer.c.decision == DECISION.c.decision,
        answer.c.granted,
        answer.c.approved_at <= cut,
    )
    asked = (
        select(DECISION)
        .outerjoin(answer, granted)
        .where(
            DECISION.c.site == site,
            DECISION.c.made_at <= cut,
            or_(~DECISION.c.needs_approval, answer.c.approved_by.is_not(None)),
        )
    )
    rows = connection.execute(asked).all()
    withdrawn = {row.subject for row in rows if row.kind == WITHDRAW}
    return tuple(
        Decision(
            decision=row.decision,
            kind=row.kind,
            tag=row.subject,
            first=row.first_day,
            last=row.last_day,
            value=row.value,
            reason=row.reason,
            by=row.made_by,
        )
        for row in sorted(rows, key=lambda row: str(row.decision))
        if row.kind != WITHDRAW
        and row.decision not in withdrawn
        and row.first_day is not None
        and row.first_day <= last
        and row.last_day >= first
    )
