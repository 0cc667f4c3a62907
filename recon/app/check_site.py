"""Say whether a site file, its sources and their data are fit to run, tag by tag.

A *fault* stops a run or makes it wrong: a source that does not answer, rows that break the column
contract, a unit of the wrong kind, a stage nobody declared. A *warning* leaves a figure without its
measurement: a tag without rows, an old value, low coverage. Nothing is written anywhere.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field, replace
from datetime import datetime
from difflib import get_close_matches
from typing import TYPE_CHECKING

from recon.app.check_rows import (
    DAY,
    LOOK_BACK,
    TagCheck,
    blank,
    check_readings,
    check_records,
    reads,
)
from recon.errors import ContractError, DataError, UnreadableFileError
from recon.findings import Finding
from recon.ingest.rows import Record, RowKind
from recon.plant_time import Calendar

if TYPE_CHECKING:
    from recon.app.ports import Plant
    from recon.declare.site import Site
    from recon.declare.site_file import SiteFile

SOURCE_OF = {
    "rate": RowKind.READING,
    "totaliser": RowKind.READING,
    "assay": RowKind.ASSAY,
    "tickets": RowKind.TICKET,
    "survey": RowKind.SURVEY,
}


@dataclass(frozen=True, kw_only=True)
class SiteCheck:
    """
    What a check found.

    Attributes
    ----------
    versions : tuple of SiteFile
        Rising by ``valid_from``.
    site : Site
        The version in force.
    at : datetime
        The check speaks of this instant, aware UTC.
    asked : bool
        False where no source was named: the file alone was checked.
    tags : tuple of TagCheck
        In the site file's order; empty where not asked.
    events : int
    faults, warnings, notes : tuple of str
        Those of tags included, each begun with its tag.
    """

    versions: tuple[SiteFile, ...]
    site: Site
    at: datetime
    asked: bool
    tags: tuple[TagCheck, ...] = ()
    events: int = 0
    faults: tuple[str, ...] = ()
    warnings: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()

    @property
    def fit(self) -> bool:
        """Whether a run would go and be right."""
        return not self.faults


@dataclass(kw_only=True)
class _Report:
    """Faults, warnings and notes while they are collected."""

    faults: list[str] = field(default_factory=list)
    warnings: list[str] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)


def check_site(
    versions: Sequence[SiteFile],
    plant: Plant | None,
    at: datetime,
    noted: Callable[[], Iterable[Finding]] = tuple,
) -> SiteCheck:
    """
    Check the version in force, its sources and their rows.

    Parameters
    ----------
    versions : sequence of SiteFile
        Rising by ``valid_from``; they read clean.
    plant : Plant or None
        None: the file alone is checked.
    at : datetime
        Rows before this instant are looked at, aware UTC.
    noted : callable
        Gives what the sources noted in passing.
    """
    site = version_at(versions, at).site
    if plant is None:
        return SiteCheck(versions=tuple(versions), site=site, at=at, asked=False)
    report = _Report()
    _sources(site, report)
    declared = {_KIND_NAMES[q.kind] for q in site.queries}
    tags: dict[str, TagCheck] = {}
    if RowKind.READING in declared:
        tags |= _readings(site, plant, at, report)
    events = 0
    for kind in (RowKind.ASSAY, RowKind.TICKET, RowKind.SURVEY, RowKind.EVENT):
        if kind not in declared:
            continue
        records = _records(plant, kind, at, report)
        if records is None:
            continue
        if kind is RowKind.EVENT:
            events = len(records)
            _events(site, records, report)
        else:
            tags |= _record_tags(site, kind, records, report)
    report.notes.extend(finding.text for finding in noted())
    checked = tuple(tags[i.tag] for i in site.instruments if i.tag in tags)
    return SiteCheck(
        versions=tuple(versions),
        site=site,
        at=at,
        asked=True,
        tags=checked,
        events=events,
        faults=(*report.faults, *(f"{t.tag}: {f}" for t in checked for f in t.faults)),
        warnings=(*report.warnings, *(f"{t.tag}: {w}" for t in checked for w in t.warnings)),
        notes=tuple(report.notes),
    )


def version_at(versions: Sequence[SiteFile], at: datetime) -> SiteFile:
    """Give the version in force at an instant; the first one where none is yet."""
    first = versions[0].site
    day = Calendar(zone=first.zone, day_cut=first.day_cut).day_of(at)
    reached = [v for v in versions if v.site.valid_from <= day]
    return reached[-1] if reached else versions[0]


_KIND_NAMES = {
    "readings": RowKind.READING,
    "assays": RowKind.ASSAY,
    "tickets": RowKind.TICKET,
    "surveys": RowKind.SURVEY,
    "events": RowKind.EVENT,
}


def _sources(site: Site, report: _Report) -> None:
    """Find instruments whose kind of row comes from nowhere."""
    declared = {_KIND_NAMES[q.kind] for q in site.queries}
    for name, kind in _KIND_NAMES.items():
        if kind in declared:
            continue
        needing = [i.tag for i in site.instruments if SOURCE_OF[i.kind] is kind]
        if needing:
            report.faults.append(
                f"no source of {name}: {len(needing)} instruments need it, {needing[0]} for one. "
                f'Add [[query]] kind = "{name}".'
            )
        elif kind is RowKind.EVENT and any(s.lasts == "calibration" for s in site.sources):
            report.warnings.append(
                "no source of events: calibrations cannot redraw the shared errors that they end."
            )


def _readings(site: Site, plant: Plant, at: datetime, report: _Report) -> dict[str, TagCheck]:
    result = {}
    for instrument in site.instruments:
        if SOURCE_OF[instrument.kind] is not RowKind.READING:
            continue
        try:
            pieces = list(plant.readings([instrument.tag], at - DAY, at))
        except ContractError as error:
            result[instrument.tag] = replace(blank(instrument), faults=error.faults)
            continue
        except (DataError, UnreadableFileError) as error:
            report.faults.append(str(error))  # the same would be said of every further tag
            break
        result[instrument.tag] = check_readings(instrument, pieces, at)
    return result


def _records(plant: Plant, kind: RowKind, at: datetime, report: _Report) -> list[Record] | None:
    try:
        return list(plant.records(kind, at - LOOK_BACK, at))
    except ContractError as error:
        report.faults.extend(f"{error.source}: {fault}" for fault in error.faults)
    except (DataError, UnreadableFileError) as error:
        report.faults.append(str(error))
    return None


def _record_tags(
    site: Site, kind: RowKind, records: Sequence[Record], report: _Report
) -> dict[str, TagCheck]:
    result = {}
    used: set[int] = set()
    for instrument in site.instruments:
        if SOURCE_OF[instrument.kind] is not kind:
            continue
        own = [n for n, record in enumerate(records) if reads(instrument, record)]
        used.update(own)
        result[instrument.tag] = check_records(instrument, [records[n] for n in own])
    left = {(r.subject, r.item) for n, r in enumerate(records) if n not in used}
    for subject, item in sorted(left):
        count = sum(1 for r in records if (r.subject, r.item) == (subject, item))
        report.notes.append(
            f"{count:,} {kind} rows of {subject} {item} belong to no instrument."
            + _near(site, kind, subject, item)
        )
    return result


def _events(site: Site, records: Sequence[Record], report: _Report) -> None:
    tags = {i.tag for i in site.instruments}
    for subject in sorted({r.subject for r in records} - tags):
        close = get_close_matches(subject, tags, n=1)
        hint = f' Did you mean "{close[0]}"?' if close else ""
        report.notes.append(f"events of {subject} belong to no instrument.{hint}")


def _near(site: Site, kind: RowKind, subject: str, item: str) -> str:
    names = {
        f"{i.point or i.node} {i.analyte}" if kind is not RowKind.TICKET else i.tag: i.tag
        for i in site.instruments
        if SOURCE_OF[i.kind] is kind
    }
    wanted = subject if kind is RowKind.TICKET else f"{subject} {item}"
    close = get_close_matches(wanted, names, n=1, cutoff=0.8)
    return f" {names[close[0]]} reads {close[0]}." if close else ""
