"""What a month is told besides the plant's rows: site versions, decisions, opening stocks."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date

from recon.declare.site import Site


@dataclass(frozen=True, kw_only=True)
class SiteVersion:
    """A site version in force with the digest of its text."""

    digest: str
    site: Site


@dataclass(frozen=True, kw_only=True)
class Decision:
    """
    A person's approved decision that changes what is computed.

    Attributes
    ----------
    decision : str
        Its digest.
    kind : str
        ``set aside``, ``corrected reading`` (factor or value), ``override``, ``held``.
    tag : str
    first, last : date
        Plant days it covers.
    value : float or None
        Factor of a corrected reading, or the overriding value in the instrument's unit.
    reason, by : str
    """

    decision: str
    kind: str
    tag: str
    first: date
    last: date
    value: float | None
    reason: str
    by: str


@dataclass(frozen=True, kw_only=True)
class OpeningStock:
    """
    A stock as signed (or in draft) at last month's close [t], with its booked lines.

    ``basis`` is ``read``, ``corrected``, ``settled``, ``estimated``, ``by difference`` or
    ``take-on``; ``value`` is None only where nothing gave the stock.
    """

    node: str
    quantity: str
    value: float | None
    u: float | None
    basis: str
    booked: float = 0.0
