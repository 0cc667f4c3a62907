"""Which inputs a run was computed from: one digest, so that the same inputs never run twice.

The digest covers the rows in force (natural key, true from and to, known at, value, unit, stage and
what else the computation reads of them), site versions, decisions, and what earlier months hand on
as printed: opening stocks with their booked lines, whether they are signed, and the leaves of the
year to date. It covers no chunk, no further column kept as evidence only, no time of first seeing,
no row number, no knowledge cut and nothing of how it is computed: the same data seen again by
another program are the same data.
"""

from __future__ import annotations

from dataclasses import astuple
from typing import TYPE_CHECKING

from recon.audit.digest import digest, table_digest

if TYPE_CHECKING:
    from recon.app.period import PeriodInputs
    from recon.ingest.rows import Record, TagDay

_TAG_DAY = (
    "tag",
    "day",
    "last_known",
    "amount",
    "covered_hours",
    "day_hours",
    "running_hours",
    "mean",
    "readings",
    "bad",
)
_RECORD = (
    "kind",
    "document",
    "subject",
    "item",
    "stage",
    "true_from",
    "true_to",
    "known_at",
    "value",
    "unit",
    "lot",
)


def data_digest(inputs: PeriodInputs) -> str:
    """
    Give the digest of everything a month to date is computed from.

    Rows are sorted by natural key first, so the order in which they were found does not matter.

    Raises
    ------
    ValueError
        A number is not finite, or a time has no zone.
    """
    return digest(
        {
            "site": inputs.site,
            "month": inputs.month,
            "through": inputs.through,
            "versions": [version.digest for version in inputs.versions],
            "tag days": table_digest(
                "tag days",
                _TAG_DAY,
                map(_tag_day, sorted(inputs.tag_days, key=lambda row: (row.tag, row.day))),
            ),
            "records": table_digest(
                "records",
                _RECORD,
                map(_record, sorted(inputs.records, key=lambda row: (row.kind, row.natural_key))),
            ),
            "decisions": sorted(decision.decision for decision in inputs.decisions),
            "opening": [
                astuple(stock)
                for stock in sorted(inputs.opening, key=lambda stock: (stock.node, stock.quantity))
            ],
            "opening signed": inputs.opening_signed,
            "year": [
                astuple(leaf)
                for leaf in sorted(
                    inputs.year, key=lambda leaf: (leaf.month, leaf.table, leaf.row, leaf.column)
                )
            ],
        }
    )


def _tag_day(row: TagDay) -> tuple[object, ...]:
    return tuple(getattr(row, name) for name in _TAG_DAY)


def _record(row: Record) -> tuple[object, ...]:
    return (
        row.kind.value,
        row.document,
        row.subject,
        row.item,
        row.stage,
        row.true_from,
        row.true_to,
        row.known_at,
        row.value,
        row.unit,
        row.lot,
    )
