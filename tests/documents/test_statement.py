"""The statement on the terminal: the balance first, findings in sentences, cautions."""

from __future__ import annotations

from dataclasses import replace

from recon.documents.find import Cells, grouped
from recon.documents.statement import balance_sentence, statement
from recon.findings import Finding, Severity
from tests.documents.months import HEADING
from tests.tabulate.paper import simple_month
from tests.tabulate.test_other_tables import corrected_month
from tests.tabulate.test_tables import mill_month


def test_the_boundary_balance_comes_before_everything_else() -> None:
    tables = mill_month().tables()
    text = statement(HEADING, tables.cells, tables.findings)
    heads = [
        "Site balance 2026-01, as measured",
        "Findings",
        "Balance by section",
        "Year to date",
        "Recoveries 2026-01",
        "Stocks 2026-01",
        "Streams 2026-01",
        "Cautions",
    ]
    places = [text.index(head) for head in heads]
    assert places == sorted(places)


def test_a_balance_is_said_in_a_sentence() -> None:
    cells = Cells(simple_month().tables().cells)
    assert balance_sentence(cells, "site-balance", "2026-01", "Cu") == (
        "Cu: 10.000 t missing, standard uncertainty 7.348 t (z 1.4), inside what chance explains: "
        "carry it, allocate nothing. A loss smaller than 26.8 t would not surely show this month, "
        "nor one smaller than 36.1 t over twelve such months."
    )


def test_a_balance_that_is_not_determined_says_why_and_gives_no_number() -> None:
    paper = simple_month()
    paper.measured = [m for m in paper.measured if m.boundary != "closing"]
    cells = Cells(paper.tables().cells)
    sentence = balance_sentence(cells, "site-balance", "2026-01", "Cu")
    assert sentence == (
        "Cu: unaccounted is not determined: SHED: Cu not surveyed at end of 2026-01-02."
    )


def test_corrections_are_shown_as_a_bridge() -> None:
    text = statement(HEADING, corrected_month().tables().cells)
    assert "Unaccounted: as read, corrections, stated [t]" in text
    assert "OUT Cu: corrected reading, by A. Assayer: scale read 5 % low since its check" in text


def test_serious_findings_come_first_and_many_of_a_kind_are_counted() -> None:
    notes = [
        Finding(code="gap", subject=f"T{i}", text=f"T{i}: a gap.", severity=Severity.NOTE)
        for i in range(9)
    ]
    serious = Finding(code="bad", subject="X", text="X is bad.", severity=Severity.SERIOUS)
    text = statement(HEADING, simple_month().tables().cells, [*notes, serious])
    assert text.index("X is bad.") < text.index("T0: a gap.")
    assert "and 4 more of this kind (gap)." in text


def test_the_head_names_site_days_state_and_run_and_the_foot_the_signatures() -> None:
    heading = replace(HEADING, signed=("prepared by A. Assayer 2026-02-05",))
    text = statement(heading, simple_month().tables().cells)
    for words in ("Example mill", "2026-01-01 to 2026-01-02", "draft", "17", "abab"):
        assert words in text
    assert text.rstrip().endswith("prepared by A. Assayer 2026-02-05")


def test_the_usual_cautions_are_always_there() -> None:
    text = statement(HEADING, ())
    assert "nothing is stated" in text
    assert "never replaces a stack monitor" in text.replace("\n  ", " ")
    assert "crane-load" in text


def test_numbers_are_grouped_by_thousands_and_never_minus_zero() -> None:
    assert grouped(1234567.25, 1) == "1 234 567.2"
    assert grouped(-0.0, 3) == "0.000"
    assert grouped(-12.5, 1) == "-12.5"
