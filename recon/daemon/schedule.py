"""The clock of the service: the scheduler only ticks, what is due is computed elsewhere.

Its job store is memory: nothing that decides what runs is pickled, shared or lost with a row. The
trigger is an interval in UTC, so no change of clocks swallows a tick.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from datetime import UTC, datetime
from typing import Any

from apscheduler.events import EVENT_JOB_ERROR, EVENT_JOB_MAX_INSTANCES, EVENT_JOB_MISSED
from apscheduler.jobstores.memory import MemoryJobStore
from apscheduler.schedulers.background import BackgroundScheduler
from apscheduler.triggers.interval import IntervalTrigger

MOST_MISSED = 3
"""So many missed ticks mean that the process no longer keeps time."""
TROUBLE = {
    EVENT_JOB_ERROR: "error",
    EVENT_JOB_MISSED: "missed",
    EVENT_JOB_MAX_INSTANCES: "still running",
}


class Ticker:
    """
    Calls a short function at fixed intervals, from a thread of its own.

    Parameters
    ----------
    seconds : float
        Interval [s].
    on_tick : callable
        Must return at once; long work belongs to the worker it wakes.
    on_trouble : callable
        Told in one word when the scheduler says that a tick failed, was missed or overran.
    """

    def __init__(
        self,
        *,
        seconds: float,
        on_tick: Callable[[], None],
        on_trouble: Callable[[str], None],
    ) -> None:
        self.seconds = seconds
        self._on_tick = on_tick
        self._on_trouble = on_trouble
        self._last = time.monotonic()
        self.last_tick_at: datetime | None = None
        self.scheduler: Any = BackgroundScheduler(
            timezone=UTC,
            jobstores={"default": MemoryJobStore()},
            job_defaults={"coalesce": True, "max_instances": 1, "misfire_grace_time": None},
            daemon=True,
        )
        self.scheduler.add_listener(self._heard, sum(TROUBLE))
        self.scheduler.add_job(
            self._tick,
            IntervalTrigger(seconds=seconds, timezone=UTC),
            id="tick",
            next_run_time=datetime.now(UTC),
        )

    def start(self) -> None:
        """Begin to tick, at once."""
        self._last = time.monotonic()
        self.scheduler.start()

    def stop(self) -> None:
        """Tick no more; waits for nothing."""
        if self.scheduler.running:
            self.scheduler.shutdown(wait=False)

    def missed(self) -> int:
        """How many ticks are overdue, by a clock that nobody sets [-]."""
        return int((time.monotonic() - self._last) // self.seconds)

    def _tick(self) -> None:
        self._last = time.monotonic()
        self.last_tick_at = datetime.now(UTC)
        self._on_tick()

    def _heard(self, event: Any) -> None:
        self._on_trouble(TROUBLE[event.code])
