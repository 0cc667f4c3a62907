"""Gathers what was in force for a month to date at a knowledge cut, from one snapshot."""

from __future__ import annotations

from datetime import date, datetime, timedelta

from sqlalchemy import Connection, func, select

from recon.app.book_types import Material
from recon.db import decisions, reads, records, tag_days, versions
from recon.db.tables import CLOSING_EVENT, CURRENT_RUN, RECORD, TAG_DAY
from recon.ingest.given import OpeningStock
from recon.ingest.rows import RowKind
from recon.tabulate.leaves import YearLeaf

MONTHS_BACK = 12
"""Leaves of so many months before are given: the year to date and a running year."""


def material(
    connection: Connection,
    site: str,
    *,
    month: date,
    through: date,
    first_day: date,
    since: datetime,
    until: datetime,
    knowledge_cut: datetime,
) -> Material:
    """Give everything a month to date is computed from; see the port."""
    opening, opening_run = _opening(connection, site, month)
    first_month = not _earlier_months(connection, site, month)
    return Material(
        versions=versions.in_force(
            versions.every(connection, site), month=month, through=through, cut=knowledge_cut
        ),
        tag_days=tag_days.in_force(
            connection, site, first=first_day, last=through, cut=knowledge_cut
        ),
        records=records.in_force(connection, site, since=since, until=until, cut=knowledge_cut),
        decisions=decisions.in_force(
            connection, site, first=first_day, last=through, cut=knowledge_cut
        ),
        opening=opening,
        opening_run=opening_run,
        opening_signed=first_month or _is_closed(connection, site, _before(month)),
        first_month=first_month,
        year=_year(connection, site, month),
    )


def arrivals(
    connection: Connection,
    site: str,
    *,
    since: datetime,
    until: datetime,
    after: datetime,
    by: datetime | None = None,
) -> tuple[datetime, datetime] | None:
    """Give the earliest and latest time at which rows of a span became known after a cut."""
    first_day, last_day = since.date() - timedelta(days=1), until.date() + timedelta(days=1)
    found: list[datetime] = []
    for table, known, where in (
        (TAG_DAY, TAG_DAY.c.last_known, TAG_DAY.c.day.between(first_day, last_day)),
        (
            RECORD,
            RECORD.c.known_at,
            RECORD.c.kind.in_([kind.value for kind in RowKind])
            & (RECORD.c.true_from < until)
            & (RECORD.c.true_to >= since),
        ),
    ):
        seen = table.c.first_seen
        asked = select(known, seen).where(
            table.c.site == site, where, (seen > after) | (known > after)
        )
        found += [max(row[0], row[1]) for row in connection.execute(asked)]
    if by is not None:
        found = [known for known in found if known <= by]
    return (min(found), max(found)) if found else None


def _before(month: date) -> date:
    """First day of the month before."""
    return (month - timedelta(days=1)).replace(day=1)


def _whole_month_run(connection: Connection, site: str, month: date) -> int | None:
    """The run that speaks for a whole month, through its last day."""
    last = (month + timedelta(days=32)).replace(day=1) - timedelta(days=1)
    asked = select(CURRENT_RUN.c.run).where(
        CURRENT_RUN.c.site == site, CURRENT_RUN.c.month == month, CURRENT_RUN.c.through_day == last
    )
    return connection.execute(asked).scalar()


def _opening(
    connection: Connection, site: str, month: date
) -> tuple[tuple[OpeningStock, ...], int | None]:
    run = _whole_month_run(connection, site, _before(month))
    if run is None:
        return (), None
    row = reads.run_row(connection, site, run)
    stocks = reads.checked_table(connection, row, "closing_stock")
    return tuple(OpeningStock(**dict(zip(_STOCK, stock, strict=True))) for stock in stocks), run


_STOCK = ("node", "quantity", "value", "u", "basis", "booked")


def _year(connection: Connection, site: str, month: date) -> tuple[YearLeaf, ...]:
    leaves: list[YearLeaf] = []
    before = month
    for _ in range(MONTHS_BACK):
        before = _before(before)
        run = _whole_month_run(connection, site, before)
        if run is None:
            continue
        row = reads.run_row(connection, site, run)
        leaves += [
            YearLeaf(month=name, table=table, row=key, column=column, value=value)
            for name, table, key, column, value in reads.checked_table(connection, row, "year_leaf")
        ]
    return tuple(sorted(leaves, key=lambda leaf: (leaf.month, leaf.table, leaf.row, leaf.column)))


def _earlier_months(connection: Connection, site: str, month: date) -> bool:
    asked = select(func.count()).where(CURRENT_RUN.c.site == site, CURRENT_RUN.c.month < month)
    return bool(connection.execute(asked).scalar_one())


def _is_closed(connection: Connection, site: str, month: date) -> bool:
    asked = (
        select(CLOSING_EVENT.c.state)
        .where(CLOSING_EVENT.c.site == site, CLOSING_EVENT.c.month == month)
        .order_by(CLOSING_EVENT.c.seq.desc())
        .limit(1)
    )
    return connection.execute(asked).scalar() == "closed"
