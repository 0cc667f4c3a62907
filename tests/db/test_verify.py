"""`recon verify`: whoever changes a stored field, in whatever table, is found out, and where."""

from __future__ import annotations

import re
import sys
from collections.abc import Callable
from datetime import timedelta
from pathlib import Path

import pytest
from sqlalchemy import Connection, Table, create_engine, text

from recon.audit.chain import Head
from recon.cli.main import main
from recon.db.book import SqlBook
from recon.db.tables import BOOK
from recon.db.verify import CONSISTENT, PROVEN, Verified, verify
from recon.errors import AuditError
from tests.db.samples import SEEN, SITE, filled, inputs, proposal, published, pulled, record

COVERED = (
    "site_version",
    "source_query",
    "evidence_chunk",
    "evidence_manifest",
    "tag_day",
    "record",
    "decision",
    "decision_approval",
    "run",
    "measurement",
    "estimate",
    "source_offset",
    "finding",
    "figure",
    "table_cell",
    "closing_stock",
    "year_leaf",
    "audit_entry",
    "current_run",
)
EITHER = [
    "sqlite",
    pytest.param("postgresql", marks=[pytest.mark.database, pytest.mark.slow]),
]
FREE = {
    # When the book first saw a row, and columns that describe a chunk beside its content.
    ("site_version", "site"),
    ("evidence_manifest", "knowledge_cut"),
    ("evidence_chunk", "first_seen"),
    ("source_query", "first_seen"),
    ("tag_day", "first_seen"),
    ("record", "first_seen"),
    ("current_run", "knowledge_cut"),
    ("current_run", "moved_at"),
}


def two_runs(book: SqlBook) -> None:
    filled(book)
    made = book.decide(SITE, proposal(needs_approval=True, value=1.5))
    book.approve(SITE, made, by="a.roe", at=SEEN, digest_seen=made, granted=True)
    published(book, inputs(book))
    later = SEEN + timedelta(hours=1)
    book.keep(SITE, pulled([record(0, 0.9)]), seen_at=later)
    published(book, inputs(book, later), scale=2.0)


def tampered(url: str, change: Callable[[Connection], None], table: str) -> None:
    """Do what an owner of the database can: take the triggers off, change, put them back."""
    owner = create_engine(url)  # without our pragmas: foreign keys are not looked after either
    try:
        with owner.begin() as connection:
            if url.startswith("sqlite"):
                asked = text("SELECT name, sql FROM sqlite_schema WHERE type='trigger'")
                triggers = connection.execute(asked).all()
                for name, _ in triggers:
                    connection.execute(text(f"DROP TRIGGER {name}"))
                change(connection)
                for _, sql in triggers:
                    connection.exec_driver_sql(sql)
            else:
                names = [t for t in BOOK.tables if t not in ("claim", "watermark", "progress")]
                for name in names:
                    connection.execute(text(f"ALTER TABLE {name} DISABLE TRIGGER ALL"))
                change(connection)
                for name in names:
                    connection.execute(text(f"ALTER TABLE {name} ENABLE TRIGGER ALL"))
                    if name != "current_run":
                        for kind in ("change", "truncate"):
                            connection.execute(
                                text(f"ALTER TABLE {name} ENABLE ALWAYS TRIGGER {name}_no_{kind}")
                            )
    finally:
        owner.dispose()


