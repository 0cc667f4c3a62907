"""Databases for tests: fresh ones on SQLite and on the real PostgreSQL server."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

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
