"""Joins rooms: which engine, which readers, which stores a command uses."""

from __future__ import annotations

import os
import socket
import uuid
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import TYPE_CHECKING

from recon.solve.choose import FirstAccepted
from recon.solve.convex import Convex
from recon.solve.standard import standard_engine

if TYPE_CHECKING:
    from recon.app.ports import Book, Plant
    from recon.app.rounds import Rounds, Watcher
    from recon.declare.site import Site
    from recon.plant.joined import JoinedPlant
    from recon.reconcile.solver import Engine
    from recon.settings import Settings

ENGINES = ("direct", "cvxpy")


def engine_named(name: str) -> Engine:
    """Give the engine a person asked for; both are checked before they are believed."""
    if name == "cvxpy":
        return FirstAccepted([Convex()])
    return standard_engine()


def plant_of(site: Site, folder: Path, url: str | None) -> JoinedPlant:
    """
    Join the plant's sources that a site declares; nothing is asked yet.

    Parameters
    ----------
    site : Site
    folder : Path
        Of the site file. SQL is looked for in its folder ``sql``, in itself, then among the
        project's examples; sheets lie in it.
    url : str or None
        Address of the plant's database.

    Raises
    ------
    ConfigError
        The address or an SQL file is wrong.
    """
    from recon.db.migrate import sql_folder
    from recon.plant.joined import open_plant

    examples = sql_folder()
    places = (folder / "sql", folder, examples, examples / "queries")
    return open_plant(site, url=url, folder=folder, queries=places)


@dataclass(frozen=True, kw_only=True)
class Workplace:
    """A site's book and the rounds over it."""

    site: str
    book: Book
    rounds: Rounds


@contextmanager
def workplace(
    settings: Settings,
    *,
    watcher: Watcher,
    actor: str,
    clock: Callable[[], datetime] = lambda: datetime.now(UTC),
) -> Iterator[Workplace]:
    """
    Open the book, add the site file's versions to it, and lay out the rounds.

    Parameters
    ----------
    settings : Settings
    watcher : Watcher
        Told how rounds go.
    actor : str
        Named in audit entries.
    clock : callable
        Gives the present; a replayed history moves it.

    Raises
    ------
    ReconError
        The site file is wrong, or book or sources cannot be used.
    """
    from recon import failpoints
    from recon.app.book_types import StoredVersion
    from recon.app.rounds import Pace, Rounds
    from recon.app.run_period import Runner
    from recon.declare.site_file import read_versions

    failpoints.arm_from_environment()
    versions = read_versions(settings.site)
    site = versions[-1].site.name
    with open_book(settings.book_url) as book:
        known = {version.digest for version in book.site_versions(site)}
        for version in versions:
            if version.digest not in known:
                book.add_site_version(
                    StoredVersion(
                        site=site,
                        digest=version.digest,
                        valid_from=version.site.valid_from,
                        known_at=clock(),
                        added_by=actor,
                        content=version.text,
                    )
                )
        with plants(settings) as plant:
            rounds = Rounds(
                runner=Runner(
                    book=book,
                    site=site,
                    owner=f"{socket.gethostname()}:{os.getpid()}:{uuid.uuid4().hex[:8]}",
                    actor=actor,
                    clock=clock,
                    lease_seconds=settings.lease_seconds,
                ),
                plant=plant,
                watcher=watcher,
                pace=Pace(
                    pull_every=timedelta(seconds=settings.pull_seconds),
                    look_back=timedelta(days=settings.look_back_days),
                    cap=settings.cap,
                ),
            )
            yield Workplace(site=site, book=book, rounds=rounds)


@contextmanager
def open_book(url: str, *, upgraded: bool = False) -> Iterator[Book]:
    """
    Open a book; an embedded one that is not there yet is made.

    Parameters
    ----------
    url : str
    upgraded : bool
        Bring its schema up to date first; a book on a server is otherwise upgraded by its owner.
    """
    from recon.db.book import SqlBook
    from recon.db.migrate import upgrade

    file = sqlite_file(url)
    if upgraded or (file is not None and not file.exists()):
        upgrade(url, at=datetime.now(UTC))
    book = SqlBook(url)
    try:
        yield book
    finally:
        book.close()


@contextmanager
def plants(settings: Settings) -> Iterator[Callable[[Site], Plant]]:
    """Give the plant's sources for a site version; each version's are opened once."""
    folder = settings.site if settings.site.is_dir() else settings.site.parent
    opened: list[tuple[Site, JoinedPlant]] = []

    def plant(site: Site) -> Plant:
        found = next((p for s, p in opened if s is site), None)
        if found is None:
            found = plant_of(site, folder, settings.plant_url)
            opened.append((site, found))
        return found

    try:
        yield plant
    finally:
        for _, each in opened:
            each.close()


def sqlite_file(url: str) -> Path | None:
    """Give the file of an embedded database; None for one on a server."""
    from sqlalchemy import make_url

    address = make_url(url)
    if address.get_backend_name() != "sqlite" or not address.database:
        return None
    return Path(address.database)


def book_file(settings: Settings) -> Path | None:
    """Give the file of an embedded book; None for one on a server."""
    return sqlite_file(settings.book_url)
