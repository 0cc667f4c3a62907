"""One service at a time on an embedded database: who holds it is written beside it.

The lock is the kernel's (``flock``): it falls when its holder ends, however that happens. It does
not reach over network file systems; a book on a server needs no lock, its claims are enough.
"""

from __future__ import annotations

import fcntl
import os
import socket
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import datetime
from pathlib import Path

from recon.errors import AlreadyServedError, UnreadableFileError


def lock_path(database: Path) -> Path:
    """Give the lock's place beside a database file."""
    return database.with_name(f"{database.name}.service")


@contextmanager
def held(database: Path, *, since: datetime) -> Iterator[None]:
    """
    Hold the service of one database file for life.

    Parameters
    ----------
    database : Path
        Its folder must exist.
    since : datetime
        Written down for whoever comes second.

    Raises
    ------
    AlreadyServedError
        Another process holds it; the message says which.
    UnreadableFileError
        The lock's file cannot be opened.
    """
    path = lock_path(database)
    try:
        handle = os.open(path, os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o600)
    except OSError as error:
        raise UnreadableFileError(
            str(path), f"cannot be opened for the service's lock ({error.strerror})."
        ) from error
    try:
        try:
            fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            holder = os.pread(handle, 400, 0).decode("utf-8", "replace").strip()
            raise AlreadyServedError(str(database), holder or "another process") from None
        who = f"process {os.getpid()} on {socket.gethostname()}, since {since.isoformat()}"
        os.ftruncate(handle, 0)
        os.pwrite(handle, who.encode(), 0)
        yield
    finally:
        os.close(handle)