def edit(connection: Connection, table: Table, column: str) -> None:
    """Change one column of the last row by its key, as little as its type allows."""
    keys = [c.name for c in table.primary_key.columns]
    names = ", ".join({*keys, column})
    order = ", ".join(f"{key} DESC" for key in keys)
    row = connection.execute(
        text(
            f"SELECT {names} FROM {table.name} WHERE {column} IS NOT NULL ORDER BY {order} LIMIT 1"
        )
    ).first()
    assert row is not None, f"no row of {table.name} has a {column}"
    kind = table.c[column].type.python_type.__name__
    lite = connection.dialect.name == "sqlite"
    change = {
        "float": f"{column} * (1 + 1e-15) + 1e-300" if column != "u" else f"{column} + 1e-3",
        "int": f"{column} + 1",
        "bool": f"1 - {column}" if lite else f"NOT {column}",
        "str": f"{column} || 'x'",
        "date": f"date({column}, '+1 day')" if lite else f"{column} + 1",
        "datetime": (
            f"replace({column}, '000Z', '001Z')" if lite else f"{column} + interval '1 microsecond'"
        ),
        "bytes": f"CAST({column} || x'00' AS BLOB)" if lite else rf"{column} || '\x00'::bytea",
    }[kind]
    if column == "state":
        change = "'draft'"
    if column == "kind" and table.name == "run":
        change = "'preview'"
    if column == "kind" and table.name == "record":
        change = "'event'"
    where = " AND ".join(f"{key} = :{key}" for key in keys)
    values = {key: getattr(row, key) for key in keys}
    changed = connection.execute(
        text(f"UPDATE {table.name} SET {column} = {change} WHERE {where}"), values
    )
    assert changed.rowcount == 1


def only(found: tuple[Verified, ...]) -> Verified:
    return next(site for site in found if site.site == SITE)


def test_an_untouched_book_is_consistent_and_proven_against_a_head_kept_outside(
    sql_book: SqlBook, book_url: str
) -> None:
    two_runs(sql_book)
    found = only(verify(book_url))
    assert (found.fault, found.verdict) == ("", CONSISTENT)
    assert CONSISTENT == "consistent with itself; not proven unchanged"
    assert (found.entries, found.runs) == (7, 2)
    assert found.chunks == 6 + 3 + 1  # tag days, days of assays, the assay that changed
    assert only(verify(book_url, outside={SITE: found.head})).verdict == PROVEN


def columns_of(table: str) -> list[str]:
    return [c.name for c in BOOK.tables[table].columns if (table, c.name) not in FREE]


def faults_of_edits(book_url: str, table: str, columns: list[str]) -> dict[str, str]:
    """Edit each column in turn, verify, and put the book back as it was."""
    faults = {}
    for column in columns:
        kept = Path(book_url.removeprefix("sqlite:///"))
        whole = kept.read_bytes()
        tampered(book_url, lambda c, name=column: edit(c, BOOK.tables[table], name), table)  # type: ignore[misc]
        try:
            faults[column] = next((v.fault for v in verify(book_url) if v.fault), "")
        except AuditError as error:
            faults[column] = str(error)
        kept.write_bytes(whole)
    return faults


def settled(sql_book: SqlBook) -> None:
    """Close the book and fold its log into the one file, so that it can be copied."""
    with sql_book.database._writer.connect() as connection:
        connection.exec_driver_sql("COMMIT")
        connection.exec_driver_sql("PRAGMA wal_checkpoint(TRUNCATE)")
        connection.exec_driver_sql("BEGIN")
    sql_book.close()


@pytest.mark.long
@pytest.mark.parametrize("book_url", ["sqlite"], indirect=True)
@pytest.mark.parametrize("table", COVERED)
def test_a_change_of_any_column_of_any_table_is_found(
    sql_book: SqlBook, book_url: str, table: str
) -> None:
    two_runs(sql_book)
    settled(sql_book)
    faults = faults_of_edits(book_url, table, columns_of(table))
    assert [column for column, fault in faults.items() if not fault] == []


