"""Canonical bytes: one form for one value, and nothing that a database would not give back."""

from __future__ import annotations

import json
import math
import struct
from datetime import UTC, date, datetime, timedelta, timezone

import pytest
from hypothesis import given
from hypothesis import strategies as st

from recon.audit.canonical import canonical, canonical_lines
from recon.audit.digest import digest, digest_bytes, table_digest


def test_keys_are_sorted_and_no_space_is_written() -> None:
    assert (
        canonical({"b": [True, None], "a": {"ö": "ü"}})
        == '{"a":{"ö":"ü"},"b":[true,null]}'.encode()
    )


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_a_number_reads_back_as_the_same_double(value: float) -> None:
    text = json.loads(canonical(value))
    assert isinstance(text, str)
    assert struct.pack("d", float(text)) == struct.pack("d", value + 0.0)


def test_minus_zero_is_written_as_zero() -> None:
    assert canonical(-0.0) == canonical(0.0) == b'"0.0"'


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf])
def test_a_number_that_is_not_finite_is_refused(value: float) -> None:
    with pytest.raises(ValueError, match="not a finite number"):
        canonical({"value": value})


def test_an_instant_is_written_in_utc_whatever_its_zone() -> None:
    plant = datetime(2026, 1, 31, 6, tzinfo=timezone(timedelta(hours=-7)))
    assert canonical(plant) == canonical(plant.astimezone(UTC)) == b'"2026-01-31T13:00:00.000000Z"'
    with pytest.raises(ValueError, match="without zone"):
        canonical(datetime(2026, 1, 31))  # noqa: DTZ001


def test_what_has_no_canonical_form_is_refused() -> None:
    with pytest.raises(TypeError, match="no canonical form for set"):
        canonical({1, 2})
    with pytest.raises(TypeError, match="keys must be text"):
        canonical({1: 2})
    with pytest.raises(ValueError, match="NUL"):
        canonical("a\0b")
    with pytest.raises(ValueError, match="surrogates"):
        canonical("\ud800")


def test_a_line_of_a_table_is_what_canonical_writes() -> None:
    row = ["FEED", date(2026, 1, 31), 1.5, 3, None, False]
    assert canonical_lines([row, row]) == (canonical(row) + b"\n") * 2


def test_a_table_digest_can_be_made_with_standard_tools() -> None:
    made = table_digest("figure", ["name", "value"], [["Cu recovery", 0.9127], ["loss", None]])
    by_hand = (
        b'{"columns":["name","value"],"table":"figure"}\n["Cu recovery","0.9127"]\n["loss",null]\n'
    )
    assert made == digest_bytes(by_hand)


def test_digests_of_bytes_are_sha_256() -> None:
    # FIPS 180-2, appendix B.1 (from memory)
    assert digest_bytes(b"abc").startswith("ba7816bf8f01cfea414140de5dae2223")
    assert digest({}) == digest_bytes(b"{}")
