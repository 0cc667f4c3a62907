"""The whole computation of a month to date: from raw material to everything a run publishes.

One pure, picklable function: no clock, no database, no randomness without a fixed seed, one thread
around the linear algebra. The scheduled run, previews, re-runs and verification all call it; only
its callers read, claim and publish.
"""

from __future__ import annotations

from dataclasses import replace
from datetime import date
from typing import TYPE_CHECKING

from threadpoolctl import threadpool_limits

from recon.app.day_tests import DayTest, day_statistics, statistic_cells
from recon.app.method import THREADS, method_record
from recon.app.period import PeriodInputs, PeriodResult
from recon.app.rows import estimate_rows, figure_rows, measurement_rows, offset_rows
from recon.app.summary import summary_of
from recon.app.suspicion import services_by_name, suspect_findings, suspicion_of
from recon.findings import Finding, Severity
from recon.ingest.build import day_problem, ingest_month, with_references
from recon.plant_time import month_days
from recon.reconcile.read import reconcile
from recon.solve.standard import standard_engine
from recon.tabulate.tables import tables_of

if TYPE_CHECKING:
    from collections.abc import Collection, Mapping

    from recon.app.suspicion import Suspicion
    from recon.declare.site import Site
    from recon.ingest.measured import IngestedMonth
    from recon.reconcile.solver import Engine


def compute_period(inputs: PeriodInputs) -> PeriodResult:
    """
    Compute a month to date.

    Parameters
    ----------
    inputs : PeriodInputs

    Returns
    -------
    PeriodResult
        Rows sorted by natural key; the same digits for the same inputs within one set of
        libraries and one kind of processor.

    Raises
    ------
    SolveError
        The data cannot satisfy the equalities, or no engine's answer was accepted.
    """
    with threadpool_limits(limits=THREADS):
        return _compute(inputs)


def days_of(inputs: PeriodInputs) -> tuple[date, ...]:
    """Plant days of the month to date that a site version covers."""
    first = inputs.versions[0].site.valid_from
    return tuple(d for d in month_days(inputs.month) if first <= d <= inputs.through)


def site_on(inputs: PeriodInputs, day: date) -> Site:
    """Give the site version in force on a day."""
    reached = [v.site for v in inputs.versions if v.site.valid_from <= day]
    return reached[-1] if reached else inputs.versions[0].site


def _compute(inputs: PeriodInputs) -> PeriodResult:
    engine = standard_engine()
    days = days_of(inputs)
    level = site_on(inputs, inputs.through).alarm_level
    month = _ingested(inputs, days, engine)
    answer = reconcile(month.problem, engine)
    tests = [
        day_statistics(day_problem(month, p), p, engine=engine, level=level)
        for p in range(1, len(days) + 1)
    ]
    suspicion = suspicion_of(answer, level)
    tables = tables_of(
        sites=[site_on(inputs, day) for day in days],
        ingested=month,
        answer=answer,
        opening=inputs.opening,
        opening_signed=inputs.opening_signed,
        year=inputs.year,
    )
    findings = (
        *month.findings,
        *tables.findings,
        *_alarm_findings(
            days, suspicion, tests, services_by_name(site_on(inputs, inputs.through), month)
        ),
    )
    return PeriodResult(
        measurements=measurement_rows(month, answer),
        estimates=estimate_rows(days, answer),
        offsets=offset_rows(days, answer),
        findings=findings,
        figures=figure_rows(month, answer, tables.figures),
        cells=(*tables.cells, *statistic_cells(days, answer, suspicion.alarm, tests)),
        closing=tables.closing,
        leaves=tables.leaves,
        summary=summary_of(
            site_on(inputs, inputs.through), days, month, answer, tables.cells, suspicion, findings
        ),
        method=method_record(answer),
    )


def _ingested(inputs: PeriodInputs, days: tuple[date, ...], engine: Engine) -> IngestedMonth:
    """The month's problem; a first pass freezes uncertainties that know no 30-day median."""
    month = ingest_month(inputs.versions, days, inputs.tag_days, inputs.records, inputs.decisions)
    if not any(recipe.provisional for recipe in month.recipes):
        return month
    first = reconcile(replace(month.problem, figures=()), engine)
    return with_references(
        month,
        {(r.measurement.name, r.measurement.period): r.reconciled for r in first.measurements},
    )


def _alarm_findings(
    days: tuple[date, ...],
    suspicion: Suspicion,
    tests: list[DayTest],
    services: Mapping[str, Collection[str]],
) -> list[Finding]:
    found = suspect_findings(
        suspicion.suspects,
        period=None,
        when=f"{days[0]:%Y-%m} to {days[-1].isoformat()}",
        services=services,
    )
    for test, day in zip(tests, days, strict=True):
        if test.reason and test.alarm is None:
            found.append(
                Finding(
                    code="day-not-tested",
                    subject="site",
                    severity=Severity.NOTE,
                    period=test.period,
                    text=f"{day.isoformat()}: the day's own readings give no test: {test.reason}.",
                )
            )
        found += suspect_findings(
            test.suspects, period=test.period, when=day.isoformat(), services=services
        )
    return found