@pytest.mark.parametrize("book_url", EITHER, indirect=True)
@pytest.mark.parametrize(
    ("table", "column", "said"),
    [
        ("estimate", "value", "run 2, table estimate: expected digest"),
        ("table_cell", "content", "run 2, table table_cell"),
        ("audit_entry", "actor", "entry 7: entry 7 has hash"),
        ("run", "summary", "entry 6 or what it speaks of cannot be read"),
        ("decision", "reason", "entry 2, decide"),
        ("decision_approval", "approved_by", "entry 3, approve"),
        ("site_version", "content", "entry 1, site version"),
        ("record", "value", r"assay S011\|FEED\|Cu\|final: expected a row of chunk"),
        ("tag_day", "amount", "manifest .*: expected the row .*WI-102.* found no such row"),
        ("current_run", "run", "pointer of month 2026-01-01 through 2026-01-03: expected run 2"),
        ("evidence_chunk", "content", "evidence chunk of"),
    ],
)
def test_a_change_is_named_where_it_lies(
    sql_book: SqlBook, book_url: str, table: str, column: str, said: str
) -> None:
    two_runs(sql_book)
    sql_book.close()
    change = "run = 1" if table == "current_run" else None

    def changed(connection: Connection) -> None:
        if change is not None:
            connection.execute(text(f"UPDATE {table} SET {change}"))
        else:
            edit(connection, BOOK.tables[table], column)

    tampered(book_url, changed, table)
    found = only(verify(book_url))
    assert re.search(said, found.fault), found.fault
    assert "cannot say who altered it" in found.verdict


@pytest.mark.parametrize("book_url", EITHER, indirect=True)
@pytest.mark.parametrize("table", ["estimate", "run", "finding"])
def test_rows_taken_away_or_slipped_in_are_found(
    sql_book: SqlBook, book_url: str, table: str
) -> None:
    two_runs(sql_book)
    sql_book.close()
    names = ", ".join(c.name for c in BOOK.tables[table].columns if c.name != "run")
    slip = f"INSERT INTO {table} (run, {names}) SELECT 3, {names} FROM {table} WHERE run = 1"
    if table == "run":
        slip = slip.replace("kind,", "'preview',").replace("'preview',", "kind,", 1)
    tampered(book_url, lambda c: (c.execute(text(slip)), None)[1], table)
    found = only(verify(book_url))
    assert "run 3" in found.fault


def test_a_chain_rewritten_whole_is_found_by_the_outside_head_only(
    sql_book: SqlBook, book_url: str
) -> None:
    two_runs(sql_book)
    kept = only(verify(book_url)).head
    sql_book.record(SITE, at=SEEN, actor="j.doe", action="note", subject="x", body={})
    assert only(verify(book_url, outside={SITE: kept})).verdict == PROVEN
    other = Head(seq=kept.seq, hash="0" * 64)
    assert "kept outside" in only(verify(book_url, outside={SITE: other})).fault
    ahead = Head(seq=99, hash=kept.hash)
    assert "ends with entry 8" in only(verify(book_url, outside={SITE: ahead})).fault


Run = Callable[..., tuple[int, str, str]]


@pytest.fixture
def recon(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> Run:
    """Run the command as a shell would; give status, output and complaints."""

    def run(*arguments: str) -> tuple[int, str, str]:
        monkeypatch.setattr(sys, "argv", ["recon", *arguments])
        with pytest.raises(SystemExit) as ended:
            main()
        said = capsys.readouterr()
        return int(ended.value.code or 0), said.out, said.err

    return run


def test_the_commands_make_a_book_verify_it_and_end_with_status_4_when_it_was_altered(
    database_url: str, recon: Run
) -> None:
    made = recon("database", "upgrade", "--book", database_url)
    assert made == (0, "applied 0001_book\nThe book is up to date.\n", "")
    assert "no site yet" in recon("verify", "--book", database_url)[1]
    book = SqlBook(database_url)
    two_runs(book)
    book.close()
    status, good, _ = recon("verify", "--book", database_url)
    assert status == 0
    assert CONSISTENT in good
    head = re.search(r"Keep this head elsewhere: (\S+)", good)
    assert head is not None
    assert PROVEN in recon("verify", "--book", database_url, "--head", head[1])[1]
    status, said, complaint = recon("verify", "--book", database_url, "--head", "five:x:y")
    assert (status, said) == (2, "")
    assert "expected SITE:NUMBER:HASH" in complaint
    tampered(database_url, lambda c: edit(c, BOOK.tables["figure"], "value"), "figure")
    status, bad, _ = recon("verify", "--book", database_url)
    assert status == 4
    assert "NOT WHAT WAS WRITTEN: site five, run 2, table figure" in bad
