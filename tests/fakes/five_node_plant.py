"""A real plant database of the five-node site: hourly readings and documents of a known truth."""

from __future__ import annotations

from dataclasses import replace
from datetime import date, timedelta
from pathlib import Path
from types import SimpleNamespace
from typing import Any

import numpy as np

from recon.declare.site import Site, SourceQuery
from recon.demo.write_plant import write_plant
from recon.ingest.rows import Series
from tests.fakes.five_node_rows import (
    FGAS_SO2,
    TAILGAS_SO2,
    Month,
    calendar_of,
    five_node_month,
)
from tests.fakes.five_nodes import RUN, five_node_site
from tests.fakes.site_toml import toml_of

BLANK = {"method": "", "laboratory": "", "carrier": "", "surveyor": ""}
HOUR = 3_600_000_000
TIMES = {"FGAS-FI": FGAS_SO2, "TAILGAS-FI": TAILGAS_SO2}
"""Fraction by which another tag multiplies a gas flow."""


def site_with_queries(valid_from: date) -> Site:
    """Give the site as a plant database serves it."""
    return replace(
        five_node_site(valid_from=valid_from),
        queries=(
            SourceQuery(kind="readings", query="readings.sql"),
            SourceQuery(kind="assays", query="assays.sql"),
            SourceQuery(kind="tickets", query="tickets.sql"),
            SourceQuery(kind="surveys", query="surveys.sql"),
            SourceQuery(kind="events", query="events.sql"),
        ),
    )


def write_five_nodes(
    folder: Path, *, month: date, through: date, plant_url: str | None = None, seed: int = 1
) -> Month:
    """
    Write site.toml, the plant database and recon.toml into a folder.

    The book's address is left to be set; ``plant.db`` and ``book.db`` lie in the folder by default.
    """
    made = five_node_month(month=month, through=through, noisy=True, history=0, seed=seed)
    site = site_with_queries(month)
    (folder / "site.toml").write_text(toml_of(site), encoding="utf-8")
    (folder / "recon.toml").write_text(
        'site = "site.toml"\n'
        f'plant_url = "{plant_url or "sqlite:///plant.db"}"\n'
        'book_url = "sqlite:///book.db"\n'
        "health_port = 0\ntick_seconds = 1\nlease_seconds = 2\npull_seconds = 0\n",
        encoding="utf-8",
    )
    papers = tuple(replace(r, extra=tuple((BLANK | dict(r.extra)).items())) for r in made.records)
    plant: Any = SimpleNamespace(series=series_of(made), records=papers)
    write_plant(plant, plant_url or f"sqlite:///{folder / 'plant.db'}")
    return made


def series_of(month: Month) -> tuple[Series, ...]:
    """Give hourly readings that integrate to the month's tag days."""
    calendar = calendar_of(month.site)
    ran = {d.day: d.amount or 0.0 for d in month.tag_days if d.tag == RUN}
    rows: dict[str, list[tuple[int, float]]] = {}
    total = 0.0
    for day in sorted(ran):
        start = int(calendar.start(day).timestamp()) * 1_000_000
        length = round(calendar.hours(day))
        for tag_day in (d for d in month.tag_days if d.day == day):
            tag = tag_day.tag
            readings = rows.setdefault(tag, [])
            if tag == RUN:
                readings.append((start, 1.0))
                if ran[day] < length:
                    readings.append((start + round(ran[day] * HOUR), 0.0))
            elif tag == "ACID-FQ":
                if not readings:
                    readings.append((start - HOUR, 0.0))
                total += tag_day.amount or 0.0
                readings.append((start + (length - 1) * HOUR, total % 100_000.0))
            else:
                value = (tag_day.mean or 0.0) / TIMES.get(tag, 1.0)
                readings += [(start + h * HOUR, value) for h in range(length)]
    return tuple(_series(tag, readings) for tag, readings in sorted(rows.items()))


def _series(tag: str, rows: list[tuple[int, float]]) -> Series:
    at = np.array([t for t, _ in rows], dtype=np.int64)
    return Series(
        tag=tag,
        at=at,
        value=np.array([v for _, v in rows]),
        quality=np.zeros(len(at), dtype=np.int8),
        known_at=at + int(timedelta(minutes=1).total_seconds()) * 1_000_000,
    )
