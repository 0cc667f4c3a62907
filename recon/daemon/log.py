"""Log lines for operators: one JSON object a line, or one readable line on a terminal.

Run and period are bound once (``structlog.contextvars``) and stand in every line of that work.
The log is for operators, the audit chain is for evidence; neither replaces the other.
"""

from __future__ import annotations

import logging
import sys
from typing import TextIO

import structlog


def log_to(stream: TextIO | None = None, *, as_json: bool = True, level: str = "info") -> None:
    """
    Send the log to a stream.

    Parameters
    ----------
    stream : file, optional
        Standard error by default.
    as_json : bool
        False for people in front of a terminal.
    level : str
        Lowest level that is shown.
    """
    ending = (
        [structlog.processors.format_exc_info, structlog.processors.JSONRenderer(sort_keys=True)]
        if as_json
        else [structlog.dev.ConsoleRenderer(colors=False)]
    )
    structlog.configure(
        processors=[
            structlog.contextvars.merge_contextvars,
            structlog.processors.add_log_level,
            structlog.processors.TimeStamper(fmt="iso", utc=True, key="at"),
            *ending,
        ],
        wrapper_class=structlog.make_filtering_bound_logger(level),
        logger_factory=structlog.PrintLoggerFactory(stream or sys.stderr),
        cache_logger_on_first_use=False,
    )
    logging.basicConfig(level=logging.WARNING, stream=stream or sys.stderr, force=True)
