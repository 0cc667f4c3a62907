"""One PostgreSQL database for all tests of this room, and letting go of what a test opened."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.plant.tables import OPENED
from tests.postgres import Server
from tests.stores import BOTH


@pytest.fixture(autouse=True)
def _let_go() -> Iterator[None]:
    yield
    for connection in OPENED:
        connection.engine.dispose()
    OPENED.clear()


@pytest.fixture(scope="session")
def plant_server(postgres: Server) -> Iterator[str]:
    """Address of the one database; ``make`` empties it."""
    name = postgres.create()
    yield postgres.url(name)
    postgres.drop(name)


@pytest.fixture(params=BOTH)
def plant_url(request: pytest.FixtureRequest, tmp_path: Path) -> str:
    """Address of a plant database without tables, on SQLite and on the real server."""
    if request.param == "sqlite":
        return f"sqlite:///{tmp_path / 'plant.db'}"
    return str(request.getfixturevalue("plant_server"))
