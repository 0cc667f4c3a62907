"""How many changes of a small book are found: `python -m tests.bench tamper`.

Edits (`--edits`) are made by somebody who owns the file: triggers are taken off and put back. Eight
kinds, each against a head kept outside: a field of a result, rows of a result away or slipped in,
a field of an entry, an entry away, two entries swapped, the tail cut, and the chain rewritten whole
from one entry on. Flips (`--flips`) change one bit of the file anywhere. Every number that is still
shown is compared with what was published.
"""

from __future__ import annotations

import argparse
import random
import sqlite3
import tempfile
import time
from collections import Counter
from collections.abc import Callable
from dataclasses import replace
from datetime import UTC, datetime, timedelta
from pathlib import Path

import recon
from recon.app.period import PeriodResult
from recon.audit.chain import FIRST, Entry, Head, link
from recon.db.book import SqlBook
from recon.db.migrate import upgrade
from recon.db.rows import RESULT_TABLES
from recon.db.tables import AUDIT_ENTRY
from recon.db.utc import from_text
from recon.db.verify import verify
from recon.errors import ReconError
from tests.db.samples import SEEN, SITE, filled, inputs, proposal, published, pulled, record

RESULTS = [table.name for table in RESULT_TABLES]


def main(arguments: list[str]) -> int:
    """Count; status 1 where anything was missed, shown wrongly, or ended without words."""
    parser = argparse.ArgumentParser(prog="python -m tests.bench tamper", description=__doc__)
    parser.add_argument("--edits", type=int, default=10_000)
    parser.add_argument("--flips", type=int, default=2_000)
    parser.add_argument("--seed", type=int, default=1)
    asked = parser.parse_args(arguments)
    chance = random.Random(asked.seed)
    print(f"recon {recon.__version__}, {datetime.now(UTC):%Y-%m-%d}, seed {asked.seed}")
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "book.db"
        head, shown = make_book(path)
        whole = path.read_bytes()
        print(f"book of {len(whole):,} bytes, {head.seq} entries, 2 runs")
        missed = count_edits(path, whole, head, asked.edits, chance)
        wrong = count_flips(path, whole, head, shown, asked.flips, chance)
        restore(path, whole)
        url = f"sqlite:///{path}"
        control = (_verdict(url, head), _display(url, shown))
    if control != ("verify: intact", "shown: as published"):
        print(f"the untouched book ends as {control}: these counts are worth nothing")
        return 1
    return 1 if missed or wrong else 0


def make_book(path: Path) -> tuple[Head, list[PeriodResult]]:
    """Two runs, a decision and its approval, in one file without a log beside it."""
    url = f"sqlite:///{path}"
    upgrade(url, at=SEEN)
    book = SqlBook(url)
    filled(book)
    made = book.decide(SITE, proposal(needs_approval=True))
    book.approve(SITE, made, by="a.roe", at=SEEN, digest_seen=made, granted=True)
    published(book, inputs(book))
    later = SEEN + timedelta(hours=1)
    book.keep(SITE, pulled([record(0, 0.9)]), seen_at=later)
    published(book, inputs(book, later), scale=2.0)
    shown = results(book)
    book.close()
    plain = sqlite3.connect(path)
    plain.execute("PRAGMA wal_checkpoint(TRUNCATE)")
    plain.execute("PRAGMA journal_mode=DELETE")
    plain.close()
    return verify(url)[0].head, shown


def results(book: SqlBook) -> list[PeriodResult]:
    """Every number that a person could be shown."""
    return [book.result(SITE, run) for run in (1, 2)]


def restore(path: Path, whole: bytes) -> None:
    """Put the book back as it was, without a log beside it."""
    for beside in ("-wal", "-shm"):
        Path(f"{path}{beside}").unlink(missing_ok=True)
    path.write_bytes(whole)


Edit = Callable[[sqlite3.Connection, random.Random], None]


