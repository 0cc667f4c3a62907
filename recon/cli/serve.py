"""`recon serve`: the scheduled service of one site."""

from __future__ import annotations

import os
from pathlib import Path
from typing import Annotated

import typer


def serve(
    settings: Annotated[
        Path | None,
        typer.Option(help="Settings file (default recon.toml); RECON_<KEY> overrides its keys."),
    ] = None,
) -> None:
    """Compute every month to date when it is due, until SIGTERM; one JSON line a step on stderr.

    Exit status 0: stopped. 2: settings, site file or book cannot be used. 4: the book was altered.
    70: the process no longer kept time, start it again. 75: another process serves this book.
    """
    import sys

    from recon.daemon.log import log_to
    from recon.daemon.serve import serve as serve_site
    from recon.settings import read_settings

    read = read_settings(settings)
    log_to()
    status = serve_site(read)
    sys.stdout.flush()
    sys.stderr.flush()
    os._exit(status)  # a computation nobody waits for any more may still run in its thread
