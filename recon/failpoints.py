"""Places where a test may let the program fail: named, listed, and without effect unless armed.

The code calls ``reach`` where a crash would hurt most. ``recon.wiring`` arms points from the
environment variable ``RECON_FAILPOINTS`` for fault tests; a service in earnest never sets it.
"""

from __future__ import annotations

import os
import signal
import time
from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal, get_args

VARIABLE = "RECON_FAILPOINTS"
NAMES = (
    "after_claim",
    "after_read",
    "after_compute",
    "mid_keep",
    "mid_publish",
    "before_commit",
    "after_commit",
    "mid_export",
    "mid_migration",
    "mid_close",
)
Kind = Literal["kill", "raise", "stall", "cut"]
KINDS: tuple[Kind, ...] = get_args(Kind)


class ReachedError(RuntimeError):
    """An armed failpoint was reached; it stands for a fault nobody foresaw."""


@dataclass
class _Armed:
    kind: Kind
    seconds: float
    passes: int


_armed: dict[str, _Armed] = {}


def arm(text: str) -> None:
    """
    Arm points, ``name=kind[:seconds][@n]`` with commas between; n: fail at the n-th pass.

    ``kill`` ends the process without warning, ``raise`` raises ``ReachedError``, ``stall`` sleeps
    (longer than a lease, say) and goes on, ``cut`` breaks the database connection in use.

    Raises
    ------
    ValueError
        Unknown name or kind.

    Examples
    --------
    >>> arm("mid_publish=raise@3, after_claim=stall:2.5")
    >>> sorted(_armed)
    ['after_claim', 'mid_publish']
    >>> disarm()
    """
    for part in filter(None, (piece.strip() for piece in text.split(","))):
        name, _, rest = part.partition("=")
        rest, _, turn = rest.partition("@")
        kind, _, seconds = rest.partition(":")
        if name not in NAMES:
            raise ValueError(f'unknown failpoint "{name}"; known: {", ".join(NAMES)}')
        if kind not in KINDS:
            raise ValueError(f'failpoint {name}: unknown kind "{kind}"; known: {", ".join(KINDS)}')
        _armed[name] = _Armed(kind=kind, seconds=float(seconds or 1), passes=int(turn or 1))


def arm_from_environment() -> None:
    """Arm what ``RECON_FAILPOINTS`` says; nothing without it."""
    arm(os.environ.get(VARIABLE, ""))


def disarm() -> None:
    """Let every point be without effect again."""
    _armed.clear()


def reach(name: str, cut: Callable[[], None] | None = None) -> None:
    """
    Pass a named point: nothing happens unless it is armed, and then once.

    Parameters
    ----------
    name : str
        One of ``NAMES``.
    cut : callable, optional
        Breaks the connection in use here; a point without one raises instead.
    """
    if not _armed or name not in _armed:
        return
    point = _armed[name]
    point.passes -= 1
    if point.passes > 0:
        return
    del _armed[name]
    if point.kind == "kill":
        os.kill(os.getpid(), signal.SIGKILL)
    if point.kind == "stall":
        time.sleep(point.seconds)
    elif point.kind == "cut" and cut is not None:
        cut()
    else:
        raise ReachedError(f"failpoint {name}")
