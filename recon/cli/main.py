"""The `recon` command: which verbs there are, and how an error ends one."""

from __future__ import annotations

import sys

import typer

from recon import __version__
from recon.cli.book import database, verify
from recon.cli.check import check
from recon.cli.demo import demo
from recon.cli.run import run
from recon.cli.serve import serve
from recon.cli.solve import solve
from recon.errors import ReconError

app = typer.Typer(
    name="recon",
    help="Metal accounting for copper sites: measurements in, conserved figures out.",
    no_args_is_help=True,
    pretty_exceptions_enable=False,
    add_completion=False,
)
app.command("check")(check)
app.command("demo")(demo)
app.command("run")(run)
app.command("serve")(serve)
app.command("solve")(solve)
app.command("verify")(verify)
app.add_typer(database, name="database")


def _version(asked: bool) -> None:
    if asked:
        typer.echo(f"recon {__version__}")
        raise typer.Exit


@app.callback()
def _root(
    version: bool = typer.Option(
        False, "--version", callback=_version, is_eager=True, help="Print the version and end."
    ),
) -> None:
    """Metal accounting for copper sites: measurements in, conserved figures out."""


def main() -> None:
    """Run a command; an error made on purpose ends it with its message and exit status."""
    try:
        app()
    except ReconError as error:
        print(f"recon: {error}", file=sys.stderr)
        sys.exit(error.status)
