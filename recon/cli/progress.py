"""How long work shows on a terminal: one moving line, or plain lines where output is kept."""

from __future__ import annotations

import sys
import time
from datetime import datetime
from typing import TYPE_CHECKING, TextIO

if TYPE_CHECKING:
    from recon.app.rounds import Ended

PAUSE = 5.0
"""Without a terminal a step is told at most so often [s]."""


class Terminal:
    """
    Watches rounds for a person.

    Parameters
    ----------
    stream : file, optional
        Standard error by default, so that results can be piped away.
    """

    def __init__(self, stream: TextIO | None = None) -> None:
        self._stream = stream or sys.stderr
        self._moving = self._stream.isatty()
        self._wide = 0
        self._told = time.monotonic()
        self.failed: list[str] = []

    def found_due(self, count: int) -> None:
        """So many periods are due."""
        if count:
            self._line(f"{count} period{'s' if count != 1 else ''} due")

    def reading(self, what: str, done: int, total: int) -> None:
        """A source is being read."""
        self.step(f"reading {what} ({done + 1} of {total})")

    def period_began(self, period: str) -> None:
        """A period is being computed."""
        self.step(f"computing {period}")

    def period_ended(
        self, period: str, outcome: Ended, *, seconds: float, at: datetime, trouble: str = ""
    ) -> None:
        """A period is done, or was not for the reason given."""
        del at
        self._line(f"{period}: {outcome} ({seconds:.1f} s){': ' + trouble if trouble else ''}")
        if outcome == "failed":
            self.failed.append(f"{period}: {trouble}")

    def step(self, text: str) -> None:
        """Say what is being done; the next step takes its place."""
        if self._moving:
            self._stream.write("\r" + text[:110].ljust(self._wide))
            self._wide = len(text[:110])
            self._stream.flush()
        elif time.monotonic() - self._told > PAUSE:
            self._line(text)

    def done(self) -> None:
        """Clear the moving line."""
        if self._moving and self._wide:
            self._stream.write("\r" + " " * self._wide + "\r")
            self._wide = 0
            self._stream.flush()

    def _line(self, text: str) -> None:
        self.done()
        self._stream.write(text + "\n")
        self._stream.flush()
        self._told = time.monotonic()
