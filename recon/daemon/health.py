"""The health page and the metrics, on a loopback port of their own."""

from __future__ import annotations

import json
import threading
from collections.abc import Callable
from dataclasses import asdict
from datetime import datetime
from http import HTTPStatus
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from typing import TYPE_CHECKING, Any

from prometheus_client import CONTENT_TYPE_LATEST, generate_latest

from recon.daemon.schedule import MOST_MISSED
from recon.errors import AddressTakenError

if TYPE_CHECKING:
    from recon.daemon.status import Status


class HealthServer:
    """
    Answers ``/health`` (JSON; 503 where somebody must look) and ``/metrics``.

    Parameters
    ----------
    host, port
        Loopback address; port 0 takes a free one, see ``port``.
    status : Status
    missed : callable
        Gives the number of overdue ticks.
    last_tick_at : callable

    Raises
    ------
    AddressTakenError
        The port cannot be had.
    """

    def __init__(
        self,
        *,
        host: str,
        port: int,
        status: Status,
        missed: Callable[[], int],
        last_tick_at: Callable[[], datetime | None],
    ) -> None:
        self._status = status
        self._missed = missed
        self._last_tick_at = last_tick_at
        try:
            self._server = ThreadingHTTPServer((host, port), self._handler())
        except OSError as error:
            raise AddressTakenError(host, port, error.strerror or str(error)) from error
        self._server.daemon_threads = True
        self.port = self._server.server_address[1]
        self._thread = threading.Thread(
            target=self._server.serve_forever, name="health", daemon=True
        )

    def start(self) -> None:
        """Begin to answer."""
        self._thread.start()

    def stop(self) -> None:
        """Answer no more."""
        if self._thread.is_alive():
            self._server.shutdown()
        self._server.server_close()

    def health(self) -> tuple[HTTPStatus, dict[str, Any]]:
        """Give the health page's content and whether it is well."""
        missed, seen = self._missed(), self._status.snapshot()
        well = missed < MOST_MISSED and not seen.trouble
        page = asdict(seen) | {
            "healthy": well,
            "last_tick_at": self._last_tick_at(),
            "missed_ticks": missed,
            "trouble": dict(seen.trouble),
        }
        return (HTTPStatus.OK if well else HTTPStatus.SERVICE_UNAVAILABLE), page

    def _handler(self) -> type[BaseHTTPRequestHandler]:
        server = self

        class Handler(BaseHTTPRequestHandler):
            def do_GET(self) -> None:
                if self.path == "/metrics":
                    body = generate_latest(server._status.registry)
                    self._answer(HTTPStatus.OK, CONTENT_TYPE_LATEST, body)
                elif self.path in ("/", "/health"):
                    code, page = server.health()
                    text = json.dumps(page, indent=1, default=_text)
                    self._answer(code, "application/json", text.encode())
                else:
                    self._answer(HTTPStatus.NOT_FOUND, "text/plain", b"/health, /metrics\n")

            def _answer(self, code: HTTPStatus, kind: str, body: bytes) -> None:
                self.send_response(code)
                self.send_header("Content-Type", kind)
                self.send_header("Content-Length", str(len(body)))
                self.send_header("Cache-Control", "no-store")
                self.end_headers()
                self.wfile.write(body)

            def log_message(self, format: str, *args: object) -> None:  # noqa: A002
                """Requests to the health page are not worth a line."""

        return Handler


def _text(value: object) -> str:
    return value.isoformat(timespec="seconds") if isinstance(value, datetime) else str(value)
