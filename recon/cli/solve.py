"""`recon solve FILE`: reconcile a balance file without a database."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Annotated

import typer

from recon.errors import SolveError


def solve(
    file: Annotated[Path, typer.Argument(help="A balance file, .toml or .xlsx.")],
    as_json: Annotated[bool, typer.Option("--json", help="Print one JSON object.")] = False,
    alarm_level: Annotated[
        float,
        typer.Option(min=0.0001, max=0.5, help="False-alarm rate of the alarm, e.g. 0.05 or 0.01."),
    ] = 0.05,
    engine: Annotated[
        str, typer.Option(help="direct (checked, cvxpy if refused) or cvxpy.")
    ] = "direct",
) -> None:
    """Reconcile a self-contained balance file and print estimates, tests and suspects.

    Exit status 0: solved. 2: the file is wrong, every fault is listed. 3: the data cannot satisfy
    the equalities.
    """
    from recon.app.solve_file import solve_file
    from recon.documents import balance_report
    from recon.documents.balance_sheets import read_sheets
    from recon.wiring import ENGINES, engine_named

    if engine not in ENGINES:
        raise typer.BadParameter(f"expected one of {', '.join(ENGINES)}", param_hint="--engine")
    try:
        solved = solve_file(
            file, engine=engine_named(engine), level=alarm_level, sheets=read_sheets
        )
    except SolveError as error:
        if as_json:
            typer.echo(json.dumps({"status": str(error)}))
        raise
    typer.echo(balance_report.as_json(solved) if as_json else balance_report.as_text(solved))
