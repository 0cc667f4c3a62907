"""The service: a ticker wakes a worker, a health page watches both, SIGTERM ends them cleanly."""

from __future__ import annotations

import signal
import threading
from collections.abc import Callable
from contextlib import nullcontext
from datetime import UTC, datetime
from types import FrameType
from typing import TYPE_CHECKING, Protocol

import structlog

from recon.daemon.health import HealthServer
from recon.daemon.lock import held
from recon.daemon.schedule import MOST_MISSED, Ticker
from recon.daemon.status import Status
from recon.errors import DONE, AuditError, ReconError
from recon.wiring import book_file, workplace

if TYPE_CHECKING:
    from recon.settings import Settings

STALLED = 70
"""Exit status of a process that no longer keeps time; its supervisor starts a new one."""
LONGEST_PAUSE = 20
"""After failures in a row the worker skips up to so many ticks."""
log = structlog.get_logger()


def serve(settings: Settings) -> int:
    """
    Serve one site until a signal ends it.

    Returns
    -------
    int
        Exit status, see ``Service.run``.

    Raises
    ------
    AlreadyServedError
        Another process serves the same embedded book.
    ReconError
        Settings, site file or book cannot be used.
    """
    now = datetime.now(UTC)
    status = Status(started_at=now)
    file = book_file(settings)
    with (
        held(file, since=now) if file is not None else nullcontext(),
        workplace(settings, watcher=status, actor="recon serve") as place,
    ):
        return Service(settings=settings, worker=place.rounds, status=status).run()


class Worker(Protocol):
    """What the service does at a tick."""

    def look(self, stopping: Callable[[], bool]) -> object:
        """Pull what is new and run what is due; stops between periods when asked to."""
        ...

    def abandon(self) -> None:
        """Give back the claim of a computation that nobody waits for any more."""
        ...


class Service:
    """
    One site's service, from start to stop.

    Parameters
    ----------
    settings : Settings
    worker : Worker
    status : Status
    """

    def __init__(self, *, settings: Settings, worker: Worker, status: Status) -> None:
        self.settings = settings
        self.worker = worker
        self.status = status
        self._stop = threading.Event()
        self._wake = threading.Event()
        self._broken: AuditError | None = None
        self.ticker = Ticker(
            seconds=settings.tick_seconds, on_tick=self._tick, on_trouble=self._trouble
        )
        self.health = HealthServer(
            host=settings.health_host,
            port=settings.health_port,
            status=status,
            missed=self.ticker.missed,
            last_tick_at=lambda: self.ticker.last_tick_at,
        )

    def run(self) -> int:
        """
        Serve until a signal, a stall or broken evidence ends it.

        Returns
        -------
        int
            Exit status: 0 after a signal, 70 when the process no longer keeps time.

        Raises
        ------
        AuditError
            The book is not what it was; serving on could bury it.
        """
        for name in (signal.SIGTERM, signal.SIGINT):
            signal.signal(name, self._signalled)
        thread = threading.Thread(target=self._work, name="worker", daemon=True)
        self.health.start()
        self.ticker.start()
        thread.start()
        log.info("serving", health=f"http://{self.settings.health_host}:{self.health.port}/health")
        while not self._stop.wait(min(self.settings.tick_seconds / 2, 1.0)):
            if self.ticker.missed() >= MOST_MISSED:
                log.error("no tick", missed=self.ticker.missed(), exit_status=STALLED)
                self._abandon()
                return STALLED
        self.ticker.stop()
        self._wake.set()
        thread.join(self.settings.stop_seconds)
        if thread.is_alive():
            log.warning("abandoned", waited_seconds=self.settings.stop_seconds)
            self._abandon()
        self.health.stop()
        if self._broken is not None:
            raise self._broken
        log.info("stopped")
        return DONE

    def _signalled(self, number: int, _frame: FrameType | None) -> None:
        log.info("stopping", signal=signal.Signals(number).name)
        self._stop.set()

    def _tick(self) -> None:
        self.status.ticks.inc()
        self.status.last_tick.set_to_current_time()
        self._wake.set()

    def _trouble(self, kind: str) -> None:
        self.status.tick_trouble.labels(kind).inc()
        log.warning("tick in trouble", kind=kind)

    def _abandon(self) -> None:
        try:
            self.worker.abandon()
        except ReconError as error:
            log.warning("claim not given back, its lease will run out", reason=str(error))

    def _work(self) -> None:
        failures = 0
        while not self._stop.is_set():
            self._wake.wait()
            self._wake.clear()
            if self._stop.is_set():
                return
            failures = 0 if self._look() else failures + 1
            if failures > 1:
                pause = min(2 ** (failures - 2), LONGEST_PAUSE) * self.settings.tick_seconds
                self._stop.wait(pause)
                self._wake.set()

    def _look(self) -> bool:
        """Look once; what goes wrong is said, counted, and tried again at a later tick."""
        self.status.look_began()
        trouble = ""
        try:
            self.worker.look(self._stop.is_set)
        except AuditError as error:
            trouble, self._broken = str(error), error
            log.error("evidence is broken", reason=trouble)
            self._stop.set()
        except ReconError as error:
            trouble = str(error)
            log.error("look failed", reason=trouble)
        except Exception as error:
            trouble = f"unexpected: {type(error).__name__}; see the log"
            log.exception("look failed unexpectedly")
        self.status.look_ended(datetime.now(UTC), trouble=trouble)
        return not trouble
