-- Every run ever made, current or not.
CREATE VIEW report_runs AS
SELECT r.site, r.run, r.month, r.through_day, r.kind, r.revision, r.knowledge_cut, r.published_at, r.data_digest, r.result_digest, r.method, r.summary,
    CASE WHEN c.run IS NULL THEN 'no' ELSE 'yes' END AS is_current
FROM run r
LEFT JOIN current_run c ON c.site = r.site AND c.month = r.month AND c.through_day = r.through_day AND c.run = r.run;

-- What persons decided, and who answered.
CREATE VIEW report_decisions AS
SELECT d.site, d.decision, d.kind, d.subject, d.first_day, d.last_day, d.value, d.reason, d.evidence, d.previews, d.made_by, d.made_at, d.needs_approval, a.approved_by, a.approved_at, a.granted
FROM decision d
LEFT JOIN decision_approval a ON a.site = d.site AND a.decision = d.decision;

-- The audit chain without the bodies; `recon verify` checks it.
CREATE VIEW report_audit AS
SELECT site, seq, at, actor, action, subject, prev_hash, hash
FROM audit_entry;
