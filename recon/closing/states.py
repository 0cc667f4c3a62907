"""Which step a month may take next, who may take it, and what stands in the way.

draft -> reviewed -> approved -> closed; a reviewed or approved month may go back to draft; only the
latest closed month may be reopened, while the next is not reviewed. A step names the digest of
what its person saw: an edit after viewing voids it.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date, datetime
from enum import StrEnum
from typing import TYPE_CHECKING

from recon.errors import BlockedError, ForbiddenStepError, StaleViewError

if TYPE_CHECKING:
    from collections.abc import Sequence


class State(StrEnum):
    """Where a month stands."""

    DRAFT = "draft"
    REVIEWED = "reviewed"
    APPROVED = "approved"
    CLOSED = "closed"


class Step(StrEnum):
    """What a person asks of a month."""

    REVIEW = "review"
    APPROVE = "approve"
    CLOSE = "close"
    BACK = "take back to draft"
    ASK_REOPEN = "ask to reopen"
    REOPEN = "reopen"


class Role(StrEnum):
    """What an account may do; each includes nothing of the others but reading."""

    READER = "reader"
    CONTRIBUTOR = "contributor"
    PREPARER = "preparer"
    APPROVER = "approver"
    ADMINISTRATOR = "administrator"


ALLOWED = {
    Step.REVIEW: (State.DRAFT, Role.PREPARER, State.REVIEWED),
    Step.APPROVE: (State.REVIEWED, Role.APPROVER, State.APPROVED),
    Step.CLOSE: (State.APPROVED, Role.PREPARER, State.CLOSED),
    Step.ASK_REOPEN: (State.CLOSED, Role.PREPARER, State.CLOSED),
    Step.REOPEN: (State.CLOSED, Role.APPROVER, State.DRAFT),
}


@dataclass(frozen=True, kw_only=True)
class Event:
    """
    A step taken.

    Attributes
    ----------
    step : Step
    by : str
        Person, not account.
    at : datetime
        Aware UTC.
    run : int
        The run that was current.
    knowledge_cut : datetime
        Of that run; *reviewed* pins it.
    digest_seen : str
        Result digest the person named.
    note : str
    """

    step: Step
    by: str
    at: datetime
    run: int
    knowledge_cut: datetime
    digest_seen: str
    note: str = ""


@dataclass(frozen=True, kw_only=True)
class Standing:
    """
    What a step is judged against.

    Attributes
    ----------
    month : date
    history : tuple of Event
        Of this month, in order.
    current_run : int
    current_digest : str
        Result digest of the current run.
    knowledge_cut : datetime
    previous_closed : bool
        The month before is closed, or this is the first month.
    later_closed, next_reviewed : bool
        A later month is closed; the next month is reviewed or further.
    blockers : tuple of str
        What completeness found, in words; empty where nothing blocks.
    single_person, trial : bool
        The site's explicit settings.
    """

    month: date
    history: tuple[Event, ...]
    current_run: int
    current_digest: str
    knowledge_cut: datetime
    previous_closed: bool
    later_closed: bool = False
    next_reviewed: bool = False
    blockers: tuple[str, ...] = ()
    single_person: bool = False
    trial: bool = False


def state_of(history: Sequence[Event]) -> State:
    """
    Give the state a history of steps ends in.

    Examples
    --------
    >>> state_of(())
    <State.DRAFT: 'draft'>
    """
    state = State.DRAFT
    for event in history:
        if event.step is Step.BACK:
            state = State.DRAFT
        else:
            state = ALLOWED[event.step][2]
    return state


def restated(history: Sequence[Event]) -> bool:
    """Whether the month was reopened: its next statement is headed RESTATED."""
    return any(event.step is Step.REOPEN for event in history)


def take(
    step: Step,
    standing: Standing,
    *,
    by: str,
    roles: frozenset[Role],
    at: datetime,
    digest_seen: str,
    note: str = "",
) -> Event:
    """
    Judge a step and give the event to record, or say everything that stands in the way.

    Parameters
    ----------
    step : Step
    standing : Standing
    by : str
        The person.
    roles : frozenset of Role
        What the person's account may do.
    at : datetime
        Aware UTC.
    digest_seen : str
        Result digest of the run the person looked at.
    note : str
        Required for taking back and reopening.

    Raises
    ------
    ForbiddenStepError
        The state, the role or the two-person rule does not allow it.
    StaleViewError
        What the person saw is not what is current.
    BlockedError
        Something blocks the close; all of it is listed.
    """
    _allowed(step, standing, by, roles, note)
    pinned = _pinned(standing.history)
    current = pinned.digest_seen if pinned and step is not Step.REVIEW else standing.current_digest
    if digest_seen != current:
        raise StaleViewError(f"{standing.month:%Y-%m}", digest_seen, current)
    if step in (Step.REVIEW, Step.APPROVE, Step.CLOSE):
        blockers = list(standing.blockers)
        if not standing.previous_closed:
            blockers.insert(0, "the month before is not closed: the opening is not signed")
        if standing.trial and step is not Step.REVIEW:
            blockers.insert(0, "the site is in trial: its stated uncertainties are not approved")
        if blockers:
            raise BlockedError(f"{standing.month:%Y-%m}", step.value, blockers)
    held = pinned if pinned and step is not Step.REVIEW else None
    return Event(
        step=step,
        by=by,
        at=at,
        run=held.run if held else standing.current_run,
        knowledge_cut=held.knowledge_cut if held else standing.knowledge_cut,
        digest_seen=digest_seen,
        note=note,
    )


def _pinned(history: Sequence[Event]) -> Event | None:
    """The review that pins a run and its knowledge cut, where one is in force."""
    if state_of(history) is State.DRAFT:
        return None
    return next(e for e in reversed(history) if e.step is Step.REVIEW)


def _allowed(step: Step, standing: Standing, by: str, roles: frozenset[Role], note: str) -> None:
    month = f"{standing.month:%Y-%m}"
    state = state_of(standing.history)
    if step is Step.BACK:
        if state not in (State.REVIEWED, State.APPROVED):
            raise ForbiddenStepError(month, step.value, f"the month is {state.value}")
        needed = Role.PREPARER
    else:
        expected, needed, _ = ALLOWED[step]
        if state is not expected:
            raise ForbiddenStepError(
                month, step.value, f"the month is {state.value}, not {expected.value}"
            )
    if needed not in roles:
        raise ForbiddenStepError(month, step.value, f"{by} is not {needed.value}")
    if step in (Step.BACK, Step.ASK_REOPEN, Step.REOPEN) and not note.strip():
        raise ForbiddenStepError(month, step.value, "a reason is required")
    if step in (Step.ASK_REOPEN, Step.REOPEN):
        if standing.later_closed:
            raise ForbiddenStepError(month, step.value, "a later month is closed")
        if standing.next_reviewed:
            raise ForbiddenStepError(month, step.value, "the next month is already reviewed")
    other = _other_person(step, standing.history)
    if step is Step.REOPEN and other is None:
        raise ForbiddenStepError(month, step.value, "nobody has asked to reopen it")
    if other == by and not standing.single_person:
        raise ForbiddenStepError(
            month, step.value, f"{by} took the step before it; a different person is needed"
        )


def _other_person(step: Step, history: Sequence[Event]) -> str | None:
    """Who took the step that this one answers, where it needs a different person."""
    answered = {Step.APPROVE: Step.REVIEW, Step.REOPEN: Step.ASK_REOPEN}.get(step)
    if answered is None:
        return None
    last = history[-1] if history else None
    return last.by if last is not None and last.step is answered else None
