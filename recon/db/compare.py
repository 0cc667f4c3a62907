"""What a source says now against what the book had from it: changed, vanished, or back."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from datetime import datetime
from typing import Literal

from recon.app.book_types import Chunk
from recon.audit.canonical import canonical
from recon.findings import Finding, Severity
from recon.ingest.rows import Record

Change = Literal["changed-at-source", "vanished-at-source", "back-at-source"]
CHANGED: Change = "changed-at-source"
VANISHED: Change = "vanished-at-source"
BACK: Change = "back-at-source"


@dataclass(frozen=True, kw_only=True)
class SourceChange:
    """
    A row of the book's ``source_change``.

    Attributes
    ----------
    kind, subject : str
        Kind of row; natural key of a record, or tag and day of readings.
    change : str
    true_from, true_to : datetime
        Span it speaks of.
    text : str
        Expected and found, in a sentence.
    evidence : tuple of (str, str)
    """

    kind: str
    subject: str
    change: Change
    true_from: datetime
    true_to: datetime
    text: str
    evidence: tuple[tuple[str, str], ...]


def as_finding(change: SourceChange) -> Finding:
    """Say a change as a finding."""
    return Finding(
        code=change.change,
        subject=change.subject,
        text=change.text,
        severity=Severity.NOTE if change.change == BACK else Severity.WARNING,
        evidence=change.evidence,
    )


def compare_readings(before: Chunk, after: Chunk) -> tuple[int, int]:
    """
    Count readings that changed and that vanished from one chunk of a tag's day to the next.

    A reading with a later ``known_at`` than before is a correction the source owns up to and
    counts as neither; one whose value or quality differs at the same ``known_at`` changed.
    """
    old, new = _by_time(before), _by_time(after)
    changed = sum(
        1 for at, row in old.items() if at in new and new[at] != row and new[at][-1] <= row[-1]
    )
    return changed, sum(1 for at in old if at not in new)


def _by_time(chunk: Chunk) -> dict[int, tuple[str, str, int]]:
    """Rows of a chunk of readings by their time: value and quality as written, known at."""
    rows: dict[int, tuple[str, str, int]] = {}
    for line in chunk.content.decode().removesuffix("\n").split("\n")[2:]:
        at, value, quality, known = line.split(",")
        rows[int(at)] = (value, quality, int(known))
    return rows


def changed_readings(
    tag: str, day: str, counts: tuple[int, int], before: Chunk, after: Chunk, span: Span
) -> SourceChange | None:
    """Say what changed in a tag's day of readings; None where rows were only added."""
    changed, vanished = counts
    if not changed and not vanished:
        return None
    gone = after.rows == 0
    text = (
        f"Tag {tag}, {day}: of {before.rows} readings the book had, {changed} now read "
        f"differently at the source and {vanished} are gone; {after.rows} came. "
    )
    text += (
        "The readings kept stay in force; ask who removed them, then set the day aside or not."
        if gone
        else "What the source now says is in force; ask who changed it and why."
    )
    return SourceChange(
        kind="reading",
        subject=f"{tag} {day}",
        change=VANISHED if gone else CHANGED,
        true_from=span[0],
        true_to=span[1],
        text=text,
        evidence=(("before", before.digest), ("after", after.digest)),
    )


Span = tuple[datetime, datetime]


def changed_record(before: Record, after: Record) -> SourceChange:
    """Say that a record reads differently without a new time of becoming known."""
    return SourceChange(
        kind=before.kind.value,
        subject=before.natural_key,
        change=CHANGED,
        true_from=min(before.true_from, after.true_from),
        true_to=max(before.true_to, after.true_to),
        text=(
            f"{before.kind.value.capitalize()} {before.natural_key}: {_shown(before)} became "
            f"{_shown(after)} at the source, with the same time of becoming known. What the "
            "source now says is in force; ask who changed it and why."
        ),
        evidence=(("before", _all_of(before)), ("after", _all_of(after))),
    )


def vanished_record(gone: Record) -> SourceChange:
    """Say that a record in force is not at the source any more."""
    return SourceChange(
        kind=gone.kind.value,
        subject=gone.natural_key,
        change=VANISHED,
        true_from=gone.true_from,
        true_to=gone.true_to,
        text=(
            f"{gone.kind.value.capitalize()} {gone.natural_key} ({_shown(gone)}) is gone from "
            "the source. It stays in force; ask who removed it, then set it aside or not."
        ),
        evidence=(("before", _all_of(gone)),),
    )


def back_again(kind: str, subject: str, span: Span) -> SourceChange:
    """Say that what had vanished is there again as it was."""
    return SourceChange(
        kind=kind,
        subject=subject,
        change=BACK,
        true_from=span[0],
        true_to=span[1],
        text=f"{kind.capitalize()} {subject} is at the source again as it was.",
        evidence=(),
    )


def content_of(record: Record) -> tuple[object, ...]:
    """Everything of a record beside its natural key and when it became known."""
    return (
        record.true_from,
        record.true_to,
        record.value,
        record.unit,
        record.lot,
        record.extra,
    )


def record_lines(records: Iterable[Record]) -> list[list[object]]:
    """Records as rows for evidence, every column, sorted."""
    lines: list[list[object]] = [
        [
            r.kind.value,
            r.document,
            r.subject,
            r.item,
            r.stage,
            r.true_from,
            r.true_to,
            r.known_at,
            r.value,
            r.unit,
            r.lot,
            extra_text(r),
        ]
        for r in records
    ]
    return sorted(lines, key=lambda line: (*map(str, line[:5]), str(line[7])))


def extra_text(record: Record) -> str:
    """Further columns of a record as canonical JSON."""
    return canonical([list(pair) for pair in record.extra]).decode()


RECORD_COLUMNS = (
    "kind",
    "document",
    "subject",
    "item",
    "stage",
    "true_from",
    "true_to",
    "known_at",
    "value",
    "unit",
    "lot",
    "extra",
)


def _shown(record: Record) -> str:
    return "no value" if record.value is None else f"{record.value:.6g} {record.unit}"


def _all_of(record: Record) -> str:
    return canonical(record_lines([record])[0]).decode()
