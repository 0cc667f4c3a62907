"""Readings kept as evidence come back to the last digit."""

from __future__ import annotations

from datetime import date

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from recon.app.book_types import Chunk
from recon.app.reading_chunks import chunk_of, joined, no_readings, series_of
from recon.errors import AuditError
from recon.ingest.rows import RowKind, Series

DAY = date(2026, 3, 1)
values = st.floats(allow_infinity=False)


def series(tag: str, numbers: list[float]) -> Series:
    at = 1_772_000_000_000_000 + 60_000_000 * np.arange(len(numbers), dtype=np.int64)
    return Series(
        tag=tag,
        at=at,
        value=np.array(numbers, dtype=np.float64),
        quality=np.zeros(len(numbers), dtype=np.int8),
        known_at=at + 5_000_000,
    )


@given(st.lists(values, max_size=20))
def test_a_chunk_gives_back_every_double(numbers: list[float]) -> None:
    given_series = series("FT 101, wet", numbers)
    chunk = chunk_of(given_series, DAY)
    back = series_of(chunk)
    assert back.tag == given_series.tag
    for name in ("at", "value", "quality", "known_at"):
        np.testing.assert_array_equal(getattr(back, name), getattr(given_series, name))
    assert chunk_of(back, DAY).digest == chunk.digest


def test_one_changed_digit_changes_the_digest() -> None:
    one, other = series("FT", [1.0, 2.0]), series("FT", [1.0, np.nextafter(2.0, 3.0)])
    assert chunk_of(one, DAY).digest != chunk_of(other, DAY).digest


def test_a_day_without_readings_is_a_chunk_too() -> None:
    chunk = chunk_of(no_readings("FT"), DAY)
    assert chunk.rows == 0
    assert len(series_of(chunk).at) == 0


def test_pieces_of_a_tag_are_joined_in_order() -> None:
    whole = series("FT", [1.0, 2.0, 3.0])
    pieces = [
        Series(
            tag="FT",
            at=whole.at[part],
            value=whole.value[part],
            quality=whole.quality[part],
            known_at=whole.known_at[part],
        )
        for part in (slice(0, 1), slice(1, 3))
    ]
    together = joined([pieces[0], series("AT", [5.0]), pieces[1]])
    assert sorted(together) == ["AT", "FT"]
    np.testing.assert_array_equal(together["FT"].value, whole.value)


def test_what_is_no_chunk_of_readings_is_refused() -> None:
    chunk = Chunk(
        digest="0" * 64, kind=RowKind.READING, subject="FT", day=DAY, rows=1, content=b"FT\n1,2\n"
    )
    with pytest.raises(AuditError, match="evidence 000000000000: not a chunk of readings"):
        series_of(chunk)
