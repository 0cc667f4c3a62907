"""Writes a site down as the site file that declares it, so that tests go through the real door."""

from __future__ import annotations

from dataclasses import MISSING, fields, is_dataclass
from datetime import date, time
from typing import Any

from recon.declare.site import Site

LISTS = {
    "sections": "section",
    "nodes": "node",
    "streams": "stream",
    "sources": "source",
    "instruments": "instrument",
    "relations": "relation",
    "figures": "figure",
    "windows": "window",
    "shifts": "shift",
    "queries": "query",
}
KEYS = {"source": "from", "target": "to"}


def toml_of(site: Site) -> str:
    """Give the text of a site file that reads back as this site."""
    lines = ["[site]"]
    lines += [f"{k} = {_value(v)}" for k, v in _told(site) if k not in LISTS]
    for name, table in LISTS.items():
        for entry in getattr(site, name):
            ends = KEYS if table == "stream" else {}
            lines += ["", f"[[{table}]]"]
            lines += [f"{ends.get(k, k)} = {_value(v)}" for k, v in _told(entry)]
    return "\n".join(lines) + "\n"


def _told(entry: Any) -> list[tuple[str, Any]]:
    """Fields that differ from their defaults."""
    told = []
    for f in fields(entry):
        value = getattr(entry, f.name)
        default = f.default_factory() if f.default_factory is not MISSING else f.default
        if value is not None and (default is MISSING or value != default):
            told.append((f.name, value))
    return told


def _value(value: Any) -> str:
    if is_dataclass(value):
        return "{ " + ", ".join(f"{k} = {_value(v)}" for k, v in _told(value)) + " }"
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, date | time):
        return value.isoformat()
    if isinstance(value, int | float):
        return repr(value)
    if isinstance(value, dict):
        return "{ " + ", ".join(f'"{k}" = {_value(v)}' for k, v in value.items()) + " }"
    if isinstance(value, tuple | list):
        return "[" + ", ".join(_value(v) for v in value) + "]"
    text = str(value).replace("\\", "\\\\").replace('"', '\\"')
    return f'"{text}"'
