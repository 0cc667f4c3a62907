"""How the book keeps an instant: aware in, UTC stored, aware UTC out, on both databases."""

from __future__ import annotations

from datetime import UTC, datetime
from typing import Any

from sqlalchemy import DateTime, Text
from sqlalchemy.engine import Dialect
from sqlalchemy.types import TypeDecorator, TypeEngine

from recon.audit.canonical import instant_text


def from_text(text: str) -> datetime:
    """Read an instant that ``instant_text`` wrote."""
    return datetime.fromisoformat(text)


class UtcTime(TypeDecorator[datetime]):
    """``timestamptz`` on PostgreSQL; on SQLite text, whose own type would drop the zone."""

    impl = DateTime
    cache_ok = True

    @property
    def python_type(self) -> type[datetime]:
        """What a value is in Python."""
        return datetime

    def load_dialect_impl(self, dialect: Dialect) -> TypeEngine[Any]:
        """Choose the column type of a dialect."""
        if dialect.name == "sqlite":
            return dialect.type_descriptor(Text())
        return dialect.type_descriptor(DateTime(timezone=True))

    def process_bind_param(self, value: datetime | None, dialect: Dialect) -> Any:
        """Store UTC; an instant without zone is refused."""
        if value is None:
            return None
        text = instant_text(value)
        return text if dialect.name == "sqlite" else value.astimezone(UTC)

    def process_result_value(self, value: Any, dialect: Dialect) -> datetime | None:
        """Give aware UTC back."""
        if value is None:
            return None
        return from_text(value) if dialect.name == "sqlite" else value.astimezone(UTC)
