"""Instants are read as the standards say, and nothing is guessed."""

from __future__ import annotations

from datetime import UTC, date, datetime, timedelta, timezone

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from openpyxl.utils import get_column_letter

from recon.errors import NoInstantError
from recon.plant.cells import letters
from recon.plant.instants import (
    EPOCH,
    instant_of,
    instants_of,
    local_instant_of,
    microseconds,
    text_of,
)

INSTANTS = st.datetimes(
    min_value=datetime(1970, 1, 2),  # noqa: DTZ001
    max_value=datetime(2105, 1, 1),  # noqa: DTZ001
    timezones=st.just(UTC),
)


@pytest.mark.parametrize(
    ("text", "same"),
    [
        ("1985-04-12T23:20:50.52Z", datetime(1985, 4, 12, 23, 20, 50, 520_000, UTC)),
        ("1996-12-19T16:39:57-08:00", datetime(1996, 12, 20, 0, 39, 57, 0, UTC)),
    ],
)
def test_the_examples_of_rfc_3339_are_read(text: str, same: datetime) -> None:
    """RFC 3339, section 5.8; the second is said there to equal 1996-12-20T00:39:57Z."""
    assert instant_of(text) == same


def test_a_leap_second_is_refused_and_not_moved() -> None:
    """RFC 3339, section 5.8 gives 1990-12-31T23:59:60Z; no clock here has that second."""
    with pytest.raises(NoInstantError, match="not ISO 8601"):
        instant_of("1990-12-31T23:59:60Z")


@pytest.mark.parametrize(
    ("found", "what"),
    [
        (None, "a time is missing"),
        (True, "not a time"),
        (1.5, "not a time"),
        (date(2026, 1, 1), "a day without time of day and zone"),
        (datetime(2026, 1, 1), "a time without zone or offset"),  # noqa: DTZ001
        ("2026-01-01 06:00", "a time without zone or offset"),
        ("1 Jan", "text that is not ISO 8601"),
        (-1, "a time not between 1970 and 2200"),
        (10**30, "no number of microseconds since 1970"),
        ("1960-01-01T00:00Z", "a time not between 1970 and 2200"),
    ],
)
def test_what_is_no_instant_is_named(found: object, what: str) -> None:
    with pytest.raises(NoInstantError) as caught:
        instant_of(found)
    assert caught.value.what == what


@given(st.lists(INSTANTS, max_size=20))
def test_every_form_of_an_instant_gives_the_same_microsecond(times: list[datetime]) -> None:
    expected = [(t - EPOCH) // timedelta(microseconds=1) for t in times]
    west = timezone(timedelta(hours=-3))
    forms: list[list[object]] = [
        list(times),
        [t.astimezone(west) for t in times],
        [text_of(t) for t in times],
        list(expected),
    ]
    for column in forms:
        found = instants_of(column, lambda _n, error: pytest.fail(str(error)))
        assert found.dtype == np.dtype(np.int64)
        assert found.tolist() == expected


@given(st.lists(INSTANTS, min_size=2, max_size=20))
def test_text_of_instants_sorts_as_the_instants_do(times: list[datetime]) -> None:
    assert sorted(map(text_of, times)) == [text_of(t) for t in sorted(times)]


def test_a_faulty_instant_in_a_column_is_told_with_its_place() -> None:
    told: list[tuple[int, str]] = []
    instants_of([5, "x", None], lambda n, error: told.append((n, error.what)))
    assert told == [(1, "text that is not ISO 8601"), (2, "a time is missing")]


def test_plant_time_is_read_in_the_plants_zone() -> None:
    winter = local_instant_of("2026-01-15 06:00", "Europe/Berlin")
    summer = local_instant_of(datetime(2026, 7, 15, 6), "Europe/Berlin")  # noqa: DTZ001
    assert (microseconds(winter), microseconds(summer)) == (
        microseconds(datetime(2026, 1, 15, 5, tzinfo=UTC)),
        microseconds(datetime(2026, 7, 15, 4, tzinfo=UTC)),
    )


def test_columns_are_named_as_the_spreadsheet_library_names_them() -> None:
    """Second opinion: openpyxl's own naming."""
    assert [letters(i) for i in range(2000)] == [get_column_letter(i + 1) for i in range(2000)]
