"""The one way in which a value becomes bytes, so that a digest can be made of it anywhere.

UTF-8 JSON, keys sorted, no spaces. Numbers are text, in the shortest form that reads back as the
same double, so no other writer's way with ``1``, ``1.0`` or ``1e22`` matters; -0.0 is written as
0.0; NaN and infinity are refused, since no database keeps them alike. Instants are UTC with
microseconds. Which column is a number is known from its name, never from its form.
"""

from __future__ import annotations

import json
import math
from collections.abc import Iterable, Mapping, Sequence
from datetime import UTC, date, datetime

_ENCODER = json.JSONEncoder(
    ensure_ascii=False, allow_nan=False, separators=(",", ":"), check_circular=False
)


def canonical(value: object) -> bytes:
    """
    Write a value of mappings, sequences, text, numbers, days, instants, True, False and None.

    Raises
    ------
    ValueError
        A number that is not finite, an instant without zone, or a NUL or lone surrogate in text.
    TypeError
        Anything else, or a key that is not text.

    Examples
    --------
    >>> canonical({"u": 0.1, "A": [1, -0.0, None], "when": date(2026, 1, 31)})
    b'{"A":["1","0.0",null],"u":"0.1","when":"2026-01-31"}'
    """
    return _ENCODER.encode(_plain(value)).encode("utf-8")


def canonical_lines(rows: Iterable[Sequence[object]]) -> bytes:
    """Write rows of scalars one a line, each as ``canonical`` would write it."""
    encode = _ENCODER.encode
    return "".join([encode([_scalar(value) for value in row]) + "\n" for row in rows]).encode()


def number_text(value: float) -> str:
    """
    Write a double in the shortest form that reads back as itself.

    Raises
    ------
    ValueError
        It is not finite.
    """
    if not math.isfinite(value):
        raise ValueError(f"{value} is not a finite number")
    return float.__repr__(value + 0.0)  # adding zero turns -0.0 into 0.0


def instant_text(instant: datetime) -> str:
    """
    Write an aware instant in UTC with microseconds, so that text order is time order.

    Raises
    ------
    ValueError
        It has no zone.

    Examples
    --------
    >>> instant_text(datetime(2026, 1, 31, 6, tzinfo=UTC))
    '2026-01-31T06:00:00.000000Z'
    """
    if instant.utcoffset() is None:
        raise ValueError(f"a time without zone: {instant.isoformat()}")
    return instant.astimezone(UTC).strftime("%Y-%m-%dT%H:%M:%S.%fZ")


def _plain(value: object) -> object:
    if isinstance(value, Mapping):
        if not all(isinstance(key, str) for key in value):
            raise TypeError("keys must be text")
        return {_text(key): _plain(value[key]) for key in sorted(value)}
    if isinstance(value, list | tuple):
        return [_plain(part) for part in value]
    return _scalar(value)


def _scalar(value: object) -> str | bool | None:
    if value is None or value is True or value is False:
        return value
    if isinstance(value, str):
        return _text(value)
    if isinstance(value, float):
        return number_text(value)
    if isinstance(value, int):
        return int.__repr__(value)
    if isinstance(value, datetime):
        return instant_text(value)
    if isinstance(value, date):
        return value.isoformat()
    raise TypeError(f"no canonical form for {type(value).__name__}")


def _text(value: str) -> str:
    if "\0" in value:
        raise ValueError("text holds a NUL character, which not every database keeps")
    return str(value)
