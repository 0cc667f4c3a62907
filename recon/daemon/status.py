"""What the service is doing, for the health page and the metrics."""

from __future__ import annotations

import threading
from dataclasses import dataclass
from datetime import datetime
from typing import Literal

from prometheus_client import CollectorRegistry, Counter, Gauge, Histogram

Outcome = Literal["published", "pointed", "unchanged", "held by another", "lost", "failed"]
TAKES = (0.1, 0.3, 1.0, 3.0, 10.0, 30.0, 100.0, 300.0)


@dataclass(frozen=True, kw_only=True)
class Snapshot:
    """The service at one instant; times aware UTC, None where it has not happened yet."""

    started_at: datetime
    last_look_at: datetime | None
    working_on: str
    last_published: str
    trouble: tuple[tuple[str, str], ...]
    due: int


class Status:
    """Written by the worker, read by the health page; safe between threads."""

    def __init__(self, *, started_at: datetime) -> None:
        self._lock = threading.Lock()
        self._started_at = started_at
        self._last_look_at: datetime | None = None
        self._working_on = ""
        self._last_published = ""
        self._trouble: dict[str, str] = {}
        self._due = 0
        self.registry = CollectorRegistry()
        self.ticks = Counter("recon_ticks", "Ticks of the scheduler.", registry=self.registry)
        self.tick_trouble = Counter(
            "recon_tick_trouble", "Ticks in trouble, by kind.", ["kind"], registry=self.registry
        )
        self.last_tick = Gauge(
            "recon_last_tick_timestamp_seconds", "Time of the last tick.", registry=self.registry
        )
        self.runs = Counter(
            "recon_runs", "Periods looked at, by outcome.", ["outcome"], registry=self.registry
        )
        self.run_seconds = Histogram(
            "recon_run_seconds", "Time a period took.", buckets=TAKES, registry=self.registry
        )
        self.due_now = Gauge("recon_due", "Periods due at the last look.", registry=self.registry)
        self.looks = Counter(
            "recon_looks", "Looks at what is due, by outcome.", ["outcome"], registry=self.registry
        )
        self.published_at = Gauge(
            "recon_last_published_timestamp_seconds",
            "Time of the last published run.",
            registry=self.registry,
        )

    def look_began(self) -> None:
        """A look at what is due has begun."""
        with self._lock:
            self._working_on = "reading the plant's sources"

    def look_ended(self, at: datetime, *, trouble: str = "") -> None:
        """A look has ended; ``trouble`` says why it could not be finished."""
        with self._lock:
            self._last_look_at = at
            self._working_on = ""
            self._set("look", trouble)
        self.looks.labels("failed" if trouble else "done").inc()

    def found_due(self, count: int) -> None:
        """So many periods are due now."""
        with self._lock:
            self._due = count
        self.due_now.set(count)

    def reading(self, what: str, done: int, total: int) -> None:
        """A source is being read."""
        with self._lock:
            self._working_on = f"reading {what} ({done + 1} of {total})"

    def period_began(self, period: str) -> None:
        """A period is being computed."""
        with self._lock:
            self._working_on = period

    def period_ended(
        self, period: str, outcome: Outcome, *, seconds: float, at: datetime, trouble: str = ""
    ) -> None:
        """A period is done, or failed for the reason given."""
        with self._lock:
            self._working_on = ""
            self._set(period, trouble)
            if outcome in ("published", "pointed"):
                self._last_published = f"{period} at {at.isoformat(timespec='seconds')}"
        self.runs.labels(outcome).inc()
        self.run_seconds.observe(seconds)
        if outcome in ("published", "pointed"):
            self.published_at.set(at.timestamp())

    def snapshot(self) -> Snapshot:
        """Give everything as it stands."""
        with self._lock:
            return Snapshot(
                started_at=self._started_at,
                last_look_at=self._last_look_at,
                working_on=self._working_on,
                last_published=self._last_published,
                trouble=tuple(sorted(self._trouble.items())),
                due=self._due,
            )

    def _set(self, subject: str, trouble: str) -> None:
        if trouble:
            self._trouble[subject] = trouble
        else:
            self._trouble.pop(subject, None)
