"""Plant days never leave a gap and never overlap, whatever the clocks do."""

from __future__ import annotations

from datetime import UTC, date, datetime, time, timedelta
from zoneinfo import available_timezones

import pytest

from recon.plant_time import Calendar, month_days

SOME = ["Europe/Berlin", "America/Denver", "Australia/Adelaide", "America/Santiago", "UTC"]


@pytest.mark.parametrize("zone", SOME)
@pytest.mark.parametrize("cut", [time(0, 0), time(2, 30), time(6, 0)])
def test_days_join_and_hold_every_instant(zone: str, cut: time) -> None:
    calendar = Calendar(zone=zone, day_cut=cut)
    day, before = date(2026, 1, 1), None
    while day < date(2027, 1, 1):
        start = calendar.start(day)
        assert before is None or before == start
        assert 22.0 <= calendar.hours(day) <= 26.0
        assert calendar.day_of(start) == day
        assert calendar.day_of(calendar.end(day) - timedelta(microseconds=1)) == day
        before = calendar.end(day)
        day += timedelta(days=1)


def test_a_midnight_that_does_not_exist_moves_to_the_end_of_the_gap() -> None:
    """Santiago, 6 September 2026: clocks go from 00:00 to 01:00 (IANA time zone database)."""
    calendar = Calendar(zone="America/Santiago", day_cut=time(0, 0))
    assert calendar.start(date(2026, 9, 6)) == datetime(2026, 9, 6, 4, 0, tzinfo=UTC)
    assert calendar.hours(date(2026, 9, 6)) == 23.0


def test_a_month_has_its_days() -> None:
    assert len(month_days(date(2026, 2, 1))) == 28
    assert month_days(date(2026, 12, 1))[-1] == date(2026, 12, 31)


@pytest.mark.slow
def test_every_zone_three_cuts_three_years() -> None:
    for zone in sorted(available_timezones()):
        for cut in (time(0, 0), time(2, 30), time(6, 0)):
            calendar = Calendar(zone=zone, day_cut=cut)
            day, edge = date(2025, 1, 1), calendar.start(date(2025, 1, 1))
            while day < date(2028, 1, 1):
                after = calendar.end(day)
                assert timedelta(hours=22) <= after - edge <= timedelta(hours=26), (zone, day)
                edge, day = after, day + timedelta(days=1)
