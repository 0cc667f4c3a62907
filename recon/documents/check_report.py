"""A checked site for people (text) and for machines (one JSON object)."""

from __future__ import annotations

import json
from dataclasses import asdict
from datetime import datetime
from typing import TYPE_CHECKING

from recon.plant_time import Calendar

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from recon.app.check_rows import TagCheck
    from recon.app.check_site import SiteCheck

DASH = "-"
HEAD = ("tag", "kind", "use", "unit", "last value", "age", "last day", "rows", "stages seen")
RIGHT = {4, 5, 6, 7}


def as_json(check: SiteCheck) -> str:
    """Write one JSON object; times in UTC."""
    return json.dumps(
        {
            "fit": check.fit,
            "site": check.site.name,
            "at": check.at.isoformat(),
            "versions": [
                {"valid_from": v.site.valid_from.isoformat(), "digest": v.digest, "file": v.path}
                for v in check.versions
            ],
            "tags": [
                {
                    **asdict(tag),
                    "at": tag.at.isoformat() if tag.at else None,
                    "stages": dict(tag.stages),
                }
                for tag in check.tags
            ],
            "events": check.events,
            "faults": list(check.faults),
            "warnings": list(check.warnings),
            "notes": list(check.notes),
        },
        indent=2,
        allow_nan=False,
    )


def as_text(check: SiteCheck) -> str:
    """Write a page of text: the site, a line a tag, what is wrong, what to do next."""
    return "\n".join(_lines(check)) + "\n"


def _lines(check: SiteCheck) -> Iterator[str]:
    site = check.site
    title = f" ({site.title})" if site.title else ""
    yield f"{site.name}{title}: the site file reads clean."
    yield (
        f"  {len(site.nodes)} nodes, {len(site.streams)} streams, {len(site.instruments)} "
        f"instruments, {len(site.sources)} shared errors, quantities {', '.join(site.quantities)}"
    )
    for version in check.versions:
        digest = version.digest[:16]
        yield f"  valid from {version.site.valid_from}, digest {digest}, {version.path}"
    if not check.asked:
        yield ""
        yield "No plant database was named, so sources and data were not looked at. Name one with"
        yield "--plant URL, or plant_url in the settings file."
        return
    local = Calendar(zone=site.zone, day_cut=site.day_cut).local(check.at)
    yield ""
    yield f"As of {local.strftime('%Y-%m-%d %H:%M')} plant time ({site.zone}):"
    yield ""
    yield from _table([HEAD, *(_row(tag, check.at) for tag in check.tags)])
    yield f"{check.events:,} events."
    for name, lines in (
        ("Faults", check.faults),
        ("Warnings", check.warnings),
        ("Notes", check.notes),
    ):
        if lines:
            yield ""
            yield f"{name} ({len(lines)}):"
            yield from (f"  - {line}" for line in lines)
    yield ""
    if not check.fit:
        yield f"Not fit to run: {_count(len(check.faults), 'fault')} to correct first."
    elif check.warnings:
        yield (
            f"Fit to run. {_count(len(check.warnings), 'warning')}: the figures concerned will be "
            "estimated, found by balance, or left without a number."
        )
    else:
        yield "Fit to run: every instrument gives what the site file says."


def _count(number: int, word: str) -> str:
    return f"{number:,} {word}{'' if number == 1 else 's'}"


def _row(tag: TagCheck, at: datetime) -> tuple[str, ...]:
    value = DASH if tag.value is None else f"{tag.value:.6g}"
    if tag.value is not None and tag.unit_found != tag.unit:
        value += f" {tag.unit_found}"
    stages = ", ".join(f"{stage} {count:,}" for stage, count in tag.stages if stage)
    return (
        tag.tag,
        tag.kind,
        tag.use,
        tag.unit,
        value,
        DASH if tag.at is None else _age((at - tag.at).total_seconds()),
        DASH if tag.coverage is None else f"{tag.coverage:.0%}",
        f"{tag.rows:,}",
        stages or DASH,
    )


def _age(seconds: float) -> str:
    """
    Say how old something is in one unit.

    Examples
    --------
    >>> [_age(s) for s in (30, 5400, 200000)]
    ['1 min', '1.5 h', '2.3 d']
    """
    if seconds < 3600:
        return f"{max(1, round(seconds / 60))} min"
    return f"{seconds / 3600:.1f} h" if seconds < 172_800 else f"{seconds / 86_400:.1f} d"


def _table(rows: Sequence[Sequence[str]]) -> Iterator[str]:
    widths = [max(len(row[i]) for row in rows) for i in range(len(rows[0]))]
    for number, row in enumerate(rows):
        cells = (
            cell.rjust(width) if i in RIGHT else cell.ljust(width)
            for i, (cell, width) in enumerate(zip(row, widths, strict=True))
        )
        yield "  ".join(cells).rstrip()
        if number == 0:
            yield "  ".join("-" * width for width in widths)
