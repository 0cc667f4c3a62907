-- Every measurement of the current runs with what the fit made of it, canonical units (t; fractions in 1).
CREATE VIEW report_measurements AS
SELECT c.site, c.month, c.through_day, c.run, m.day, m.name, m.kind, m.stream, m.node, m.boundary, m.quantity, m.basis, m.unit, m.value, m.u, m.reconciled, m.adjustment, m.standardised, m.redundant, m.held, m.estimated
FROM report_current c
JOIN measurement m ON m.site = c.site AND m.run = c.run;

-- Every reconciled amount, fraction and stock of the current runs; no value where it cannot be found, with the reason.
CREATE VIEW report_estimates AS
SELECT c.site, c.month, c.through_day, c.run, e.day, e.place, e.boundary, e.quantity, e.basis, e.value, e.u, e.determined, e.at_bound, e.reason
FROM report_current c
JOIN estimate e ON e.site = c.site AND e.run = c.run;

-- Published figures with their budgets (JSON, largest share first).
CREATE VIEW report_figures AS
SELECT c.site, c.month, c.through_day, c.run, f.name, f.period, f.value, f.u, f.basis, f.budget, f.reason
FROM report_current c
JOIN figure f ON f.site = c.site AND f.run = c.run;

-- What checks and screens found in the current runs.
CREATE VIEW report_findings AS
SELECT c.site, c.month, c.through_day, c.run, f.seq, f.day, f.severity, f.code, f.subject, f.content, f.evidence
FROM report_current c
JOIN finding f ON f.site = c.site AND f.run = c.run;

-- What changed, vanished or came back at the plant's sources after the book had it.
CREATE VIEW report_source_changes AS
SELECT site, kind, subject, noticed_at, change, true_from, true_to, content, evidence
FROM source_change;
