"""The book's tables as the code sees them; the text that makes them lies in ``sql/``.

A test holds these against both databases as migrated.
"""

from __future__ import annotations

from sqlalchemy import (
    BigInteger,
    Boolean,
    Column,
    Date,
    Double,
    LargeBinary,
    MetaData,
    Table,
    Text,
)

from recon.db.utc import UtcTime

BOOK = MetaData()
KINDS = {
    "text": Text,
    "day": Date,
    "time": UtcTime,
    "whole": BigInteger,
    "number": Double,
    "flag": Boolean,
    "bytes": LargeBinary,
}


def _table(name: str, key: str, columns: str) -> Table:
    """A table; columns without a kind are text, a question mark says that null is allowed."""
    made = []
    for column in columns.split():
        title, _, kind = column.partition(":")
        made.append(
            Column(
                title,
                KINDS[kind.rstrip("?") or "text"](),
                primary_key=title in key.split(),
                nullable=kind.endswith("?"),
                autoincrement=False,
            )
        )
    return Table(name, BOOK, *made)


SCHEMA_MIGRATION = _table(
    "schema_migration",
    "number",
    "number:whole name sha256 applied_at:time applied_by",
)
SITE_VERSION = _table(
    "site_version",
    "site digest",
    "site digest valid_from:day known_at:time added_by content",
)
SOURCE_QUERY = _table(
    "source_query",
    "site digest",
    "site digest content first_seen:time",
)
EVIDENCE_CHUNK = _table(
    "evidence_chunk",
    "site digest",
    "site digest kind subject day:day row_count:whole query first_seen:time content:bytes",
)
EVIDENCE_MANIFEST = _table(
    "evidence_manifest",
    "site digest",
    "site digest knowledge_cut:time content:bytes",
)
TAG_DAY = _table(
    "tag_day",
    "site tag day first_seen",
    "site tag day:day first_seen:time chunk amount:number? covered_hours:number "
    "day_hours:number running_hours:number mean:number? readings:whole bad:whole "
    "last_known:time said",
)
RECORD = _table(
    "record",
    "site kind document subject item stage known_at first_seen",
    "site kind document subject item stage known_at:time first_seen:time true_from:time "
    "true_to:time value:number? unit lot extra chunk",
)
SOURCE_CHANGE = _table(
    "source_change",
    "site kind subject noticed_at",
    "site kind subject noticed_at:time change true_from:time true_to:time content evidence",
)
DECISION = _table(
    "decision",
    "site decision",
    "site decision kind subject first_day:day? last_day:day? value:number? reason evidence "
    "previews:whole needs_approval:flag made_by made_at:time",
)
DECISION_APPROVAL = _table(
    "decision_approval",
    "site decision",
    "site decision made_by approved_by approved_at:time digest_seen granted:flag",
)
RUN = _table(
    "run",
    "site run",
    "site run:whole month:day through_day:day kind revision:whole data_digest "
    "knowledge_cut:time manifest site_versions method summary table_digests result_digest "
    "published_at:time",
)
MEASUREMENT = _table(
    "measurement",
    "site run day name",
    "site run:whole day:day name kind stream:? node:? boundary:? quantity basis unit "
    "value:number u_random:number? u:number? held:flag estimated:flag reconciled:number? "
    "adjustment:number? standardised:number? redundant:flag sources",
)
ESTIMATE = _table(
    "estimate",
    "site run day place boundary quantity basis",
    "site run:whole day:day place boundary quantity basis value:number? u:number? "
    "determined:flag at_bound:flag reason",
)
SOURCE_OFFSET = _table(
    "source_offset",
    "site run source draw_from",
    "site run:whole source draw_from:day value:number u:number standardised:number?",
)
FINDING = _table(
    "finding",
    "site run seq",
    "site run:whole seq:whole code subject severity day:day? period:whole? content evidence",
)
FIGURE = _table(
    "figure",
    "site run name period",
    "site run:whole name period value:number? u:number? basis budget reason",
)
TABLE_CELL = _table(
    "table_cell",
    "site run table_name period row_key column_key",
    "site run:whole table_name period row_key column_key value:number? content:? u:number? "
    "unit basis reason",
)
CLOSING_STOCK = _table(
    "closing_stock",
    "site run node quantity",
    "site run:whole node quantity value:number? u:number? basis booked:number",
)
YEAR_LEAF = _table(
    "year_leaf",
    "site run month table_name row_key column_key",
    "site run:whole month table_name row_key column_key value:number",
)
CLOSING_EVENT = _table(
    "closing_event",
    "site month seq",
    "site month:day seq:whole state run:whole? knowledge_cut:time? digest_seen by_person "
    "at:time content",
)
PRIOR_PERIOD_ADJUSTMENT = _table(
    "prior_period_adjustment",
    "site booked_month seq component",
    "site booked_month:day seq:whole component first_month:day last_month:day item class "
    "delta_opening:number delta_net_in:number delta_closing:number delta_unaccounted:number "
    "named_by content",
)
DOCUMENT = _table(
    "document",
    "site month name digest",
    "site month:day name digest content:bytes issued_at:time",
)
AUDIT_ENTRY = _table(
    "audit_entry",
    "site seq",
    "site seq:whole at:time actor action subject body:bytes prev_hash hash",
)
CURRENT_RUN = _table(
    "current_run",
    "site month through_day",
    "site month:day through_day:day run:whole knowledge_cut:time moved_at:time",
)
CLAIM = _table(
    "claim",
    "site month through_day",
    "site month:day through_day:day owner token:whole data_digest knowledge_cut:time "
    "lease_until:time done:flag",
)
WATERMARK = _table(
    "watermark",
    "site source",
    "site source known_through:time fingerprint read_at:time",
)
PROGRESS = _table(
    "progress",
    "site work",
    "site work done:whole total:whole message at:time",
)

CHANGEABLE = frozenset({"current_run", "claim", "watermark", "progress"})
"""Tables whose rows may be changed; every other one is append-only."""

PROTECTED = tuple(name for name in BOOK.tables if name not in CHANGEABLE)
