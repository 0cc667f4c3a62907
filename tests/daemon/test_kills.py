"""Workers killed at random moments lose nothing, double nothing, and leave nothing half."""

from __future__ import annotations

import pytest

from tests.bench.kills import loop


@pytest.mark.long
@pytest.mark.timeout(1500)
def test_sixty_kills_leave_every_period_published_once(book_url: str) -> None:
    found = loop(book_url, kills=60)
    print(found)
    assert (found.kills, found.lost, found.doubled, found.partial) == (60, 0, 0, 0)
    assert found.chain_whole
