"""Databases for tests: fresh ones on SQLite and on the real PostgreSQL server."""

from __future__ import annotations

import shutil
from collections.abc import Iterator
from datetime import UTC, datetime
from pathlib import Path

import pytest

from recon.app.ports import Book
from recon.db.book import SqlBook
from recon.db.migrate import upgrade
from tests.postgres import Server

BOTH = [
    pytest.param("sqlite", id="sqlite"),
    pytest.param("postgresql", id="postgresql", marks=pytest.mark.database),
]


@pytest.fixture(scope="session")
def postgres() -> Iterator[Server]:
    """One running server for this process."""
    server = Server()
    try:
        yield server.start()
    finally:
        server.stop()


@pytest.fixture
def postgres_url(postgres: Server) -> Iterator[str]:
    """Address of an empty database of its own on the real server."""
    name = postgres.create()
    yield postgres.url(name)
    postgres.drop(name)


@pytest.fixture(params=BOTH)
def database_url(request: pytest.FixtureRequest, tmp_path: Path) -> str:
    """Address of an empty database of its own, once on SQLite and once on the real server."""
    if request.param == "sqlite":
        return f"sqlite:///{tmp_path / 'book.db'}"
    return str(request.getfixturevalue("postgres_url"))


@pytest.fixture(scope="session")
def migrated_file(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A migrated SQLite book to be copied."""
    path = tmp_path_factory.mktemp("book") / "template.db"
    upgrade(f"sqlite:///{path}", at=datetime(2026, 1, 1, tzinfo=UTC))
    return path


@pytest.fixture(scope="session")
def migrated_template(postgres: Server) -> str:
    """Name of a migrated database on the real server, to be used as a template."""
    name = postgres.create()
    upgrade(postgres.url(name), at=datetime(2026, 1, 1, tzinfo=UTC))
    return name


@pytest.fixture(params=BOTH)
def book_url(request: pytest.FixtureRequest, tmp_path: Path) -> Iterator[str]:
    """Address of an empty, migrated book of its own, once on either database."""
    if request.param == "sqlite":
        shutil.copy(request.getfixturevalue("migrated_file"), tmp_path / "book.db")
        yield f"sqlite:///{tmp_path / 'book.db'}"
        return
    server: Server = request.getfixturevalue("postgres")
    name = server.create(request.getfixturevalue("migrated_template"))
    yield server.url(name)
    server.drop(name)


@pytest.fixture
def sql_book(book_url: str) -> Iterator[SqlBook]:
    """An empty book, once on either database, with what lies behind the port."""
    made = SqlBook(book_url)
    yield made
    made.close()


@pytest.fixture
def book(sql_book: SqlBook) -> Book:
    """An empty book, once on either database."""
    return sql_book
