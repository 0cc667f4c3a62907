"""Compute one month to date and publish it once: read, claim, compute, publish.

The scheduled service, ``recon run`` and a re-run by hand are this one function. Whatever happens to
the process between any two lines, either nothing is published or all of it is, and whoever comes
next finds out from the book alone.
"""

from __future__ import annotations

import threading
from collections.abc import Callable
from dataclasses import dataclass
from datetime import date, datetime, timedelta
from types import TracebackType
from typing import TYPE_CHECKING, Literal

import structlog

from recon import failpoints
from recon.app.compute_period import compute_period
from recon.app.identity import data_digest
from recon.app.period import PeriodInputs, PeriodResult, SiteVersion
from recon.declare.site_file import site_from_bytes
from recon.errors import ConfigError, LostClaimError, ReconError
from recon.ingest.context import HISTORY_DAYS
from recon.plant_time import Calendar

if TYPE_CHECKING:
    from recon.app.book_types import Claim, Material, RunHead, StoredVersion
    from recon.app.ports import Book
    from recon.declare.site import Site

Outcome = Literal["published", "pointed", "unchanged", "held by another"]
log = structlog.get_logger()


@dataclass(frozen=True, kw_only=True)
class Ran:
    """
    What became of a period.

    Attributes
    ----------
    outcome : str
        ``published``: computed and written. ``pointed``: these inputs had been published before,
        the pointer moved back to that run. ``unchanged``: the current run has these inputs.
        ``held by another``: somebody else computes it.
    head : RunHead or None
        The run that speaks for the period now; None where another holds it.
    """

    month: date
    through: date
    outcome: Outcome
    head: RunHead | None


@dataclass(frozen=True, kw_only=True)
class Runner:
    """
    Who computes, and against which book.

    Attributes
    ----------
    book : Book
    site : str
    owner : str
        This process, unique: claims carry it.
    actor : str
        Person or service named in the audit entry.
    clock : callable
        Gives the present, aware UTC.
    lease_seconds : float
        A claim not extended for so long may be taken over [s].
    compute : callable
        The pure function from inputs to result.
    hold : callable
        Told of the claim while it is held, and None when it is not any more.
    """

    book: Book
    site: str
    owner: str
    actor: str
    clock: Callable[[], datetime]
    lease_seconds: float = 60.0
    compute: Callable[[PeriodInputs], PeriodResult] = compute_period
    hold: Callable[[Claim | None], None] = lambda _: None


def run_period(runner: Runner, month: date, through: date) -> Ran:
    """
    Compute a month to date and publish it, unless that has been done.

    Parameters
    ----------
    runner : Runner
    month : date
        First plant day of the month.
    through : date
        Last plant day computed.

    Raises
    ------
    LostClaimError
        The computation took longer than its lease could be kept; nothing was published.
    SolveError
        No acceptable answer exists; nothing was published.
    ConfigError
        No site version is in force on the month's first day.
    """
    book, site = runner.book, runner.site
    with structlog.contextvars.bound_contextvars(
        site=site, month=month.isoformat(), through=through.isoformat()
    ):
        inputs = read_inputs(book, site, month, through, runner.clock())
        digest = data_digest(inputs)
        failpoints.reach("after_read")
        current = book.current(site, month, through)
        if current is not None and current.data_digest == digest:
            _confirm(runner, month, through, inputs.knowledge_cut)
            return Ran(month=month, through=through, outcome="unchanged", head=current)
        claim = book.claim(
            site,
            month=month,
            through=through,
            data_digest=digest,
            knowledge_cut=inputs.knowledge_cut,
            owner=runner.owner,
            lease_seconds=runner.lease_seconds,
        )
        if claim is None:
            return Ran(month=month, through=through, outcome="held by another", head=None)
        with _Lease(runner, claim) as lease:
            failpoints.reach("after_claim")
            existing = book.published(site, month, through, digest)
            if existing is not None:
                head = book.point(lease.claim, existing.run, at=runner.clock(), actor=runner.actor)
                log.info("pointed", run=head.run, data_digest=digest)
                return Ran(month=month, through=through, outcome="pointed", head=head)
            log.info("computing", tag_days=len(inputs.tag_days), records=len(inputs.records))
            result = runner.compute(inputs)
            failpoints.reach("after_compute")
            head = book.publish(lease.claim, inputs, result, at=runner.clock(), actor=runner.actor)
            log.info("published", run=head.run, result_digest=head.result_digest)
            return Ran(month=month, through=through, outcome="published", head=head)


