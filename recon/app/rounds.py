"""One round of the service: bring in what is new, find what is due, run it oldest first.

The scheduled service makes a round at every tick; ``recon run`` makes rounds until nothing is due.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Collection
from dataclasses import dataclass, field
from datetime import date, datetime, timedelta
from typing import TYPE_CHECKING, Literal, Protocol

import structlog

from recon.app.due import Arrivals, Due, LastRun, due_runs
from recon.app.pull import Sources, pull
from recon.app.run_period import Ran, Runner, parsed, run_period, window
from recon.errors import ConfigError, ConflictError, DataError, LostClaimError, SolveError
from recon.plant_time import month_days

if TYPE_CHECKING:
    from recon.app.book_types import Claim, Standing
    from recon.app.ports import Plant
    from recon.declare.site import Site

Ended = Literal["published", "pointed", "unchanged", "held by another", "lost", "failed"]
log = structlog.get_logger()


class Watcher(Protocol):
    """Is told how a round goes; the health page of the service, or a line on a terminal."""

    def found_due(self, count: int) -> None:
        """So many periods are due."""
        ...

    def reading(self, what: str, done: int, total: int) -> None:
        """A source is being read."""
        ...

    def period_began(self, period: str) -> None:
        """A period is being computed."""
        ...

    def period_ended(
        self, period: str, outcome: Ended, *, seconds: float, at: datetime, trouble: str = ""
    ) -> None:
        """A period is done, or was not for the reason given."""
        ...


@dataclass(frozen=True, kw_only=True)
class Pace:
    """
    How a round is paced.

    Attributes
    ----------
    pull_every : timedelta
        The plant's sources are read at most so often.
    look_back : timedelta
        Months that ended at most so long ago are read again and compared.
    again : timedelta
        Readings of open and recent days are read again so often.
    cap : int
        At most so many runs a round.
    """

    pull_every: timedelta = timedelta(minutes=5)
    look_back: timedelta = timedelta(days=35)
    again: timedelta = timedelta(hours=24)
    cap: int = 10


@dataclass
class Rounds:
    """
    Makes rounds for one site.

    Parameters
    ----------
    runner : Runner
        Its ``hold`` is set here, so that a claim can be given back from outside.
    plant : callable
        Gives the plant's sources as the site's present version declares them.
    watcher : Watcher
    pace : Pace
    closed : callable
        Gives the first days of closed months.
    """

    runner: Runner
    plant: Callable[[Site], Plant]
    watcher: Watcher
    pace: Pace = field(default_factory=Pace)
    closed: Callable[[], Collection[date]] = lambda: ()
    _pulled_at: datetime | None = None
    _failed: dict[tuple[date, date], LastRun] = field(default_factory=dict)
    _claim: Claim | None = None

    def look(self, stopping: Callable[[], bool] = lambda: False) -> tuple[Ran, ...]:
        """
        Pull what is new and run what is due.

        A period that cannot be solved is told and passed over until new data come; the others are
        run. ``stopping`` is asked between steps.

        Raises
        ------
        DataError
            A source or the book cannot be reached.
        ConfigError
            The book has no usable version of the site.
        """
        sites = self.sites()
        self._pull(sites, stopping)
        due = self.due(sites)
        self.watcher.found_due(len(due))
        ran: list[Ran] = []
        for one in due:
            if stopping():
                break
            ended = self._run(one)
            if ended is not None:
                ran.append(ended)
        return tuple(ran)

    def due(self, sites: tuple[Site, ...] | None = None) -> tuple[Due, ...]:
        """Find what is due now; see ``recon.app.due``."""
        sites = sites or self.sites()
        now, book, site = self.runner.clock(), self.runner.book, self.runner.site
        sources = self._sources(sites)
        closed = frozenset(self.closed())
        standings = book.standing(site)
        last = {(s.month, s.through): _last_run(s) for s in standings}
        for key, failed in self._failed.items():
            known = last.get(key)
            if known is None or known.knowledge_cut < failed.knowledge_cut:
                last[key] = failed
        latest = {
            month: max(run.through for (m, _), run in last.items() if m == month)
            for month in {m for m, _ in last} - closed
        }
        arrivals = {
            month: news
            for month, through in latest.items()
            if (news := self._news(sources, last[month, through], standings)) is not None
        }
        return due_runs(
            calendar=sources.calendar,
            settling=timedelta(hours=sites[-1].settling_hours),
            now=now,
            first_day=sources.first_day,
            last_runs=tuple(last.values()),
            arrivals=arrivals,
            closed=closed,
            cap=self.pace.cap,
        )

    def until_nothing_is_due(self) -> list[Ran]:
        """Make rounds until nothing is left that can be run now."""
        ran = list(self.look())
        left = self.due()
        while left:
            ran += self.look()
            before, left = left, self.due()
            if left == before:
                break
        return ran

    def only(self, month: date, through: date | None = None) -> list[Ran]:
        """
        Pull, then run one month through a day, by default its last day that has ended.

        Raises
        ------
        DataError
            No such day has ended, or the month is closed.
        """
        sites = self.sites()
        calendar = self._sources(sites).calendar
        ended = calendar.day_of(self.runner.clock()) - timedelta(days=1)
        last = through or min(month_days(month)[-1], ended)
        if not max(month, sites[0].valid_from) <= last <= ended:
            raise DataError(
                f"{month:%Y-%m} through {last.isoformat()} cannot be run: days from "
                f"{sites[0].valid_from.isoformat()} to {ended.isoformat()} have a site version and "
                "have ended."
            )
        if month in self.closed():
            raise ConflictError(
                f"{month:%Y-%m} is closed. What came late is booked in the open month, or the "
                "month is reopened by two people."
            )
        self._pull(sites, lambda: False)
        ran = self._run(Due(month=month, through=last, since=self.runner.clock(), reason="asked"))
        return [] if ran is None else [ran]

    def abandon(self) -> None:
        """Give back the claim of a computation that nobody waits for any more."""
        claim = self._claim
        if claim is not None:
            self.runner.book.give_back(claim)

    def hold(self, claim: Claim | None) -> None:
        """Remember the claim held now."""
        self._claim = claim

    def sites(self) -> tuple[Site, ...]:
        """Versions of the site, rising by ``valid_from``."""
        versions = self.runner.book.site_versions(self.runner.site)
        if not versions:
            raise ConfigError(
                f"site {self.runner.site}: the book has no version of it. Name the site file in "
                "the settings, so that it is added at the start."
            )
        return tuple(parsed(version).site for version in versions)

    def _sources(self, sites: tuple[Site, ...]) -> Sources:
        return Sources(
            book=self.runner.book,
            plant=self.plant(sites[-1]),
            site=self.runner.site,
            sites=sites,
            look_back=self.pace.look_back,
            again=self.pace.again,
        )

    def _pull(self, sites: tuple[Site, ...], stopping: Callable[[], bool]) -> None:
        now = self.runner.clock()
        if self._pulled_at is not None and now - self._pulled_at < self.pace.pull_every:
            return
        pull(
            self._sources(sites),
            now=now,
            closed=self.closed(),
            stopping=stopping,
            progress=self.watcher.reading,
        )
        self._pulled_at = now

    def _news(
        self, sources: Sources, run: LastRun, standings: tuple[Standing, ...]
    ) -> Arrivals | None:
        """What came for a month after its latest run was cut; its opening stock may be new too."""
        since, until = window(sources.calendar, run.month, run.through)
        book, site, cut = self.runner.book, self.runner.site, run.knowledge_cut
        now = self.runner.clock()
        came = book.arrivals(site, since=since, until=until, after=cut, by=now)
        found = list(came or ())
        before = [s for s in standings if s.month < run.month]
        found += [s.moved_at for s in before[-1:] if cut < s.moved_at <= now]
        found += [v.known_at for v in book.site_versions(site) if cut < v.known_at <= now]
        return Arrivals(first=min(found), last=max(found)) if found else None

    def _run(self, due: Due) -> Ran | None:
        period = f"{due.month:%Y-%m} through {due.through.isoformat()}"
        began = time.perf_counter()
        cut = self.runner.clock()
        self.watcher.period_began(period)

        def ended(outcome: Ended, trouble: str = "") -> None:
            self.watcher.period_ended(
                period,
                outcome,
                seconds=time.perf_counter() - began,
                at=self.runner.clock(),
                trouble=trouble,
            )

        try:
            ran = run_period(self.runner, due.month, due.through)
        except LostClaimError as error:
            log.warning("claim lost", period=period, reason=str(error))
            ended("lost")
            return None
        except SolveError as error:
            log.error("cannot be solved", period=period, reason=str(error))
            self._failed[due.month, due.through] = LastRun(
                month=due.month, through=due.through, knowledge_cut=cut, published_at=cut
            )
            ended("failed", str(error))
            return None
        except BaseException as error:  # a stop as well: the record says why, the error goes on
            ended("failed", str(error) or type(error).__name__)
            raise
        self._failed.pop((due.month, due.through), None)
        ended(ran.outcome)
        return ran


def _last_run(standing: Standing) -> LastRun:
    return LastRun(
        month=standing.month,
        through=standing.through,
        knowledge_cut=standing.knowledge_cut,
        published_at=standing.moved_at,
    )
