"""`recon demo`: an invented site's plant database, its book, its months, and what they say."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

if TYPE_CHECKING:
    from collections.abc import Iterator
    from datetime import date

    from recon.declare.site import Site

TO_DATE = (10, 20)
"""Days of a month that are stated as they fell due, besides its last; the service states each."""


def demo(
    folder: Annotated[
        Path | None, typer.Argument(help="An empty folder; default demo, demo-2, ...")
    ] = None,
    months: Annotated[int, typer.Option(min=1, max=24, help="Whole plant months.")] = 2,
    interval: Annotated[int, typer.Option(help="Minutes between readings.")] = 5,
    seed: Annotated[int, typer.Option(help="Of everything random.")] = 1,
    faults: Annotated[str, typer.Option(help="on, off, or names with commas between.")] = "on",
    plant_url: Annotated[
        str | None, typer.Option(help="Write the plant there instead, e.g. postgresql+psycopg://")
    ] = None,
    book_url: Annotated[str | None, typer.Option(help="Keep the book there instead.")] = None,
) -> None:
    """Build an invented site, run its days and months as they fell due, and say what they show.

    Exit status 0: done. 2: an option, folder or database cannot be used. 3: a period cannot be
    solved.
    """
    from recon.app.run_report import report_lines
    from recon.cli.progress import Terminal
    from recon.daemon.log import log_to
    from recon.demo.folder import free_folder, lay_out
    from recon.errors import CANNOT_SOLVE
    from recon.settings import read_settings
    from recon.wiring import open_book, workplace

    log_to(as_json=False, level="critical")
    place = free_folder(folder)
    terminal = Terminal()
    terminal.step(f"simulating {months} months")
    made = lay_out(
        place,
        months=months,
        interval=interval,
        seed=seed,
        faults=faults,
        plant_url=plant_url,
        book_url=book_url,
    )
    terminal.done()
    typer.echo(f"{made}, in {place}.")
    settings = read_settings(place / "recon.toml")
    with open_book(settings.book_url, upgraded=True):
        pass
    clock = [datetime(1970, 1, 1, tzinfo=UTC)]
    with workplace(settings, watcher=terminal, actor="recon demo", clock=lambda: clock[0]) as work:
        for month, through, due in _replayed(work.rounds.sites()[-1], months):
            clock[0] = due
            ran = work.rounds.only(month, through)
            terminal.done()
            if ran and through.month != (through + timedelta(days=1)).month:
                typer.echo("")
                for line in report_lines(work.site, ran):
                    typer.echo(line)
    typer.echo(_next(place))
    if terminal.failed:
        for line in terminal.failed:
            typer.echo(line, err=True)
        raise typer.Exit(CANNOT_SOLVE)


def _replayed(site: Site, months: int) -> Iterator[tuple[date, date, datetime]]:
    """Months to date, each with the instant at which it was due."""
    from recon.app.run_period import calendar_of
    from recon.plant_time import month_days

    calendar, month = calendar_of(site), site.valid_from.replace(day=1)
    for _ in range(months):
        days = month_days(month)
        for day in (*(days[n - 1] for n in TO_DATE), days[-1]):
            yield month, day, calendar.end(day) + timedelta(hours=site.settling_hours)
        month = days[-1] + timedelta(days=1)


def _next(place: Path) -> str:
    return (
        f"\nNext: recon run --settings {place / 'recon.toml'} takes in what came late and states "
        "every day;\n"
        f"      recon serve --settings {place / 'recon.toml'} does so on a schedule;\n"
        f"      recon verify --settings {place / 'recon.toml'} proves that nothing was altered.\n"
        f"The truth lies in {place / 'truth.db'}, which the service never opens."
    )
