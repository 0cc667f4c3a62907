-- Rights on the book's objects, made anew by every `recon database upgrade` where the roles exist.
REVOKE ALL ON ALL TABLES IN SCHEMA public FROM PUBLIC, recon_migrate, recon_job, recon_web, recon_reader;
REVOKE ALL ON ALL FUNCTIONS IN SCHEMA public FROM PUBLIC;

GRANT SELECT ON ALL TABLES IN SCHEMA public TO recon_job, recon_web;

GRANT INSERT ON
    site_version, source_query, evidence_chunk, evidence_manifest, tag_day, record, source_change,
    run, measurement, estimate, source_offset, finding, figure, table_cell, closing_stock, year_leaf,
    audit_entry, current_run, claim, watermark, progress
TO recon_job;
GRANT UPDATE ON current_run, claim, watermark, progress TO recon_job;

GRANT INSERT ON
    site_version, decision, decision_approval, closing_event, prior_period_adjustment, document, audit_entry
TO recon_web;

GRANT SELECT ON
    report_current, report_cells, report_site_balance, report_section_balance, report_unaccounted_bridge, report_streams,
    report_measured_reconciled, report_node_closure, report_stocks, report_recoveries, report_measurements, report_estimates,
    report_figures, report_findings, report_source_changes, report_runs, report_decisions, report_audit
TO recon_reader;
