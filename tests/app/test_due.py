"""What is due: first when settled, again when new data rest, oldest first, closed never."""

from __future__ import annotations

from datetime import UTC, date, datetime, time, timedelta

from hypothesis import given, settings
from hypothesis import strategies as st

from recon.app.due import QUIET, SPACING, Arrivals, Due, LastRun, due_runs
from recon.plant_time import Calendar

ZONES = ("UTC", "Europe/Berlin", "America/Denver", "Australia/Adelaide", "America/Santiago")
FIRST = date(2026, 2, 1)

calendars = st.builds(
    lambda zone, hour: Calendar(zone=zone, day_cut=time(hour)),
    st.sampled_from(ZONES),
    st.sampled_from((0, 2, 6)),
)
instants = st.integers(0, 108 * 24 * 60).map(
    lambda minutes: datetime(2026, 2, 1, tzinfo=UTC) + timedelta(minutes=minutes)
)
settlings = st.integers(0, 72).map(lambda h: timedelta(hours=h))


def ask(
    calendar: Calendar,
    now: datetime,
    runs: dict[tuple[date, date], LastRun] | None = None,
    arrivals: dict[date, Arrivals] | None = None,
    closed: tuple[date, ...] = (),
    cap: int = 10_000,
    settling: timedelta = timedelta(hours=30),
) -> tuple[Due, ...]:
    return due_runs(
        calendar=calendar,
        settling=settling,
        now=now,
        first_day=FIRST,
        last_runs=tuple((runs or {}).values()),
        arrivals=arrivals or {},
        closed=closed,
        cap=cap,
    )


def publish(runs: dict[tuple[date, date], LastRun], due: Due, now: datetime) -> None:
    runs[due.month, due.through] = LastRun(
        month=due.month, through=due.through, knowledge_cut=now, published_at=now
    )


@given(calendars, instants, settlings)
def test_every_settled_day_is_due_once_and_no_other(
    calendar: Calendar, now: datetime, settling: timedelta
) -> None:
    found = ask(calendar, now, settling=settling)
    expected = []
    day = FIRST
    while calendar.end(day) + settling <= now:
        expected.append((day.replace(day=1), day))
        day += timedelta(days=1)
    assert [(d.month, d.through) for d in found] == expected


@given(calendars, instants, st.integers(1, 9))
def test_a_cap_takes_the_oldest_first(calendar: Calendar, now: datetime, cap: int) -> None:
    assert ask(calendar, now, cap=cap) == ask(calendar, now)[:cap]


@given(calendars, instants)
def test_nothing_is_due_twice(calendar: Calendar, now: datetime) -> None:
    runs: dict[tuple[date, date], LastRun] = {}
    for due in ask(calendar, now):
        publish(runs, due, now)
    assert ask(calendar, now, runs) == ()


@given(calendars, instants, st.sets(st.sampled_from([FIRST, date(2026, 3, 1), date(2026, 4, 1)])))
def test_a_closed_month_is_never_due(calendar: Calendar, now: datetime, closed: set[date]) -> None:
    news = {month: Arrivals(first=now - 2 * SPACING, last=now - SPACING) for month in closed}
    assert not closed & {d.month for d in ask(calendar, now, {}, news, tuple(closed))}


@settings(max_examples=15)
@given(calendars, st.sets(st.integers(0, 40), max_size=30))
def test_an_outage_is_caught_up_to_the_same_runs(calendar: Calendar, down: set[int]) -> None:
    """A service that looks every day, and one that was down on some, end with the same runs."""
    start = datetime(2026, 2, 2, 9, tzinfo=UTC)
    steady: dict[tuple[date, date], LastRun] = {}
    patchy: dict[tuple[date, date], LastRun] = {}
    for day in range(45):
        now = start + timedelta(days=day)
        for runs, works in ((steady, True), (patchy, day not in down)):
            for _ in range(10) if works else ():
                for due in ask(calendar, now, runs, cap=7):
                    publish(runs, due, now)
    assert steady.keys() == patchy.keys()


@settings(max_examples=20)
@given(st.lists(st.integers(1, 3 * 24 * 60), min_size=1, max_size=60), st.integers(10, 90))
def test_late_data_are_taken_in_soon_and_not_too_often(minutes: list[int], step: int) -> None:
    """Whatever comes is in a run at most six hours later; the same period runs six hours apart."""
    calendar = Calendar(zone="Europe/Berlin", day_cut=time(6))
    start = datetime(2026, 3, 20, 12, tzinfo=UTC)
    comes = sorted(start + timedelta(minutes=m) for m in minutes)
    runs: dict[tuple[date, date], LastRun] = {}
    for due in ask(calendar, start):
        publish(runs, due, start)
    now, waiting = start, list(comes)
    while now < start + timedelta(days=4):
        now += timedelta(minutes=step)
        latest = max(runs)
        new = [c for c in comes if runs[latest].knowledge_cut < c <= now]
        news = {latest[0]: Arrivals(first=new[0], last=new[-1])} if new else {}
        for due in ask(calendar, now, runs, news):
            before = runs.get((due.month, due.through))
            if due.reason == "new data":
                assert before is not None
                assert now - before.published_at >= SPACING
                assert now - new[-1] >= QUIET or now - new[0] >= SPACING
            publish(runs, due, now)
            waiting = [c for c in waiting if c > now]
        assert all(c > now or now - c < SPACING + timedelta(minutes=step) for c in waiting)
    assert waiting == []


def test_data_that_are_still_coming_wait_for_an_hour_of_quiet() -> None:
    calendar = Calendar(zone="UTC", day_cut=time(6))
    now = datetime(2026, 2, 10, 18, tzinfo=UTC)
    runs: dict[tuple[date, date], LastRun] = {}
    for due in ask(calendar, now - timedelta(hours=5)):
        publish(runs, due, now - timedelta(hours=8))
    latest = max(runs)

    def due_with_last(minutes_ago: int) -> tuple[Due, ...]:
        last = now - timedelta(minutes=minutes_ago)
        return ask(calendar, now, runs, {latest[0]: Arrivals(first=last, last=last)})

    assert due_with_last(59) == ()
    assert [(d.through, d.reason) for d in due_with_last(60)] == [(latest[1], "new data")]
