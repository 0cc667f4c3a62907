"""How faults of a declared file are worded, with the place and a suggestion."""

from __future__ import annotations

from difflib import get_close_matches
from typing import TYPE_CHECKING, Any, TypeVar

from pydantic import TypeAdapter, ValidationError

if TYPE_CHECKING:
    from collections.abc import Iterable

Shape = TypeVar("Shape")


def did_you_mean(found: str, known: Iterable[str]) -> str:
    """
    Suggest the closest known name, or list the known ones.

    Examples
    --------
    >>> did_you_mean("THICKNER", ["MILL", "THICKENER"])
    'Did you mean "THICKENER"?'
    """
    names = sorted(known)
    close = get_close_matches(found, names, n=1, cutoff=0.6)
    if close:
        return f'Did you mean "{close[0]}"?'
    if not names:
        return "None is declared."
    shown = ", ".join(names[:12]) + (", ..." if len(names) > 12 else "")
    return f"Declared: {shown}."


def shaped(
    adapter: TypeAdapter[Shape], found: object, place: str, faults: list[str]
) -> Shape | None:
    """
    Validate one table; append every fault of it and give None where there is any.

    Parameters
    ----------
    adapter : TypeAdapter
        The shape expected.
    found : object
        The table as read.
    place : str
        Where it stands, as a person would look for it.
    faults : list of str
        Grows by one sentence a fault.
    """
    try:
        return adapter.validate_python(found)
    except ValidationError as error:
        faults.extend(f"{place}{_words(item, adapter)}" for item in error.errors())
        return None


def _words(item: Any, adapter: TypeAdapter[Any]) -> str:
    path = "".join(f"[{p + 1}]" if isinstance(p, int) else f".{p}" for p in item["loc"])
    path = path.removeprefix(".")
    head = f", {path}: " if path else ": "
    kind, found = item["type"], item.get("input")
    if kind == "extra_forbidden":
        known = _keys(adapter.json_schema(), list(item["loc"][:-1]))
        return f"{head}unknown key. {did_you_mean(str(item['loc'][-1]), known)}"
    if kind in ("missing", "missing_argument"):
        return f"{head}is required and missing."
    if kind == "finite_number":
        return f"{head}a finite number is expected, found {found}."
    if kind == "tuple_type":
        return f"{head}a list is expected, found {found!r}."
    return f"{head}{item['msg'][0].lower()}{item['msg'][1:]}, found {found!r}."


def _keys(schema: dict[str, Any], path: list[Any]) -> list[str]:
    """Keys allowed at a place of a JSON Schema; all keys known anywhere if the place is unclear."""
    definitions = schema.get("$defs", {})
    if not path:
        return sorted(schema.get("properties", {}))
    return sorted({k for d in definitions.values() for k in d.get("properties", {})})
