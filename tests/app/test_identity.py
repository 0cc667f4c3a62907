"""The data digest: the same data are the same data, whoever saw them, when, and in what order."""

from __future__ import annotations

from dataclasses import replace
from datetime import date, timedelta

import pytest

from recon.app.identity import data_digest
from recon.app.period import PeriodInputs
from recon.ingest.given import Decision, OpeningStock
from recon.tabulate.leaves import YearLeaf
from tests.db.samples import MONTH, SEEN, SITE, readings_chunk, record, tag_day

CHUNKS = [readings_chunk(tag, MONTH, [(0, 1.0, 0)]) for tag in ("WI-101", "WI-102")]
GIVEN = PeriodInputs(
    site=SITE,
    month=MONTH,
    through=date(2026, 1, 3),
    versions=(),
    tag_days=tuple(tag_day(chunk, 0.1 + 0.2) for chunk in CHUNKS),
    records=(record(1), record(2, None)),
    opening=(OpeningStock(node="shed", quantity="Cu", value=12.5, u=0.5, basis="read"),),
    year=(YearLeaf(month="2025-12", table="streams", row="feed", column="dry", value=99.5),),
    knowledge_cut=SEEN,
)
DECISION = Decision(
    decision="d" * 64,
    kind="set aside",
    tag="WI-102",
    first=MONTH,
    last=MONTH,
    value=None,
    reason="",
    by="j.doe",
)


@pytest.mark.parametrize(
    "changes",
    [
        {"knowledge_cut": SEEN + timedelta(days=9)},
        {"records": GIVEN.records[::-1]},
        {"tag_days": GIVEN.tag_days[::-1]},
        {"tag_days": tuple(replace(row, chunk="0" * 64) for row in GIVEN.tag_days)},
        {"records": tuple(replace(r, extra=(("crew", "B"),)) for r in GIVEN.records)},
    ],
    ids=["cut", "order of records", "order of tag days", "chunk", "further columns"],
)
def test_the_digest_does_not_depend_on(changes: dict[str, object]) -> None:
    assert data_digest(replace(GIVEN, **changes)) == data_digest(GIVEN)  # type: ignore[arg-type]


@pytest.mark.parametrize(
    "changes",
    [
        {"site": "six"},
        {"through": date(2026, 1, 4)},
        {"records": (record(1, 0.2850000000000001), record(2, None))},
        {"records": (record(1, stage="provisional"), record(2, None))},
        {"records": (record(1, unit="g/t"), record(2, None))},
        {"records": (record(1, known_at=SEEN), record(2, None))},
        {"records": (record(1, true_to=SEEN), record(2, None))},
        {"records": GIVEN.records[:1]},
        {"tag_days": (replace(GIVEN.tag_days[0], amount=0.3), GIVEN.tag_days[1])},
        {"tag_days": (replace(GIVEN.tag_days[0], running_hours=23.0), GIVEN.tag_days[1])},
        {"decisions": (DECISION,)},
        {"opening": (replace(GIVEN.opening[0], booked=1.0),)},
        {"opening": (replace(GIVEN.opening[0], value=12.6),)},
        {"opening_signed": False},
        {"year": (replace(GIVEN.year[0], value=99.6),)},
    ],
    ids=lambda changes: next(iter(changes)),
)
def test_the_digest_depends_on(changes: dict[str, object]) -> None:
    assert data_digest(replace(GIVEN, **changes)) != data_digest(GIVEN)  # type: ignore[arg-type]


def test_a_number_that_is_not_finite_has_no_digest() -> None:
    with pytest.raises(ValueError, match="nan is not a finite number"):
        data_digest(replace(GIVEN, records=(record(1, float("nan")),)))
