"""The invented site, simulated: what is true of it, and what its instruments and papers say."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import date

from recon.declare.site import Site
from recon.demo.clock import chance, make_grid
from recon.demo.faults import Fault, chosen
from recon.demo.integrated import integrated
from recon.demo.laboratory import Laboratory
from recon.demo.meters import Meters, Span, draw_errors
from recon.demo.offsets import Offsets, draw_offsets
from recon.demo.scales import Scales
from recon.demo.serving import true_values
from recon.demo.sizes import Sizes
from recon.demo.spoil import lost_by, spoil
from recon.demo.surveys import Surveyors, log_events
from recon.demo.truth import Truth, run_plant
from recon.ingest.rows import Record, Series, TagDay


@dataclass(frozen=True, kw_only=True)
class Simulation:
    """
    A simulated site.

    Attributes
    ----------
    site : Site
    seed, interval : int
        ``interval`` in minutes.
    truth : Truth
        Never part of the plant's database.
    offsets : Offsets
        What every shared error truly was.
    faults : tuple of Fault
        Planted, whether or not the simulation is long enough to meet them.
    series : tuple of Series
        Readings, one a rate tag or totaliser.
    records : tuple of Record
        Assays, tickets, surveys and events.
    """

    site: Site
    seed: int
    interval: int
    truth: Truth
    offsets: Offsets
    faults: tuple[Fault, ...]
    series: tuple[Series, ...]
    records: tuple[Record, ...]

    def tag(self, name: str) -> Series:
        """Give the readings of a tag."""
        return next(s for s in self.series if s.tag == name)


@dataclass(frozen=True, kw_only=True)
class DayObserved:
    """
    One day of a given truth, observed with fresh draws of every error.

    Attributes
    ----------
    index : int
        Of the day in ``truth.grid.days``.
    day : date
    tag_days : tuple of TagDay
        The readings integrated.
    series : tuple of Series
        The readings themselves at the truth's interval, that day alone.
    records : tuple of Record
        Assays, tickets, surveys at both cuts, and events.
    offsets : Offsets
    truth : Truth
        The same for all days of one study.
    """

    index: int
    day: date
    tag_days: tuple[TagDay, ...]
    series: tuple[Series, ...]
    records: tuple[Record, ...]
    offsets: Offsets
    truth: Truth


class Observer:
    """
    Looks at a truth through its instruments, as often as wanted.

    Parameters
    ----------
    truth : Truth
    seed : int
        Of the serving values, which are part of what is true.
    """

    def __init__(self, truth: Truth, *, seed: int) -> None:
        self.truth = truth
        self._sizes = Sizes(truth)
        self._serving = true_values(truth.site, truth.grid, seed)
        self._meters = Meters(truth, self._serving)
        self._laboratory = Laboratory(truth, self._sizes, self._serving)
        self._scales = Scales(truth, self._serving)
        self._surveyors = Surveyors(truth, self._sizes, self._serving)

    def observe(
        self, span: Span, *, counted: bool
    ) -> tuple[tuple[Series, ...], tuple[Record, ...]]:
        """
        Give the readings and papers of a span of days.

        Parameters
        ----------
        span : Span
        counted : bool
            Loads that are counted are whole; see ``Scales``.
        """
        errors = draw_errors(self.truth, self._sizes, self._serving, span)
        series = tuple(self._meters.read(errors, span))
        records = (
            *self._laboratory.report(errors, span),
            *self._scales.print_tickets(errors, span, counted=counted),
            *self._surveyors.survey(span),
            *log_events(self.truth, span),
        )
        return series, records


def simulate(
    site: Site,
    *,
    months: int = 2,
    interval: int = 5,
    seed: int = 1,
    faults: str | Sequence[str] = "on",
) -> Simulation:
    """
    Simulate the site from its first day, bit for bit the same for the same arguments.

    Parameters
    ----------
    site : Site
        The demo site.
    months : int
        Whole plant months.
    interval : int
        Minutes between readings; divides an hour.
    seed : int
    faults : str or sequence of str
        ``on``: those planted by default; ``off``: none; or names of ``recon.demo.faults``.

    Raises
    ------
    ValueError
        An argument cannot be; the message says what is expected.
    """
    planted = chosen(faults)
    grid = make_grid(site, months=months, interval=interval)
    offsets = draw_offsets(site, grid=grid, seed=seed)
    truth = run_plant(
        site,
        grid=grid,
        seed=seed,
        piece=_pieces(site, offsets),
        lost=lost_by(planted, grid),
    )
    span = Span(first=0, last=len(grid.days) - 1, seed=seed, offsets=offsets)
    series, records = Observer(truth, seed=seed).observe(span, counted=True)
    series, records = spoil(planted, site=site, grid=grid, series=series, records=records)
    return Simulation(
        site=site,
        seed=seed,
        interval=interval,
        truth=truth,
        offsets=offsets,
        faults=planted,
        series=series,
        records=records,
    )


def simulate_days(
    site: Site,
    *,
    days: int,
    seed: int = 1,
    months: int = 2,
    interval: int = 60,
) -> Iterator[DayObserved]:
    """
    Observe single days of one truth, each time with fresh draws of all errors, without faults.

    The days of the truth are taken in turn, again and again: 2,000 days cost minutes.

    Parameters
    ----------
    site : Site
    days : int
        How many to give.
    seed, months, interval : int
        Of the truth; the interval [min] is that of the readings too.

    Yields
    ------
    DayObserved
    """
    grid = make_grid(site, months=months, interval=interval)
    truth = run_plant(
        site, grid=grid, seed=seed, piece=_pieces(site, draw_offsets(site, grid=grid, seed=seed))
    )
    observer = Observer(truth, seed=seed)
    for n in range(days):
        index = n % len(grid.days)
        fresh = int(chance(seed, "day", str(n)).integers(2**62))
        span = Span(
            first=index,
            last=index,
            seed=fresh,
            offsets=draw_offsets(site, grid=grid, seed=fresh),
        )
        series, records = observer.observe(span, counted=False)
        yield DayObserved(
            index=index,
            day=grid.days[index],
            tag_days=tuple(integrated(site, grid=grid, first=index, last=index, series=series)),
            series=series,
            records=records,
            offsets=span.offsets,
            truth=truth,
        )


def _pieces(site: Site, offsets: Offsets) -> dict[str, float]:
    """Give the true mean mass of loads that are only counted: declared factor less its error."""
    pieces: dict[str, float] = {}
    for instrument in site.instruments:
        if instrument.unit == "pieces":
            declared = instrument.chain[0].value
            assert declared is not None
            pieces[instrument.tag] = declared / (1.0 + float(offsets.relative(instrument)[0]))
    return pieces
