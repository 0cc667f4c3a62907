"""The shape of a site file, made from the types of ``recon.declare.site``.

Those dataclasses are the only list of keys and types there is. Each becomes a strict table that
refuses unknown keys; their docstrings become the descriptions that editors show.
"""

from __future__ import annotations

import re
from dataclasses import MISSING, fields, is_dataclass
from functools import cache
from types import UnionType
from typing import Annotated, Any, Union, get_args, get_origin, get_type_hints

from pydantic import BaseModel, ConfigDict, Field, FiniteFloat, create_model

from recon.declare.site import (
    ErrorSource,
    Instrument,
    PlausibilityWindow,
    Section,
    Shift,
    Site,
    SiteFigure,
    SiteNode,
    SiteRelation,
    SiteStream,
    SourceQuery,
)

LISTS: dict[str, tuple[str, type]] = {
    "section": ("sections", Section),
    "node": ("nodes", SiteNode),
    "stream": ("streams", SiteStream),
    "source": ("sources", ErrorSource),
    "instrument": ("instruments", Instrument),
    "relation": ("relations", SiteRelation),
    "figure": ("figures", SiteFigure),
    "window": ("windows", PlausibilityWindow),
    "shift": ("shifts", Shift),
    "query": ("queries", SourceQuery),
}
"""Lists of tables in a file, with the field of ``Site`` each fills and its type."""

HEAD = "site"
"""The table of the scalars of ``Site``."""

RENAMED: dict[tuple[type, str], str] = {
    (SiteStream, "source"): "from",
    (SiteStream, "target"): "to",
}
NAMES = {"name", "tag"}


class SiteTable(BaseModel):
    """A table whose keys are all known and whose types are taken as written."""

    model_config = ConfigDict(strict=True, extra="forbid", frozen=True)


@cache
def shape_of(kind: type) -> type[SiteTable]:
    """
    Make the strict table that a dataclass is read from.

    Parameters
    ----------
    kind : type
        A dataclass of ``recon.declare.site``. ``Site`` gives the head alone, without the lists.
    """
    hints = get_type_hints(kind)
    told = _descriptions(kind)
    lists = {field for field, _ in LISTS.values()} if kind is Site else set()
    columns: dict[str, Any] = {}
    for field in fields(kind):
        if field.name in lists:
            continue
        annotation = _strict(hints[field.name])
        rules: dict[str, Any] = {"description": told.get(field.name)}
        if (kind, field.name) in RENAMED:
            rules["alias"] = RENAMED[kind, field.name]
        if field.name in NAMES:
            rules["min_length"] = 1
        if field.default_factory is not MISSING:
            rules["default_factory"] = field.default_factory
        elif is_dataclass(field.default):
            rules["default_factory"] = lambda value=field.default: value
        elif field.default is not MISSING:
            rules["default"] = field.default
        columns[field.name] = (annotation, Field(**rules))
    name = "SiteHead" if kind is Site else kind.__name__
    doc = (kind.__doc__ or "").strip().splitlines()[0]
    return create_model(name, __base__=SiteTable, __doc__=doc, **columns)


@cache
def file_shape() -> type[SiteTable]:
    """Make the shape of a whole file, for editors."""
    columns: dict[str, Any] = {HEAD: (shape_of(Site), Field())}
    for name, (_, kind) in LISTS.items():
        columns[name] = (list[shape_of(kind)], Field(default=[]))  # type: ignore[misc]
    return create_model("SiteFile", __base__=SiteTable, __doc__="One version of a site.", **columns)


def declared(kind: type, table: SiteTable) -> Any:
    """
    Turn a validated table into its dataclass; keys not written take the dataclass's defaults.

    Parameters
    ----------
    kind : type
    table : SiteTable
        Of ``shape_of(kind)``.
    """
    return kind(**_written(kind, table))


def _written(kind: type, table: SiteTable) -> dict[str, Any]:
    hints = get_type_hints(kind)
    return {name: _value(hints[name], getattr(table, name)) for name in table.model_fields_set}


def _value(hint: Any, value: Any) -> Any:
    if isinstance(value, SiteTable):
        return declared(_dataclass_in(hint), value)
    if isinstance(value, tuple):
        return tuple(_value(hint, item) for item in value)
    return value


def _dataclass_in(hint: Any) -> type:
    if is_dataclass(hint) and isinstance(hint, type):
        return hint
    return next(_dataclass_in(a) for a in get_args(hint) if a not in (type(None), ...))


def _strict(hint: Any) -> Any:
    """Give the annotation that validates a field: finite floats, lists for tuples."""
    if is_dataclass(hint) and isinstance(hint, type):
        return shape_of(hint)
    if hint is float:
        return FiniteFloat
    origin, inner = get_origin(hint), get_args(hint)
    if origin is tuple:
        taken: Any = tuple[tuple(a if a is ... else _strict(a) for a in inner)]  # type: ignore[misc]
        return Annotated[taken, Field(strict=False)]
    if origin is dict:
        return dict[_strict(inner[0]), _strict(inner[1])]  # type: ignore[misc]
    if origin in (Union, UnionType):
        return Union[tuple(_strict(a) for a in inner)]  # noqa: UP007
    return hint


def _descriptions(kind: type) -> dict[str, str]:
    """Read what a numpydoc docstring says of each field."""
    told: dict[str, list[str]] = {}
    names: list[str] = []
    for line in (kind.__doc__ or "").splitlines():
        head = re.match(r" {4}(\w[\w, ]*) : .+$", line)
        if head:
            names = [name.strip() for name in head[1].split(",")]
            told.update({name: [] for name in names})
        elif line.startswith(" " * 8) and names:
            for name in names:
                told[name].append(line.strip())
        elif line.strip():
            names = []
    return {name: " ".join(words).replace("``", "") for name, words in told.items() if words}
