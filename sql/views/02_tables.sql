-- Boundary balance of each component with its unaccounted, day, month and year to date.
CREATE VIEW report_site_balance AS
SELECT site, month, through_day, run, period, row_key, column_key, value, content, u, unit, basis, reason
FROM report_cells
WHERE table_name = 'site-balance';

-- The same for each section of the site.
CREATE VIEW report_section_balance AS
SELECT site, month, through_day, run, period, row_key, column_key, value, content, u, unit, basis, reason
FROM report_cells
WHERE table_name = 'section-balance';

-- Unaccounted from as read over each approved correction to as stated.
CREATE VIEW report_unaccounted_bridge AS
SELECT site, month, through_day, run, period, row_key, column_key, value, content, u, unit, basis, reason
FROM report_cells
WHERE table_name = 'unaccounted-bridge';

-- Streams: as measured and fitted.
CREATE VIEW report_streams AS
SELECT site, month, through_day, run, period, row_key, column_key, value, content, u, unit, basis, reason
FROM report_cells
WHERE table_name = 'streams';

-- Each instrument's reading against what the fit made of it, as printed.
CREATE VIEW report_measured_reconciled AS
SELECT site, month, through_day, run, period, row_key, column_key, value, content, u, unit, basis, reason
FROM report_cells
WHERE table_name = 'measured-reconciled';

-- How far each node is from closing before and after the fit.
CREATE VIEW report_node_closure AS
SELECT site, month, through_day, run, period, row_key, column_key, value, content, u, unit, basis, reason
FROM report_cells
WHERE table_name = 'node-closure';

-- Stocks: opening, closing and change, with the method.
CREATE VIEW report_stocks AS
SELECT site, month, through_day, run, period, row_key, column_key, value, content, u, unit, basis, reason
FROM report_cells
WHERE table_name = 'stocks';

-- Recoveries by each way of reckoning.
CREATE VIEW report_recoveries AS
SELECT site, month, through_day, run, period, row_key, column_key, value, content, u, unit, basis, reason
FROM report_cells
WHERE table_name = 'recoveries';
