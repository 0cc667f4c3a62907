"""Clean readings of whole days, integrated: what coverage studies start from.

Real plant readings have gaps, bad rows and resets, which the service's own integration handles;
this one is for simulated readings without faults and asserts that they are clean.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence

import numpy as np

from recon.declare.site import Instrument, Site
from recon.demo.clock import Floats, Grid, instant
from recon.demo.serving import step_factor
from recon.ingest.rows import Series, TagDay
from recon.units import unit


def integrated(
    site: Site, *, grid: Grid, first: int, last: int, series: Sequence[Series]
) -> Iterator[TagDay]:
    """
    Integrate clean readings of whole days, as ``recon.ingest.rows.TagDay`` says.

    Parameters
    ----------
    site : Site
    grid : Grid
    first, last : int
        Indices of days, both included; the series cover just these.
    series : sequence of Series
        One reading a step, held until the next; a totaliser has one more at the end.
    """
    read = {s.tag: s for s in series}
    declared = {i.tag: i for i in site.instruments if i.tag in read}
    signal = {s.name: s.run_signal for s in site.streams}
    for tag, instrument in declared.items():
        one = read[tag]
        assert not one.quality.any()
        assert np.isfinite(one.value).all()
        runs = signal.get(instrument.stream or "")
        value = one.value * _second(instrument, declared, read)
        for d in range(first, last + 1):
            day = slice(*(int(k - grid.first[first]) for k in grid.first[d : d + 2]))
            ran = np.ones(day.stop - day.start) if runs is None else read[runs].value[day] > 0.0
            hours = float(ran.sum()) * grid.hours
            amount = float((value[day] * ran).sum()) * grid.hours
            mean = float((one.value[day] * ran).sum()) * grid.hours / hours if hours else None
            if instrument.kind == "totaliser":
                amount = _counted(instrument, one.value[day.start : day.stop + 1])
                mean = amount / hours if hours else None
            yield TagDay(
                tag=tag,
                day=grid.days[d],
                chunk=f"simulated {tag} {grid.days[d]}",
                amount=amount,
                covered_hours=hours,
                day_hours=float(grid.day_hours[d]),
                running_hours=hours,
                mean=mean,
                readings=day.stop - day.start,
                bad=0,
                last_known=instant(int(one.known_at[day.stop - 1])),
            )


def _second(
    instrument: Instrument, declared: Mapping[str, Instrument], read: Mapping[str, Series]
) -> Floats:
    """Give the product of what rate tags of the chain give, reading by reading."""
    product: Floats = np.ones(1)
    for step in instrument.chain:
        if step.tag in declared and instrument.kind == "rate" and step.tag is not None:
            canonical = read[step.tag].value * unit(declared[step.tag].unit).factor
            product = np.asarray(product * step_factor(step, canonical), dtype=np.float64)
    return product


def _counted(instrument: Instrument, value: Floats) -> float:
    """Sum a totaliser's differences over at most one roll-over."""
    difference = float(value[-1] - value[0])
    return difference if difference >= 0.0 else difference + (instrument.modulus or 0.0)
