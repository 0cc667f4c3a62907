"""Reporting views: the same on both databases, showing the runs that speak now and no others."""

from __future__ import annotations

import re
from datetime import timedelta

from sqlalchemy import text

from recon.db.book import SqlBook
from recon.db.migrate import sql_folder
from recon.tabulate.columns import TABLES
from tests.db.samples import SEEN, SITE, filled, inputs, proposal, published, pulled, record

TEXTS = "".join(path.read_text() for path in sorted((sql_folder() / "views").glob("*.sql")))
VIEWS = re.findall(r"CREATE VIEW (\w+)", TEXTS)


def rows(book: SqlBook, statement: str) -> list[tuple[object, ...]]:
    with book.database.reading() as connection:
        return [tuple(row) for row in connection.execute(text(statement))]


def test_every_view_answers_and_shows_only_the_current_run(sql_book: SqlBook) -> None:
    filled(sql_book)
    sql_book.decide(SITE, proposal())
    published(sql_book, inputs(sql_book))
    later = SEEN + timedelta(hours=1)
    sql_book.keep(SITE, pulled([record(0, 0.9)]), seen_at=later)
    published(sql_book, inputs(sql_book, later), scale=2.0)
    counts = {view: rows(sql_book, f"SELECT count(*) FROM {view}")[0][0] for view in VIEWS}
    assert counts["report_current"] == 1
    assert counts["report_cells"] == 3
    assert counts["report_streams"] == 3
    assert counts["report_measurements"] == 4
    assert counts["report_estimates"] == 12
    assert counts["report_findings"] == 2
    assert counts["report_figures"] == 1
    assert counts["report_runs"] == 2
    assert counts["report_decisions"] == 1
    assert counts["report_audit"] == 6
    assert counts["report_source_changes"] == 1
    current = rows(sql_book, "SELECT run FROM report_runs WHERE is_current = 'yes'")
    assert current == [(2,)]
    dry = "SELECT value FROM report_streams WHERE row_key = 'feed' AND column_key = 'dry'"
    assert rows(sql_book, dry) == [(2002.0,)]


def test_every_published_table_with_a_balance_has_a_view_of_its_own() -> None:
    shown = set(re.findall(r"table_name = '([a-z-]+)'", TEXTS))
    assert {table.name for table in TABLES} - shown == {"tests", "residues"}


def test_every_view_says_what_it_shows() -> None:
    for view in VIEWS:
        assert re.search(rf"-- [A-Z][^\n]+\nCREATE VIEW {view} ", TEXTS), view
