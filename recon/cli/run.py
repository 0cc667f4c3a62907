"""`recon run`: bring in what is new and run what is due now, or one month by name."""

from __future__ import annotations

import re
from datetime import date
from pathlib import Path
from typing import Annotated

import typer


def run(
    settings: Annotated[
        Path | None,
        typer.Option(help="Settings file (default recon.toml); RECON_<KEY> overrides its keys."),
    ] = None,
    month: Annotated[str | None, typer.Option(help="Only this month, such as 2026-03.")] = None,
    through: Annotated[
        str | None, typer.Option(help="With --month: through this plant day, such as 2026-03-17.")
    ] = None,
    strict: Annotated[
        bool, typer.Option("--strict", help="End with status 1 when a person is needed.")
    ] = False,
) -> None:
    """Read the plant's sources, compute every month to date that is due, publish each once.

    Exit status 0: done. 1: with --strict, something serious was found. 2: settings, site file, a
    source or the book cannot be used. 3: a period cannot be solved. 4: the book was altered.
    """
    from recon.app.run_report import needs_person, report_lines
    from recon.cli.progress import Terminal
    from recon.daemon.log import log_to
    from recon.errors import CANNOT_SOLVE, PERSON_NEEDED
    from recon.settings import read_settings
    from recon.wiring import workplace

    first = None if month is None else _month(month)
    last = None if through is None else _day(through)
    if last is not None and (first is None or last.replace(day=1) != first):
        raise typer.BadParameter("expected a day of --month", param_hint="--through")
    log_to(as_json=False, level="critical")
    terminal = Terminal()
    with workplace(read_settings(settings), watcher=terminal, actor="recon run") as place:
        if first is None:
            ran = place.rounds.until_nothing_is_due()
        else:
            ran = place.rounds.only(first, last)
        terminal.done()
        for line in report_lines(place.site, ran):
            typer.echo(line)
        asked = strict and needs_person(place.book, place.site, ran)
    if terminal.failed:
        raise typer.Exit(CANNOT_SOLVE)
    if asked:
        raise typer.Exit(PERSON_NEEDED)


def _month(text: str) -> date:
    if not re.fullmatch(r"\d{4}-\d{2}", text):
        raise typer.BadParameter("expected year and month, such as 2026-03", param_hint="--month")
    return _day(f"{text}-01", "--month")


def _day(text: str, option: str = "--through") -> date:
    try:
        return date.fromisoformat(text)
    except ValueError:
        raise typer.BadParameter("expected a day, such as 2026-03-17", param_hint=option) from None
