"""What a person at a terminal is told after runs: outcomes, the newest summary, what is serious."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import TYPE_CHECKING

from recon.findings import Severity

if TYPE_CHECKING:
    from recon.app.ports import Book
    from recon.app.run_period import Ran


def report_lines(site: str, ran: Sequence[Ran]) -> Iterator[str]:
    """Say what became of each period, then the newest run in sentences."""
    if not ran:
        yield "Nothing was due."
    for one in ran:
        period = f"{one.month:%Y-%m} through {one.through.isoformat()}"
        if one.head is None:
            yield f"{period}: {one.outcome}"
        else:
            yield f"{period}: {one.outcome}, run {one.head.run}, revision {one.head.revision}"
    heads = [one.head for one in ran if one.head is not None]
    if heads:
        newest = max(heads, key=lambda head: (head.month, head.through))
        yield ""
        yield f"Site {site}, run {newest.run}:"
        for _, sentence in newest.summary:
            yield f"  {sentence}"


def needs_person(book: Book, site: str, ran: Sequence[Ran]) -> bool:
    """Whether any of the runs found something serious."""
    return any(
        finding.severity is Severity.SERIOUS
        for one in ran
        if one.head is not None
        for finding in book.result(site, one.head.run).findings
    )
