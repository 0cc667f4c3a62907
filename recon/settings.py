"""Where things lie and how to reach them: from a settings file and the environment, only.

Every setting is a key of a TOML file, overridden by the variable ``RECON_<KEY>``, overridden by the
content of the file that ``RECON_<KEY>_FILE`` names (for secrets handed over as files). Relative
paths, those of SQLite databases included, start at the settings file's folder. Secrets are never
printed.
"""

from __future__ import annotations

import ipaddress
import os
import re
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, field, fields
from pathlib import Path
from typing import Any

from recon.errors import FaultyFileError, UnreadableFileError

DEFAULT_FILE = "recon.toml"


@dataclass(frozen=True, kw_only=True)
class Settings:
    """
    Paths, addresses and limits of one site's service.

    Attributes
    ----------
    site : Path
        Site file, or folder of its versions.
    plant_url : str
        Plant database, an SQLAlchemy URL; never printed.
    book_url : str
        Accounting database, an SQLAlchemy URL; never printed.
    health_host : str
        Loopback address of the health page and metrics.
    health_port : int
        Its port; 0 takes a free one.
    tick_seconds : int
        How often the service looks at what is due [s].
    lease_seconds : int
        A claim that is not renewed for so long may be taken over [s].
    stop_seconds : int
        At most so long a running computation is waited for on a stop [s].
    pull_seconds : int
        The sources are read at most so often [s].
    cap : int
        At most so many runs a tick.
    look_back_days : int
        Months that ended at most so long ago are re-read and compared with the evidence [d].
    """

    site: Path
    plant_url: str = field(repr=False)
    book_url: str = field(repr=False)
    health_host: str = "127.0.0.1"
    health_port: int = 9464
    tick_seconds: int = 30
    lease_seconds: int = 60
    stop_seconds: int = 30
    pull_seconds: int = 300
    cap: int = 10
    look_back_days: int = 35


LOWEST = {
    "health_port": 0,
    "tick_seconds": 1,
    "lease_seconds": 2,
    "stop_seconds": 0,
    "pull_seconds": 0,
    "cap": 1,
    "look_back_days": 0,
}
NEEDED = ("site", "plant_url", "book_url")


def read_settings(
    file: Path | None = None, environment: Mapping[str, str] | None = None
) -> Settings:
    """
    Read settings from a file and the environment.

    Parameters
    ----------
    file : Path, optional
        Settings file; without one ``RECON_SETTINGS``, else ``recon.toml`` where it exists.
    environment : mapping, optional
        The process's own by default.

    Raises
    ------
    UnreadableFileError
        The file named cannot be read or is not TOML.
    FaultyFileError
        Settings are missing, unknown or out of range; all are listed.
    """
    environ = os.environ if environment is None else environment
    path = file or (Path(environ["RECON_SETTINGS"]) if environ.get("RECON_SETTINGS") else None)
    if path is None and Path(DEFAULT_FILE).exists():
        path = Path(DEFAULT_FILE)
    given = _from_file(path) if path is not None else {}
    faults = [
        f'unknown setting "{key}". Known: {", ".join(_names())}.'
        for key in given
        if key not in _names()
    ]
    given = {key: value for key, value in given.items() if key in _names()}
    for key in _names():
        try:
            given |= _from_environment(key, environ)
        except OSError as error:
            faults.append(f"RECON_{key.upper()}_FILE: cannot be read ({error.strerror}).")
    folder = path.resolve().parent if path is not None else Path.cwd()
    values = {key: _checked(key, value, folder, faults) for key, value in given.items()}
    faults += [
        f"{key} is missing. Set it in the settings file or as RECON_{key.upper()}."
        for key in NEEDED
        if key not in given
    ]
    if faults:
        raise FaultyFileError(str(path) if path is not None else "environment", faults)
    return Settings(**values)


def _names() -> tuple[str, ...]:
    return tuple(f.name for f in fields(Settings))


def _from_file(path: Path) -> dict[str, Any]:
    try:
        with path.open("rb") as stream:
            return tomllib.load(stream)
    except OSError as error:
        raise UnreadableFileError(str(path), f"cannot be read ({error.strerror}).") from error
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise UnreadableFileError(str(path), f"is not TOML: {error}.") from error


def _from_environment(key: str, environ: Mapping[str, str]) -> dict[str, Any]:
    name = f"RECON_{key.upper()}"
    if environ.get(f"{name}_FILE"):
        return {key: Path(environ[f"{name}_FILE"]).read_text(encoding="utf-8").strip()}
    return {key: environ[name]} if environ.get(name) else {}


def _checked(key: str, value: Any, folder: Path, faults: list[str]) -> Any:
    """One setting in its type; what is wrong with it goes to ``faults``, without any secret."""
    if key in LOWEST:
        return _whole_number(key, value, faults)
    if not isinstance(value, str) or not value:
        faults.append(f"{key}: expected text, found {type(value).__name__}.")
        return None
    if key == "site":
        return folder / value
    if key == "health_host":
        return _loopback(value, faults)
    return _database(key, value, folder, faults)


def _whole_number(key: str, value: Any, faults: list[str]) -> int:
    try:
        number = (
            int(value) if isinstance(value, str | int) and not isinstance(value, bool) else None
        )
    except ValueError:
        number = None
    if number is None or number < LOWEST[key]:
        faults.append(f"{key}: expected a whole number from {LOWEST[key]} on, found {value!r}.")
        return LOWEST[key]
    return number


def _loopback(value: str, faults: list[str]) -> str:
    try:
        inside = value == "localhost" or ipaddress.ip_address(value).is_loopback
    except ValueError:
        inside = False
    if not inside:
        faults.append(
            f"health_host: expected a loopback address, found {value}. Put a proxy in front to "
            "show the health page elsewhere."
        )
    return value


def _database(key: str, value: str, folder: Path, faults: list[str]) -> str:
    found = re.fullmatch(r"([a-z0-9]+(?:\+[a-z0-9]+)?)://(.*)", value)
    if found is None:
        faults.append(
            f"{key}: expected a database URL such as sqlite:///plant.db or postgresql+psycopg://"
            "user@host/name; what was found is not shown, it may hold a secret."
        )
        return value
    if found[1].startswith("sqlite") and found[2].startswith("/") and found[2] != "/:memory:":
        return f"{found[1]}:///{folder / found[2][1:]}"
    return value
