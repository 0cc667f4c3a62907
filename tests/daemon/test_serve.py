"""The service ticks, says how it is, stops when told to, and gives up when it cannot keep time."""

from __future__ import annotations

import json
import signal
import subprocess
import sys
import time
import urllib.error
import urllib.request
from collections.abc import Iterator
from datetime import UTC, datetime
from pathlib import Path

import pytest
from apscheduler.jobstores.memory import MemoryJobStore
from apscheduler.triggers.interval import IntervalTrigger

from recon.daemon.health import HealthServer
from recon.daemon.lock import held, lock_path
from recon.daemon.schedule import MOST_MISSED, Ticker
from recon.daemon.status import Status
from recon.errors import AddressTakenError, AlreadyServedError

NOW = datetime(2026, 3, 1, tzinfo=UTC)

PROGRAM = """
import sys, time
from datetime import UTC, datetime
from pathlib import Path
from recon.daemon.log import log_to
from recon.daemon.serve import Service
from recon.daemon.status import Status
from recon.settings import Settings

kind = sys.argv[1]

class Worker:
    def __init__(self): self.looks = 0
    def look(self, stopping):
        self.looks += 1
        print("look", self.looks, flush=True)
        if kind == "long": time.sleep(60)
        if kind == "fails": raise ValueError("planted")
        if kind == "stalls": service.ticker.scheduler.pause()
    def abandon(self): print("given back", flush=True)

log_to()
settings = Settings(site=Path("."), plant_url="", book_url="", tick_seconds=1, stop_seconds=1,
                    health_port=0)
service = Service(settings=settings, worker=Worker(), status=Status(started_at=datetime.now(UTC)))
sys.exit(service.run())
"""


@pytest.fixture
def program(tmp_path: Path) -> Iterator[list[subprocess.Popen[str]]]:
    started: list[subprocess.Popen[str]] = []
    yield started
    for process in started:
        process.kill()
        process.communicate()


def start(started: list[subprocess.Popen[str]], kind: str) -> subprocess.Popen[str]:
    process = subprocess.Popen(
        [sys.executable, "-c", PROGRAM, kind],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )
    started.append(process)
    assert process.stdout is not None
    assert process.stdout.readline() == "look 1\n"
    return process


def lines(text: str) -> list[dict[str, object]]:
    return [json.loads(line) for line in text.splitlines()]


def test_sigterm_ends_an_idle_service_at_once(program: list[subprocess.Popen[str]]) -> None:
    process = start(program, "idle")
    process.send_signal(signal.SIGTERM)
    _, errors = process.communicate(timeout=10)
    assert process.returncode == 0
    assert [line["event"] for line in lines(errors)] == ["serving", "stopping", "stopped"]


def test_sigterm_waits_for_a_computation_at_most_as_long_as_set(
    program: list[subprocess.Popen[str]],
) -> None:
    process = start(program, "long")
    began = time.monotonic()
    process.send_signal(signal.SIGTERM)
    out, errors = process.communicate(timeout=20)
    assert process.returncode == 0
    assert 0.9 < time.monotonic() - began < 15
    assert "given back" in out
    assert "abandoned" in [line["event"] for line in lines(errors)]


def test_an_unexpected_fault_is_logged_and_the_service_goes_on(
    program: list[subprocess.Popen[str]],
) -> None:
    process = start(program, "fails")
    assert process.stdout is not None
    assert process.stdout.readline() == "look 2\n"
    process.send_signal(signal.SIGTERM)
    _, errors = process.communicate(timeout=20)
    failed = [line for line in lines(errors) if line["event"] == "look failed unexpectedly"]
    assert "planted" in str(failed[0]["exception"])
    assert process.returncode == 0


def test_a_process_that_no_longer_ticks_ends_with_a_status_of_its_own(
    program: list[subprocess.Popen[str]],
) -> None:
    process = start(program, "stalls")
    _, errors = process.communicate(timeout=20)
    assert process.returncode == 70
    assert "no tick" in [line["event"] for line in lines(errors)]


