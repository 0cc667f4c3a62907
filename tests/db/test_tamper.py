"""The commands that count tampering and flipped bits, in small numbers; by hand in large ones."""

from __future__ import annotations

import pytest

from tests.bench import tamper


@pytest.mark.long
def test_every_edit_is_found_and_no_flipped_bit_shows_a_wrong_number() -> None:
    assert tamper.main(["--edits", "48", "--flips", "120", "--seed", "2"]) == 0
