"""What every test needs: one thread around the numbers, and no clock on property tests."""

from __future__ import annotations

import os

from hypothesis import settings

from tests.stores import (
    book,
    book_url,
    database_url,
    migrated_file,
    migrated_template,
    postgres,
    postgres_url,
    sql_book,
)

__all__ = [
    "book",
    "book_url",
    "database_url",
    "migrated_file",
    "migrated_template",
    "postgres",
    "postgres_url",
    "sql_book",
]

os.environ.setdefault("OMP_NUM_THREADS", "1")
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

settings.register_profile("shared machine", deadline=None)
settings.load_profile("shared machine")
