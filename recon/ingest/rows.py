"""Rows as the plant's sources give them, before anything is decided about them.

Five kinds of source, two shapes: readings come as columns of numbers by tag, everything else as
records. Each row knows when it was true and when it was known.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date, datetime
from enum import IntEnum, StrEnum
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray


class RowKind(StrEnum):
    """The five kinds of source."""

    READING = "reading"
    ASSAY = "assay"
    TICKET = "ticket"
    SURVEY = "survey"
    EVENT = "event"


class Quality(IntEnum):
    """Quality of a reading as its source marks it."""

    GOOD = 0
    UNCERTAIN = 1
    BAD = 2


@dataclass(frozen=True, kw_only=True)
class Series:
    """
    Readings of one tag in time order.

    Attributes
    ----------
    tag : str
    at : ndarray
        UTC instants as integer microseconds since 1970, shape (n,), rising.
    value : ndarray
        Raw values in the tag's unit, shape (n,); NaN where the source gave none.
    quality : ndarray
        ``Quality`` codes, shape (n,), int8.
    known_at : ndarray
        UTC microseconds at which each row became known, shape (n,).
    """

    tag: str
    at: NDArray[np.int64]
    value: NDArray[np.float64]
    quality: NDArray[np.int8]
    known_at: NDArray[np.int64]


@dataclass(frozen=True, kw_only=True)
class Record:
    """
    One assay, ticket, survey item or event.

    Attributes
    ----------
    kind : RowKind
        Not READING.
    document : str
        Sample, ticket, survey or event number; with subject, item and stage the natural key.
    subject : str
        Assay: sample point. Ticket: instrument tag. Survey: place. Event: tag.
    item : str
        Assay: analyte. Ticket: "net" (wet mass) or "pieces". Survey: mass, volume, density,
        moisture, or a component. Event: calibration, range change, bypass, zero check, check
        weighing, duplicate, reference material, shutdown.
    true_from, true_to : datetime
        Span the row speaks of, aware UTC; equal for an instant.
    known_at : datetime
        When it became known, aware UTC.
    value : float or None
        In ``unit``; for a calibration the as-left correction ratio where one is given.
    unit : str
    stage : str
        provisional, final, settled, ...; "" where there is one stage only.
    lot : str
        Lot, batch or bundle; "" where none.
    extra : tuple of (str, str)
        Further columns kept as evidence: method, crew, carrier, as found, as left, surveyor.
    """

    kind: RowKind
    document: str
    subject: str
    item: str
    true_from: datetime
    true_to: datetime
    known_at: datetime
    value: float | None
    unit: str
    stage: str = ""
    lot: str = ""
    extra: tuple[tuple[str, str], ...] = ()

    @property
    def natural_key(self) -> str:
        """Key by which a later row replaces an earlier one."""
        return "|".join((self.document, self.subject, self.item, self.stage))


@dataclass(frozen=True, kw_only=True)
class TagDay:
    """
    One tag's readings of one plant day, integrated: what the computation needs of them.

    ``tag`` is the instrument's. A **rate** has ``amount`` in its unit x h, over the covered time in
    which its stream ran. A **totaliser** has it in its unit: the sum of its differences. A
    **product instrument**, a rate whose chain names other rate tags, has the integral of the
    product reading by reading at the union of their times, each second value in its canonical
    unit through its step: ``flow x SO2`` is [flow unit x 1 x h]; a slurry step gives
    ``flow x (density - 1) x s / (s - 1)``, [flow unit x t/m3 x h]; ``covered`` is where all are.
    A **run signal** or a tag that belongs to no stream runs all day: its ``mean`` is that of its
    covered time, a signal's ``amount`` the hours run. The tags a product uses have days of their
    own as well.

    Attributes
    ----------
    tag : str
    day : date
    chunk : str
        Digest of the readings this was made from.
    amount : float or None
        As above; None where no time is covered. Whether it is enough is decided later.
    covered_hours, day_hours, running_hours : float
        Running time with a usable value, length of the day (23 to 25 h), time the stream ran [h].
    mean : float or None
        Time-weighted mean over covered running time [unit].
    readings, bad : int
        Rows in the day and those set aside by quality or range.
    last_known : datetime
        Latest known-at of its rows, aware UTC.
    said : str
        What integration found, see ``recon.ingest.said``; "" where nothing.
    """

    tag: str
    day: date
    chunk: str
    amount: float | None
    covered_hours: float
    day_hours: float
    running_hours: float
    mean: float | None
    readings: int
    bad: int
    last_known: datetime
    said: str = ""
