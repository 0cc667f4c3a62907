"""A month's steps: order, people, digests, blockers."""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, date, datetime

import pytest
from hypothesis import given
from hypothesis import strategies as st

from recon.closing.states import Event, Role, Standing, State, Step, restated, state_of, take
from recon.errors import BlockedError, ConflictError, ForbiddenStepError, StaleViewError

NOW = datetime(2026, 2, 6, 12, tzinfo=UTC)
STANDING = Standing(
    month=date(2026, 1, 1),
    history=(),
    current_run=7,
    current_digest="a" * 64,
    knowledge_cut=NOW,
    previous_closed=True,
)
EVERY = frozenset(Role)


def after(standing: Standing, step: Step, by: str, **changes: object) -> Standing:
    event = take(step, standing, by=by, roles=EVERY, at=NOW, digest_seen="a" * 64, note="reason")
    return replace(standing, history=(*standing.history, event), **changes)  # type: ignore[arg-type]


def test_two_people_close_a_month() -> None:
    done = after(after(after(STANDING, Step.REVIEW, "Ada"), Step.APPROVE, "Ben"), Step.CLOSE, "Ada")
    assert state_of(done.history) is State.CLOSED


def test_nobody_approves_their_own_review() -> None:
    with pytest.raises(ForbiddenStepError, match="a different person is needed"):
        after(after(STANDING, Step.REVIEW, "Ada"), Step.APPROVE, "Ada")


def test_a_single_person_site_may_by_its_explicit_setting() -> None:
    alone = replace(STANDING, single_person=True)
    done = after(after(alone, Step.REVIEW, "Ada"), Step.APPROVE, "Ada")
    assert state_of(done.history) is State.APPROVED


def test_an_approval_of_something_else_is_void() -> None:
    reviewed = after(STANDING, Step.REVIEW, "Ada")
    with pytest.raises(StaleViewError, match="Look at the statement again"):
        take(Step.APPROVE, reviewed, by="Ben", roles=EVERY, at=NOW, digest_seen="b" * 64)


def test_a_review_pins_its_run_while_later_data_queue() -> None:
    reviewed = after(STANDING, Step.REVIEW, "Ada")
    later = replace(reviewed, current_run=8, current_digest="c" * 64)
    event = take(Step.APPROVE, later, by="Ben", roles=EVERY, at=NOW, digest_seen="a" * 64)
    assert event.run == 7


def test_everything_that_blocks_is_listed_at_once() -> None:
    blocked = replace(
        STANDING, previous_closed=False, blockers=("day 12 has no run", "ticket 8 has no assay")
    )
    with pytest.raises(BlockedError) as caught:
        after(blocked, Step.REVIEW, "Ada")
    assert len(caught.value.blockers) == 3
    assert "the opening is not signed" in str(caught.value)


def test_a_site_in_trial_cannot_close() -> None:
    trial = replace(after(STANDING, Step.REVIEW, "Ada"), trial=True)
    with pytest.raises(BlockedError, match="in trial"):
        after(trial, Step.APPROVE, "Ben")


def test_reopening_needs_a_request_a_second_person_and_the_latest_month() -> None:
    closed = after(
        after(after(STANDING, Step.REVIEW, "Ada"), Step.APPROVE, "Ben"), Step.CLOSE, "Ada"
    )
    with pytest.raises(ForbiddenStepError, match="nobody has asked"):
        after(closed, Step.REOPEN, "Ben")
    with pytest.raises(ForbiddenStepError, match="later month"):
        after(replace(closed, later_closed=True), Step.ASK_REOPEN, "Ada")
    asked = after(closed, Step.ASK_REOPEN, "Ada")
    with pytest.raises(ForbiddenStepError, match="a different person"):
        after(asked, Step.REOPEN, "Ada")
    again = after(asked, Step.REOPEN, "Ben")
    assert state_of(again.history) is State.DRAFT
    assert restated(again.history)


def test_a_reader_may_do_nothing() -> None:
    for step in Step:
        with pytest.raises(ConflictError):
            take(
                step,
                STANDING,
                by="Cy",
                roles=frozenset({Role.READER}),
                at=NOW,
                digest_seen="a" * 64,
                note="reason",
            )


@given(
    st.lists(st.tuples(st.sampled_from(list(Step)), st.sampled_from(["Ada", "Ben"])), max_size=14)
)
def test_no_sequence_lets_one_person_approve_their_own_work(
    asked: list[tuple[Step, str]],
) -> None:
    history: tuple[Event, ...] = ()
    for step, by in asked:
        try:
            event = take(
                step,
                replace(STANDING, history=history),
                by=by,
                roles=EVERY,
                at=NOW,
                digest_seen="a" * 64,
                note="reason",
            )
        except ConflictError:
            continue
        if event.step is Step.APPROVE:
            review = next(e for e in reversed(history) if e.step is Step.REVIEW)
            assert review.by != event.by
        if event.step is Step.CLOSE:
            assert history[-1].step is Step.APPROVE
        history = (*history, event)
