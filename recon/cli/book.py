"""`recon database upgrade` and `recon verify`: the book as it is kept, and whether it still is."""

from __future__ import annotations

import sys
from datetime import UTC, datetime
from pathlib import Path

import typer

from recon.errors import EVIDENCE_BROKEN, ConfigError

database = typer.Typer(help="The accounting database.", no_args_is_help=True)

_SETTINGS = typer.Option(None, "--settings", help="Settings file; recon.toml where there is one.")
_BOOK = typer.Option("", "--book", help="Address of the accounting database, instead of settings.")


@database.callback()
def _database() -> None:
    """The accounting database."""


@database.command("upgrade")
def upgrade(settings: Path | None = _SETTINGS, book: str = _BOOK) -> None:
    """Bring the book to the schema of this program; makes it where there is none."""
    from recon.db.migrate import upgrade as apply

    applied = apply(_address(settings, book), at=datetime.now(UTC))
    for name in applied:
        print(f"applied {name}")
    print("The book is up to date." if applied else "The book was up to date already.")


def verify(
    settings: Path | None = _SETTINGS,
    book: str = _BOOK,
    head: list[str] = typer.Option(
        [], "--head", help="A head kept outside, as SITE:NUMBER:HASH; may be given several times."
    ),
) -> None:
    """Check chain, results, evidence and protection of the book; names the first thing wrong."""
    from recon.audit.chain import Head
    from recon.db.verify import verify as check

    outside: dict[str, Head] = {}
    for text in head:
        site, _, rest = text.partition(":")
        number, _, value = rest.partition(":")
        if not number.isdigit() or len(value) != 64:
            raise ConfigError(f'--head "{text}": expected SITE:NUMBER:HASH, the hash of 64 digits.')
        outside[site] = Head(seq=int(number), hash=value)
    found = check(_address(settings, book), outside=outside)
    for checked in found:
        print(
            f"site {checked.site}: {checked.entries} entries, {checked.runs} runs, "
            f"{checked.chunks} chunks of evidence checked."
        )
        print(f"  {checked.verdict}.")
        if not checked.fault:
            kept = f"{checked.site}:{checked.head.seq}:{checked.head.hash}"
            print(f"  Keep this head elsewhere: {kept}")
    if not found:
        print("The book holds no site yet.")
    if any(checked.fault for checked in found):
        sys.exit(EVIDENCE_BROKEN)


def _address(settings: Path | None, book: str) -> str:
    if book:
        return book
    from recon.settings import read_settings

    return read_settings(settings).book_url
