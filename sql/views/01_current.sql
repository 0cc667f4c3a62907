-- The run that speaks for each month now: the one of its latest day. One row a site and month.
CREATE VIEW report_current AS
SELECT c.site, c.month, c.through_day, c.run, r.revision, r.knowledge_cut, r.published_at, r.data_digest, r.result_digest
FROM current_run c
JOIN run r ON r.site = c.site AND r.run = c.run
WHERE c.through_day = (SELECT max(l.through_day) FROM current_run l WHERE l.site = c.site AND l.month = c.month);

-- Every printed cell of every current statement; table_name, row_key and column_key are stable names.
CREATE VIEW report_cells AS
SELECT c.site, c.month, c.through_day, c.run, t.table_name, t.period, t.row_key, t.column_key, t.value, t.content, t.u, t.unit, t.basis, t.reason
FROM report_current c
JOIN table_cell t ON t.site = c.site AND t.run = c.run;
