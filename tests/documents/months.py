"""Months stated for the tests of documents."""

from __future__ import annotations

from datetime import UTC, date, datetime

from recon.documents.heading import Heading

HEADING = Heading(
    site="mill",
    title="Example mill",
    month=date(2026, 1, 1),
    through=date(2026, 1, 2),
    knowledge_cut=datetime(2026, 2, 5, 10, tzinfo=UTC),
    state="draft",
    run="17",
    revision=2,
    result_digest="ab" * 32,
)