def a_field(connection: sqlite3.Connection, table: str, chance: random.Random) -> None:
    """Change one character of one field of one row."""
    count = connection.execute(f"SELECT count(*) FROM {table}").fetchone()[0]
    columns = [row[1] for row in connection.execute(f"PRAGMA table_info({table})")]
    keys = [r[1] for r in connection.execute(f"PRAGMA table_info({table})") if r[5]]
    row = dict(
        zip(
            columns,
            connection.execute(
                f"SELECT * FROM {table} LIMIT 1 OFFSET ?", [chance.randrange(count)]
            ).fetchone(),
            strict=True,
        )
    )
    column = chance.choice([name for name in columns if row[name] is not None])
    value = row[column]
    if isinstance(value, bytes):
        place = chance.randrange(len(value))
        value = value[:place] + bytes([value[place] ^ 1]) + value[place + 1 :]
    elif isinstance(value, str):
        value = value + "x" if chance.random() < 0.5 or not value else value[:-1]
    elif isinstance(value, int):
        value = 1 - value if value in (0, 1) else value + 1
    else:
        value = value * (1 + 1e-12) + 1e-290
    where = " AND ".join(f"{key} = ?" for key in keys)
    connection.execute(
        f"UPDATE {table} SET {column} = ? WHERE {where}", [value, *(row[k] for k in keys)]
    )


def field_of_result(connection: sqlite3.Connection, chance: random.Random) -> None:
    a_field(connection, chance.choice([*RESULTS, "run"]), chance)


def row_away(connection: sqlite3.Connection, chance: random.Random) -> None:
    table = chance.choice(RESULTS)
    where = f"run = {chance.choice((1, 2))}"
    connection.execute(f"DELETE FROM {table} WHERE {where}")


def row_slipped_in(connection: sqlite3.Connection, chance: random.Random) -> None:
    table = chance.choice(RESULTS)
    columns = [row[1] for row in connection.execute(f"PRAGMA table_info({table})")]
    copied = ", ".join("run + 2" if name == "run" else name for name in columns)
    connection.execute(f"INSERT INTO {table} SELECT {copied} FROM {table}")


def field_of_entry(connection: sqlite3.Connection, chance: random.Random) -> None:
    a_field(connection, "audit_entry", chance)


def entry_away(connection: sqlite3.Connection, chance: random.Random) -> None:
    last = connection.execute("SELECT max(seq) FROM audit_entry").fetchone()[0]
    connection.execute("DELETE FROM audit_entry WHERE seq = ?", [chance.randint(1, last)])


def entries_swapped(connection: sqlite3.Connection, chance: random.Random) -> None:
    last = connection.execute("SELECT max(seq) FROM audit_entry").fetchone()[0]
    one = chance.randint(1, last - 1)
    for was, now in ((one, -1), (one + 1, one), (-1, one + 1)):
        connection.execute("UPDATE audit_entry SET seq = ? WHERE seq = ?", [now, was])


def tail_cut(connection: sqlite3.Connection, chance: random.Random) -> None:
    last = connection.execute("SELECT max(seq) FROM audit_entry").fetchone()[0]
    connection.execute("DELETE FROM audit_entry WHERE seq > ?", [chance.randint(1, last - 1)])


def rewritten(connection: sqlite3.Connection, chance: random.Random) -> None:
    """Another actor in one entry, and every hash from there on made anew."""
    names = ", ".join(c.name for c in AUDIT_ENTRY.columns)
    rows = connection.execute(f"SELECT {names} FROM audit_entry ORDER BY seq").fetchall()
    entries = [
        replace(Entry(**dict(zip(names.split(", "), row, strict=True))), at=from_text(row[2]))
        for row in rows
    ]
    place = chance.randrange(len(entries))
    head = Head(seq=0, hash=FIRST)
    for number, entry in enumerate(entries):
        actor = "another" if number == place else entry.actor
        made = link(
            site=entry.site,
            after=head,
            at=entry.at,
            actor=actor,
            action=entry.action,
            subject=entry.subject,
            body=entry.body,
        )
        connection.execute(
            "UPDATE audit_entry SET actor = ?, prev_hash = ?, hash = ? WHERE seq = ?",
            [actor, made.prev_hash, made.hash, made.seq],
        )
        head = Head(seq=made.seq, hash=made.hash)


