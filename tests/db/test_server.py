"""The server that tests use is real, on a socket only, and leaves nothing behind."""

from __future__ import annotations

from pathlib import Path

import psycopg
import pytest

from tests.postgres import Server

pytestmark = pytest.mark.database


def test_the_server_answers_on_its_socket_and_listens_nowhere_else(postgres: Server) -> None:
    assert int(postgres.version().split(".")[0]) >= 15
    with postgres.connect() as connection:
        row = connection.execute("SHOW listen_addresses").fetchone()
    assert row == ("",)


def test_a_database_made_from_a_template_holds_what_the_template_held(postgres: Server) -> None:
    template = postgres.create()
    with postgres.connect(template) as connection:
        connection.execute("CREATE TABLE tried (n int)")
    copy = postgres.create(template)
    with postgres.connect(copy) as connection:
        assert connection.execute("SELECT count(*) FROM tried").fetchone() == (0,)
    for name in (copy, template):
        postgres.drop(name)


@pytest.mark.slow
def test_a_server_that_was_killed_comes_back_and_one_that_is_stopped_is_gone() -> None:
    server = Server(durable=True)
    try:
        server.start()
        with server.connect() as connection:
            connection.execute("CREATE TABLE kept (n int)")
            connection.execute("INSERT INTO kept VALUES (7)")
        server.crash()
        with pytest.raises(psycopg.OperationalError):
            server.connect()
        server.restart()
        with server.connect() as connection:
            assert connection.execute("SELECT n FROM kept").fetchone() == (7,)
    finally:
        server.stop()
    assert server.folder != Path()
    assert not server.folder.exists()
