"""`recon check`: whether site file, sources and data are fit to run."""

from __future__ import annotations

import os
from datetime import UTC, datetime
from pathlib import Path
from typing import Annotated

import typer

from recon.errors import BAD_INPUT, PERSON_NEEDED


def check(
    site: Annotated[
        Path | None,
        typer.Argument(
            help="Site file, or a folder of its versions. Without one: the settings file's."
        ),
    ] = None,
    plant: Annotated[
        str | None,
        typer.Option("--plant", help="Plant database, sqlite:///FILE or postgresql://..."),
    ] = None,
    at: Annotated[
        datetime | None,
        typer.Option(
            "--at",
            formats=["%Y-%m-%d", "%Y-%m-%dT%H:%M", "%Y-%m-%dT%H:%M:%S"],
            help="Look at the rows before this instant, UTC; now by default.",
        ),
    ] = None,
    as_json: Annotated[bool, typer.Option("--json", help="Print one JSON object.")] = False,
    strict: Annotated[
        bool, typer.Option("--strict", help="End with status 1 where there are warnings.")
    ] = False,
) -> None:
    """Say whether site file, sources and data are fit to run, tag by tag.

    Exit status 0: fit to run. 2: faults, all of them are listed. With --strict, 1: warnings only.
    """
    from recon.app.check_site import check_site, version_at
    from recon.declare.site_file import read_versions
    from recon.documents import check_report
    from recon.settings import read_settings
    from recon.wiring import plant_of

    url = plant or os.environ.get("RECON_PLANT_URL")
    if site is None:
        settings = read_settings()
        site, url = settings.site, plant or settings.plant_url
    versions = read_versions(site)
    moment = datetime.now(UTC) if at is None else at.replace(tzinfo=UTC)
    chosen = version_at(versions, moment).site
    sheets_alone = bool(chosen.queries) and all(q.sheet for q in chosen.queries)
    folder = site if site.is_dir() else site.parent
    opened = plant_of(chosen, folder, url) if url or sheets_alone else None
    try:
        found = check_site(versions, opened, moment, opened.noted if opened else tuple)
    finally:
        if opened is not None:
            opened.close()
    typer.echo(check_report.as_json(found) if as_json else check_report.as_text(found), nl=False)
    if not found.fit:
        raise typer.Exit(BAD_INPUT)
    if strict and found.warnings:
        raise typer.Exit(PERSON_NEEDED)