KINDS: tuple[Edit, ...] = (
    field_of_result,
    row_away,
    row_slipped_in,
    field_of_entry,
    entry_away,
    entries_swapped,
    tail_cut,
    rewritten,
)


def count_edits(path: Path, whole: bytes, head: Head, wanted: int, chance: random.Random) -> int:
    """Make edits one at a time on a fresh copy and verify each; give how many were missed."""
    found: Counter[str] = Counter()
    missed: Counter[str] = Counter()
    began = time.perf_counter()
    for number in range(wanted):
        edit = KINDS[number % len(KINDS)]
        restore(path, whole)
        plain = sqlite3.connect(path)
        triggers = plain.execute(
            "SELECT name, sql FROM sqlite_schema WHERE type = 'trigger'"
        ).fetchall()
        for name, _ in triggers:
            plain.execute(f"DROP TRIGGER {name}")
        _edited(edit, plain, chance)
        for _, text in triggers:
            plain.execute(text)
        plain.commit()
        plain.close()
        try:
            fault = any(v.fault for v in verify(f"sqlite:///{path}", outside={SITE: head}))
        except ReconError:
            fault = True
        (found if fault else missed)[edit.__name__] += 1
    seconds = time.perf_counter() - began
    print(
        f"edits: {wanted:,} made, {found.total():,} found, {missed.total()} missed, {seconds:.0f} s"
    )
    for edit in KINDS:
        name = edit.__name__
        print(f"  {name:16} {found[name]:6,} found {missed[name]:4} missed")
    return missed.total()


def _edited(edit: Edit, connection: sqlite3.Connection, chance: random.Random) -> None:
    """Make an edit; one that a key of the table forbids is drawn again."""
    while True:
        connection.execute("SAVEPOINT before")
        try:
            edit(connection, chance)
            return
        except sqlite3.IntegrityError:
            connection.execute("ROLLBACK TO before")


def count_flips(
    path: Path,
    whole: bytes,
    head: Head,
    shown: list[PeriodResult],
    wanted: int,
    chance: random.Random,
) -> int:
    """Flip bits one at a time; give how many showed a wrong number or ended without words."""
    ends: Counter[str] = Counter()
    began = time.perf_counter()
    for _ in range(wanted):
        flipped = bytearray(whole)
        bit = chance.randrange(len(whole) * 8)
        flipped[bit // 8] ^= 1 << bit % 8
        restore(path, bytes(flipped))
        ends[_verdict(f"sqlite:///{path}", head)] += 1
        ends[_display(f"sqlite:///{path}", shown)] += 1
    seconds = time.perf_counter() - began
    print(f"flips: {wanted:,} made, {seconds:.0f} s")
    for name, count in sorted(ends.items()):
        print(f"  {name:38} {count:6,}")
    return ends["shown: WRONG NUMBER"] + sum(n for k, n in ends.items() if "WITHOUT WORDS" in k)


def _verdict(url: str, head: Head) -> str:
    try:
        found = verify(url, outside={SITE: head})
    except ReconError:
        return "verify: damaged"
    except Exception as error:
        return f"verify: WITHOUT WORDS {type(error).__name__}"
    return "verify: tampered" if any(v.fault for v in found) else "verify: intact"


def _display(url: str, shown: list[PeriodResult]) -> str:
    try:
        book = SqlBook(url)
    except ReconError:
        return "shown: nothing, refused"
    except Exception as error:
        return f"shown: WITHOUT WORDS {type(error).__name__}"
    try:
        return "shown: as published" if results(book) == shown else "shown: WRONG NUMBER"
    except ReconError:
        return "shown: nothing, refused"
    except Exception as error:
        return f"shown: WITHOUT WORDS {type(error).__name__}"
    finally:
        book.close()