def read_inputs(
    book: Book, site: str, month: date, through: date, knowledge_cut: datetime
) -> PeriodInputs:
    """
    Read everything a month to date is computed from, from one snapshot.

    Raises
    ------
    ConfigError
        The book has no version of the site, or none in force by the month's last day computed.
    """
    calendar = calendar_of(newest_site(book, site))
    material = book.material(
        site,
        month=month,
        through=through,
        first_day=month - timedelta(days=HISTORY_DAYS),
        since=window(calendar, month, through)[0],
        until=window(calendar, month, through)[1],
        knowledge_cut=knowledge_cut,
    )
    return _inputs(site, month, through, knowledge_cut, material)


def window(calendar: Calendar, month: date, through: date) -> tuple[datetime, datetime]:
    """Give the span in which rows matter to a month to date, 30 days of history included."""
    return calendar.start(month - timedelta(days=HISTORY_DAYS)), calendar.end(through)


def newest_site(book: Book, site: str) -> Site:
    """
    Give the latest version of a site that the book holds.

    Raises
    ------
    ConfigError
        It holds none.
    """
    versions = book.site_versions(site)
    if not versions:
        raise ConfigError(
            f"site {site}: the book has no version of it. Check the site file's name, or add it "
            "by running once with the site file."
        )
    return parsed(versions[-1]).site


def calendar_of(site: Site) -> Calendar:
    """Give a site's calendar."""
    return Calendar(zone=site.zone, day_cut=site.day_cut)


_parsed: dict[str, SiteVersion] = {}


def parsed(version: StoredVersion) -> SiteVersion:
    """Give a stored version as a site; each text is read once a process."""
    if version.digest not in _parsed:
        read = site_from_bytes(version.content.encode(), f"site version {version.digest[:12]}")
        _parsed[version.digest] = SiteVersion(digest=version.digest, site=read.site)
    return _parsed[version.digest]


def _inputs(
    site: str, month: date, through: date, knowledge_cut: datetime, material: Material
) -> PeriodInputs:
    if not material.versions:
        raise ConfigError(
            f"site {site}: no version is in force in {month:%Y-%m}. Set valid_from of the first "
            "version to the first day to account for."
        )
    return PeriodInputs(
        site=site,
        month=month,
        through=through,
        versions=tuple(parsed(v) for v in material.versions),
        tag_days=material.tag_days,
        records=material.records,
        decisions=material.decisions,
        opening=material.opening,
        opening_signed=material.opening_signed,
        year=material.year,
        knowledge_cut=knowledge_cut,
    )


def _confirm(runner: Runner, month: date, through: date, cut: datetime) -> None:
    """Note that the current run is still right, so that it is not looked at again soon."""
    for standing in runner.book.standing(runner.site):
        if (standing.month, standing.through) == (month, through):
            runner.book.confirm(standing, runner.site, knowledge_cut=cut, at=runner.clock())
            log.info("unchanged", run=standing.run)


class _Lease:
    """Keeps a claim alive from a thread while its work runs; gives it back when that fails."""

    def __init__(self, runner: Runner, claim: Claim) -> None:
        self._runner = runner
        self._claim = claim
        self._lost: LostClaimError | None = None
        self._ended = threading.Event()
        self._thread = threading.Thread(target=self._keep, name="lease", daemon=True)

    @property
    def claim(self) -> Claim:
        """The claim as last extended; raises ``LostClaimError`` once it is another's."""
        if self._lost is not None:
            raise self._lost
        return self._claim

    def __enter__(self) -> _Lease:
        self._runner.hold(self._claim)
        self._thread.start()
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self._ended.set()
        self._thread.join()
        self._runner.hold(None)
        if error is not None and not isinstance(error, LostClaimError):
            try:
                self._runner.book.give_back(self._claim)
            except ReconError as also:
                log.warning("claim not given back, its lease will run out", reason=str(also))

    def _keep(self) -> None:
        while not self._ended.wait(self._runner.lease_seconds / 3):
            try:
                self._claim = self._runner.book.extend(
                    self._claim, lease_seconds=self._runner.lease_seconds
                )
            except LostClaimError as error:
                self._lost = error
                return
            except ReconError as error:
                log.warning("lease not extended, trying again", reason=str(error))
