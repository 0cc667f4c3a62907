"""Kills workers at random moments and counts what was lost, doubled or left half.

Two workers publish the same periods of the five-node site's book while one of them is killed, with
SIGKILL, every few seconds. The fit is replaced by a count and a pause, so that kills fall on
claims and publication; what is published has twenty cells a run.
"""

from __future__ import annotations

import argparse
import contextlib
import os
import random
import signal
import subprocess
import sys
import tempfile
import time
from dataclasses import dataclass
from datetime import date, timedelta
from pathlib import Path

from sqlalchemy import create_engine, text

from recon.app.period import PeriodInputs, PeriodResult
from recon.app.run_period import run_period
from recon.daemon.log import log_to
from recon.db.book import SqlBook
from recon.db.migrate import upgrade
from recon.errors import ReconError
from tests.app.kept import NOW, SITE, counted, keep_site, rows_of, runner_of
from tests.postgres import Server

FIRST = date(2025, 1, 1)
CELLS = 20
LEASE = 1.0


@dataclass(frozen=True, kw_only=True)
class Tally:
    """What a kill loop left behind."""

    kills: int
    periods: int
    claims: int
    published: int
    distinct: int
    current: int
    rows: int
    chain_whole: bool

    @property
    def lost(self) -> int:
        """Periods without a run."""
        return self.periods - self.current

    @property
    def doubled(self) -> int:
        """Runs of inputs that had one already."""
        return self.published - self.distinct

    @property
    def partial(self) -> int:
        """Rows missing or too many."""
        return abs(self.rows - CELLS * self.published)

    def __str__(self) -> str:
        return (
            f"kills {self.kills}, claims {self.claims}, take-overs {self.claims - self.published}, "
            f"published {self.published} of {self.periods}, distinct {self.distinct}, rows "
            f"{self.rows} of {CELLS * self.published}, chain "
            f"{'whole' if self.chain_whole else 'BROKEN'}: {self.lost} lost, {self.doubled} "
            f"doubled, {self.partial} partial"
        )


def periods(count: int) -> list[tuple[date, date]]:
    """Months to date from 2025 on."""
    days = [FIRST + timedelta(days=n) for n in range(count)]
    return [(day.replace(day=1), day) for day in days]


def work(url: str, count: int) -> None:
    """Publish whatever is not published yet, in random order, until all is."""
    log_to(as_json=False, level="critical")
    chance = random.Random(os.getpid())

    def paused(inputs: PeriodInputs) -> PeriodResult:
        time.sleep(chance.uniform(0.2, 1.0))
        return counted(inputs)

    book = SqlBook(url)
    runner = runner_of(book, owner=str(os.getpid()), lease_seconds=LEASE, compute=paused)
    print("at work", flush=True)
    while True:
        done = {(s.month, s.through) for s in book.standing(SITE)}
        left = [p for p in periods(count) if p not in done]
        if not left:
            return
        with contextlib.suppress(ReconError):
            run_period(runner, *chance.choice(left[:8]))


def loop(url: str, *, kills: int, seed: int = 1) -> Tally:
    """Run the loop on an empty migrated book and count."""
    count = 40 + 12 * kills
    book = SqlBook(url)
    keep_site(book, rows_of(date(2026, 1, 3)))
    chance = random.Random(seed)
    command = [sys.executable, "-m", "tests.bench.kills", "--worker", url, "--periods", str(count)]
    workers = [_started(command) for _ in range(2)]
    killed, give_up = 0, time.monotonic() + 30.0 * kills
    try:
        while any(worker.poll() is None for worker in workers):
            if time.monotonic() > give_up:
                raise TimeoutError(f"not finished after {killed} kills")
            time.sleep(chance.uniform(0.3, 1.5) if killed < kills else 0.2)
            place = chance.randrange(2)
            if killed < kills and workers[place].poll() is None:
                os.kill(workers[place].pid, signal.SIGKILL)
                workers[place].wait()
                killed += 1
                workers[place] = _started(command)
    finally:
        for worker in workers:
            if worker.poll() is None:
                worker.kill()
            worker.wait()
    return tally(url, book, kills=killed, count=count)


def _started(command: list[str]) -> subprocess.Popen[str]:
    """Start a worker and wait until it works, so that kills fall on work and not on its start."""
    worker = subprocess.Popen(command, stdout=subprocess.PIPE, text=True)
    assert worker.stdout is not None
    worker.stdout.readline()
    return worker


def tally(url: str, book: SqlBook, *, kills: int, count: int) -> Tally:
    """Count claims, runs, rows and check the chain."""
    engine = create_engine(url)
    with engine.connect() as connection:

        def number(sql: str) -> int:
            return int(connection.execute(text(sql)).scalar_one() or 0)

        found = Tally(
            kills=kills,
            periods=count,
            claims=number("SELECT sum(token) FROM claim"),
            published=number("SELECT count(*) FROM run"),
            distinct=number(
                "SELECT count(*) FROM (SELECT DISTINCT month, through_day, data_digest FROM run) d"
            ),
            current=number("SELECT count(*) FROM current_run"),
            rows=number("SELECT count(*) FROM table_cell"),
            chain_whole=_chain_whole(book),
        )
    engine.dispose()
    book.close()
    return found


def _chain_whole(book: SqlBook) -> bool:
    """Every run reads back as its digests say, and the chain has no gap."""
    before = ""
    for n, entry in enumerate(book.audit(SITE), start=1):
        if entry.seq != n or (n > 1 and entry.prev_hash != before):
            return False
        before = entry.hash
    return all(len(book.result(SITE, head.run).cells) == CELLS for head in book.runs(SITE))


def main(arguments: list[str]) -> int:
    """Run on one database and print the count; 1 where anything was lost, doubled or partial."""
    parser = argparse.ArgumentParser(prog="python -m tests.bench kills", description=__doc__)
    parser.add_argument("--kills", type=int, default=60)
    parser.add_argument("--database", choices=("sqlite", "postgresql"), default="sqlite")
    parser.add_argument("--seed", type=int, default=1)
    asked = parser.parse_args(arguments)
    if asked.database == "sqlite":
        with tempfile.TemporaryDirectory() as folder:
            found = _on(f"sqlite:///{Path(folder) / 'book.db'}", asked)
    else:
        server = Server()
        try:
            server.start()
            found = _on(server.url(server.create()), asked)
        finally:
            server.stop()
    print(f"{asked.database}, seed {asked.seed}: {found}")
    whole = found.chain_whole and not (found.lost or found.doubled or found.partial)
    return 0 if whole else 1


def _on(url: str, asked: argparse.Namespace) -> Tally:
    upgrade(url, at=NOW)
    return loop(url, kills=asked.kills, seed=asked.seed)


if __name__ == "__main__":
    worker = argparse.ArgumentParser()
    worker.add_argument("--worker", required=True)
    worker.add_argument("--periods", type=int, required=True)
    given = worker.parse_args()
    work(given.worker, given.periods)