def test_the_scheduler_keeps_nothing_but_one_interval_in_memory() -> None:
    ticker = Ticker(seconds=30, on_tick=lambda: None, on_trouble=lambda _: None)
    ticker.scheduler.start(paused=True)
    try:
        stores = ticker.scheduler._jobstores
        assert [type(store) for store in stores.values()] == [MemoryJobStore]
        (job,) = ticker.scheduler.get_jobs()
        assert isinstance(job.trigger, IntervalTrigger)
        assert str(job.trigger.timezone) == "UTC"
        assert (job.coalesce, job.max_instances, job.misfire_grace_time) == (True, 1, None)
    finally:
        ticker.stop()


def test_a_tick_in_trouble_is_told() -> None:
    told: list[str] = []

    def fails() -> None:
        raise ValueError("planted")

    ticker = Ticker(seconds=30, on_tick=fails, on_trouble=told.append)
    ticker.start()
    end = time.monotonic() + 5
    while not told and time.monotonic() < end:
        time.sleep(0.01)
    ticker.stop()
    assert told == ["error"]


def asked(url: str) -> tuple[int, str]:
    try:
        with urllib.request.urlopen(url, timeout=5) as answer:
            return int(answer.status), answer.read().decode()
    except urllib.error.HTTPError as error:
        with error:
            return error.code, error.read().decode()


def test_health_turns_red_after_three_missed_ticks_and_on_a_failed_period() -> None:
    missed = [0]
    status = Status(started_at=NOW)
    server = HealthServer(
        host="127.0.0.1",
        port=0,
        status=status,
        missed=lambda: missed[0],
        last_tick_at=lambda: NOW,
    )
    server.start()
    url = f"http://127.0.0.1:{server.port}"
    try:
        assert asked(f"{url}/health")[0] == 200
        missed[0] = MOST_MISSED - 1
        assert asked(f"{url}/health")[0] == 200
        missed[0] = MOST_MISSED
        code, text = asked(f"{url}/health")
        assert (code, json.loads(text)["missed_ticks"]) == (503, MOST_MISSED)
        missed[0] = 0
        status.period_ended("2026-03 to 03-04", "failed", seconds=1, at=NOW, trouble="no answer")
        code, text = asked(f"{url}/health")
        assert (code, json.loads(text)["trouble"]) == (503, {"2026-03 to 03-04": "no answer"})
        status.period_ended("2026-03 to 03-04", "published", seconds=1, at=NOW)
        assert asked(f"{url}/health")[0] == 200
        code, text = asked(f"{url}/metrics")
        assert 'recon_runs_total{outcome="failed"} 1.0' in text
        assert "recon_run_seconds_count 2.0" in text
        assert asked(f"{url}/other")[0] == 404
    finally:
        server.stop()


def test_a_taken_port_is_said_in_words() -> None:
    def server(port: int) -> HealthServer:
        return HealthServer(
            host="127.0.0.1",
            port=port,
            status=Status(started_at=NOW),
            missed=lambda: 0,
            last_tick_at=lambda: None,
        )

    first = server(0)
    try:
        with pytest.raises(AddressTakenError, match=f"port {first.port} cannot be used"):
            server(first.port)
    finally:
        first.stop()


def test_a_second_service_learns_who_serves_and_a_dead_one_holds_nothing(tmp_path: Path) -> None:
    book = tmp_path / "book.db"
    hold = (
        "import sys, time; from pathlib import Path; from datetime import UTC, datetime\n"
        "from recon.daemon.lock import held\n"
        "with held(Path(sys.argv[1]), since=datetime.now(UTC)):\n"
        "    print('held', flush=True); time.sleep(60)\n"
    )
    first = subprocess.Popen(
        [sys.executable, "-c", hold, str(book)], stdout=subprocess.PIPE, text=True
    )
    assert first.stdout is not None
    assert first.stdout.readline() == "held\n"
    with (
        pytest.raises(AlreadyServedError, match=f"process {first.pid} on ") as raised,
        held(book, since=NOW),
    ):
        raise AssertionError("two services hold one book")
    assert raised.value.status == 75
    first.kill()
    first.communicate()
    with held(book, since=NOW):
        assert "2026-03-01" in lock_path(book).read_text()
