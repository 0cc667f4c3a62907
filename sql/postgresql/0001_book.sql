-- 0001: the book. Every table carries the site in its key; all but current_run, claim, watermark
-- and progress are append-only.
-- Times are UTC; days are plant days; amounts are tonnes,
-- fractions mass fractions, u a standard uncertainty. A missing number is null, with a reason beside it.

-- Which numbered files have been applied, each recorded in the transaction that applied it.
CREATE TABLE schema_migration (
    number bigint NOT NULL,
    name text NOT NULL,
    sha256 text NOT NULL,
    applied_at timestamptz NOT NULL,
    applied_by text NOT NULL,
    PRIMARY KEY (number)
);

-- A version of a site's declaration as written; a balance names the digests it used.
CREATE TABLE site_version (
    site text NOT NULL,
    digest text NOT NULL,
    valid_from date NOT NULL,
    known_at timestamptz NOT NULL,
    added_by text NOT NULL,
    content text NOT NULL,
    PRIMARY KEY (site, digest)
);

-- What a source was asked: SQL, or name and digest of a sheet.
CREATE TABLE source_query (
    site text NOT NULL,
    digest text NOT NULL,
    content text NOT NULL,
    first_seen timestamptz NOT NULL,
    PRIMARY KEY (site, digest)
);

-- Rows as a source returned them, compressed with zlib, addressed by the SHA-256 of the uncompressed bytes.
CREATE TABLE evidence_chunk (
    site text NOT NULL,
    digest text NOT NULL,
    kind text NOT NULL,
    subject text NOT NULL,
    day date NOT NULL,
    row_count bigint NOT NULL,
    query text NOT NULL,
    first_seen timestamptz NOT NULL,
    content bytea NOT NULL,
    PRIMARY KEY (site, digest),
    FOREIGN KEY (site, query) REFERENCES source_query (site, digest)
);

-- The rows a run rests on with their chunks, one canonical line each, compressed; addressed by the SHA-256 of those lines.
CREATE TABLE evidence_manifest (
    site text NOT NULL,
    digest text NOT NULL,
    knowledge_cut timestamptz NOT NULL,
    content bytea NOT NULL,
    PRIMARY KEY (site, digest)
);

-- One tag's plant day of readings, integrated; the one seen last at a knowledge cut is in force. Hours; amount in the tag's unit x h.
CREATE TABLE tag_day (
    site text NOT NULL,
    tag text NOT NULL,
    day date NOT NULL,
    first_seen timestamptz NOT NULL,
    chunk text NOT NULL,
    amount double precision,
    covered_hours double precision NOT NULL,
    day_hours double precision NOT NULL,
    running_hours double precision NOT NULL,
    mean double precision,
    readings bigint NOT NULL,
    bad bigint NOT NULL,
    last_known timestamptz NOT NULL,
    said text NOT NULL,
    PRIMARY KEY (site, tag, day, first_seen),
    FOREIGN KEY (site, chunk) REFERENCES evidence_chunk (site, digest)
);

-- An assay, ticket, survey item or event; of one natural key (document, subject, item, stage) the latest known at a cut is in force.
CREATE TABLE record (
    site text NOT NULL,
    kind text NOT NULL,
    document text NOT NULL,
    subject text NOT NULL,
    item text NOT NULL,
    stage text NOT NULL,
    known_at timestamptz NOT NULL,
    first_seen timestamptz NOT NULL,
    true_from timestamptz NOT NULL,
    true_to timestamptz NOT NULL,
    value double precision,
    unit text NOT NULL,
    lot text NOT NULL,
    extra text NOT NULL,
    chunk text NOT NULL,
    PRIMARY KEY (site, kind, document, subject, item, stage, known_at, first_seen),
    FOREIGN KEY (site, chunk) REFERENCES evidence_chunk (site, digest),
    CHECK (kind IN ('assay', 'ticket', 'survey', 'event'))
);

-- What changed, vanished or came back at a source after the book had it.
CREATE TABLE source_change (
    site text NOT NULL,
    kind text NOT NULL,
    subject text NOT NULL,
    noticed_at timestamptz NOT NULL,
    change text NOT NULL,
    true_from timestamptz NOT NULL,
    true_to timestamptz NOT NULL,
    content text NOT NULL,
    evidence text NOT NULL,
    PRIMARY KEY (site, kind, subject, noticed_at),
    CHECK (change IN ('changed-at-source', 'vanished-at-source', 'back-at-source'))
);

-- What a person decided: set aside, corrected reading, override, setting, held figure, withdrawal, site version, reopening.
CREATE TABLE decision (
    site text NOT NULL,
    decision text NOT NULL,
    kind text NOT NULL,
    subject text NOT NULL,
    first_day date,
    last_day date,
    value double precision,
    reason text NOT NULL,
    evidence text NOT NULL,
    previews bigint NOT NULL,
    needs_approval boolean NOT NULL,
    made_by text NOT NULL,
    made_at timestamptz NOT NULL,
    PRIMARY KEY (site, decision),
    UNIQUE (site, decision, made_by)
);

-- The answer of another person to a decision, naming the digest of what was seen.
CREATE TABLE decision_approval (
    site text NOT NULL,
    decision text NOT NULL,
    made_by text NOT NULL,
    approved_by text NOT NULL,
    approved_at timestamptz NOT NULL,
    digest_seen text NOT NULL,
    granted boolean NOT NULL,
    PRIMARY KEY (site, decision),
    FOREIGN KEY (site, decision, made_by) REFERENCES decision (site, decision, made_by),
    CHECK (approved_by <> made_by)
);

-- One computation; kind 'published' is unique by its data digest, other kinds are previews and re-runs.
CREATE TABLE run (
    site text NOT NULL,
    run bigint NOT NULL,
    month date NOT NULL,
    through_day date NOT NULL,
    kind text NOT NULL,
    revision bigint NOT NULL,
    data_digest text NOT NULL,
    knowledge_cut timestamptz NOT NULL,
    manifest text NOT NULL,
    site_versions text NOT NULL,
    method text NOT NULL,
    summary text NOT NULL,
    table_digests text NOT NULL,
    result_digest text NOT NULL,
    published_at timestamptz NOT NULL,
    PRIMARY KEY (site, run),
    FOREIGN KEY (site, manifest) REFERENCES evidence_manifest (site, digest),
    CHECK (kind IN ('published', 'preview', 'as-known-at', 'window', 'prior-period'))
);

-- A measurement of a run with what the fit made of it, canonical units; a fraction's unit is 1.
CREATE TABLE measurement (
    site text NOT NULL,
    run bigint NOT NULL,
    day date NOT NULL,
    name text NOT NULL,
    kind text NOT NULL,
    stream text,
    node text,
    boundary text,
    quantity text NOT NULL,
    basis text NOT NULL,
    unit text NOT NULL,
    value double precision NOT NULL,
    u_random double precision,
    u double precision,
    held boolean NOT NULL,
    estimated boolean NOT NULL,
    reconciled double precision,
    adjustment double precision,
    standardised double precision,
    redundant boolean NOT NULL,
    sources text NOT NULL,
    PRIMARY KEY (site, run, day, name),
    FOREIGN KEY (site, run) REFERENCES run (site, run)
);

-- A reconciled amount or fraction of a stream's day, or of a stock at a day's end (boundary 'closing') or the month's start.
CREATE TABLE estimate (
    site text NOT NULL,
    run bigint NOT NULL,
    day date NOT NULL,
    place text NOT NULL,
    boundary text NOT NULL,
    quantity text NOT NULL,
    basis text NOT NULL,
    value double precision,
    u double precision,
    determined boolean NOT NULL,
    at_bound boolean NOT NULL,
    reason text NOT NULL,
    PRIMARY KEY (site, run, day, place, boundary, quantity, basis),
    FOREIGN KEY (site, run) REFERENCES run (site, run)
);

-- Offset of one draw of a shared error source.
CREATE TABLE source_offset (
    site text NOT NULL,
    run bigint NOT NULL,
    source text NOT NULL,
    draw_from date NOT NULL,
    value double precision NOT NULL,
    u double precision NOT NULL,
    standardised double precision,
    PRIMARY KEY (site, run, source, draw_from),
    FOREIGN KEY (site, run) REFERENCES run (site, run)
);

-- What a check or screen found in a run, in the order found; day where it belongs to one.
CREATE TABLE finding (
    site text NOT NULL,
    run bigint NOT NULL,
    seq bigint NOT NULL,
    code text NOT NULL,
    subject text NOT NULL,
    severity text NOT NULL,
    day date,
    period bigint,
    content text NOT NULL,
    evidence text NOT NULL,
    PRIMARY KEY (site, run, seq),
    FOREIGN KEY (site, run) REFERENCES run (site, run)
);

-- A published figure with its budget.
CREATE TABLE figure (
    site text NOT NULL,
    run bigint NOT NULL,
    name text NOT NULL,
    period text NOT NULL,
    value double precision,
    u double precision,
    basis text NOT NULL,
    budget text NOT NULL,
    reason text NOT NULL,
    PRIMARY KEY (site, run, name, period),
    FOREIGN KEY (site, run) REFERENCES run (site, run)
);

-- A printed cell of a metal accounting table; row and column are the stable names of the dictionary of columns.
CREATE TABLE table_cell (
    site text NOT NULL,
    run bigint NOT NULL,
    table_name text NOT NULL,
    period text NOT NULL,
    row_key text NOT NULL,
    column_key text NOT NULL,
    value double precision,
    content text,
    u double precision,
    unit text NOT NULL,
    basis text NOT NULL,
    reason text NOT NULL,
    PRIMARY KEY (site, run, table_name, period, row_key, column_key),
    FOREIGN KEY (site, run) REFERENCES run (site, run)
);

-- A stock at the end of a run's last day as the measured chain states it [t]: the next month's opening, with booked lines.
CREATE TABLE closing_stock (
    site text NOT NULL,
    run bigint NOT NULL,
    node text NOT NULL,
    quantity text NOT NULL,
    value double precision,
    u double precision,
    basis text NOT NULL,
    booked double precision NOT NULL,
    PRIMARY KEY (site, run, node, quantity),
    FOREIGN KEY (site, run) REFERENCES run (site, run)
);

-- A leaf of a run's month that the year to date of later months adds [t].
CREATE TABLE year_leaf (
    site text NOT NULL,
    run bigint NOT NULL,
    month text NOT NULL,
    table_name text NOT NULL,
    row_key text NOT NULL,
    column_key text NOT NULL,
    value double precision NOT NULL,
    PRIMARY KEY (site, run, month, table_name, row_key, column_key),
    FOREIGN KEY (site, run) REFERENCES run (site, run)
);

-- A step of a month: draft, reviewed, approved, closed, reopened.
CREATE TABLE closing_event (
    site text NOT NULL,
    month date NOT NULL,
    seq bigint NOT NULL,
    state text NOT NULL,
    run bigint,
    knowledge_cut timestamptz,
    digest_seen text NOT NULL,
    by_person text NOT NULL,
    at timestamptz NOT NULL,
    content text NOT NULL,
    PRIMARY KEY (site, month, seq),
    CHECK (state IN ('draft', 'reviewed', 'approved', 'closed', 'reopened'))
);

-- Late data booked in an open month; the four numbers are per component, in tonnes.
CREATE TABLE prior_period_adjustment (
    site text NOT NULL,
    booked_month date NOT NULL,
    seq bigint NOT NULL,
    component text NOT NULL,
    first_month date NOT NULL,
    last_month date NOT NULL,
    item text NOT NULL,
    class text NOT NULL,
    delta_opening double precision NOT NULL,
    delta_net_in double precision NOT NULL,
    delta_closing double precision NOT NULL,
    delta_unaccounted double precision NOT NULL,
    named_by text NOT NULL,
    content text NOT NULL,
    PRIMARY KEY (site, booked_month, seq, component),
    CHECK (class IN ('estimate', 'error', 'software'))
);

-- A statement or workbook as issued, byte for byte.
CREATE TABLE document (
    site text NOT NULL,
    month date NOT NULL,
    name text NOT NULL,
    digest text NOT NULL,
    content bytea NOT NULL,
    issued_at timestamptz NOT NULL,
    PRIMARY KEY (site, month, name, digest)
);

-- The audit chain of a site: each hash covers the entry before; seq has no gap.
CREATE TABLE audit_entry (
    site text NOT NULL,
    seq bigint NOT NULL,
    at timestamptz NOT NULL,
    actor text NOT NULL,
    action text NOT NULL,
    subject text NOT NULL,
    body bytea NOT NULL,
    prev_hash text NOT NULL,
    hash text NOT NULL,
    PRIMARY KEY (site, seq)
);

-- Which run speaks for a month through a day; moved by the publisher only, each move is an audit entry.
CREATE TABLE current_run (
    site text NOT NULL,
    month date NOT NULL,
    through_day date NOT NULL,
    run bigint NOT NULL,
    knowledge_cut timestamptz NOT NULL,
    moved_at timestamptz NOT NULL,
    PRIMARY KEY (site, month, through_day),
    FOREIGN KEY (site, run) REFERENCES run (site, run)
);

-- Who computes a month through a day; the token fences off everybody before.
CREATE TABLE claim (
    site text NOT NULL,
    month date NOT NULL,
    through_day date NOT NULL,
    owner text NOT NULL,
    token bigint NOT NULL,
    data_digest text NOT NULL,
    knowledge_cut timestamptz NOT NULL,
    lease_until timestamptz NOT NULL,
    done boolean NOT NULL,
    PRIMARY KEY (site, month, through_day)
);

-- How far each source has been read, by the time its rows became known.
CREATE TABLE watermark (
    site text NOT NULL,
    source text NOT NULL,
    known_through timestamptz NOT NULL,
    fingerprint text NOT NULL,
    read_at timestamptz NOT NULL,
    PRIMARY KEY (site, source)
);

-- What long work is doing now.
CREATE TABLE progress (
    site text NOT NULL,
    work text NOT NULL,
    done bigint NOT NULL,
    total bigint NOT NULL,
    message text NOT NULL,
    at timestamptz NOT NULL,
    PRIMARY KEY (site, work)
);

-- One published run a month, day and data digest.
CREATE UNIQUE INDEX run_published ON run (site, month, through_day, data_digest) WHERE kind = 'published';

-- Records of a span of time.
CREATE INDEX record_span ON record (site, kind, true_from);

-- Tag days of a span of days.
CREATE INDEX tag_day_span ON tag_day (site, day);

-- Append-only, also against TRUNCATE and against a session that plays replica (ENABLE ALWAYS).
CREATE FUNCTION refuse_change() RETURNS trigger LANGUAGE plpgsql AS $$
BEGIN
    RAISE EXCEPTION '% is append-only', TG_TABLE_NAME USING ERRCODE = 'restrict_violation';
END
$$;
CREATE TRIGGER schema_migration_no_change BEFORE UPDATE OR DELETE ON schema_migration
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER schema_migration_no_truncate BEFORE TRUNCATE ON schema_migration
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE schema_migration ENABLE ALWAYS TRIGGER schema_migration_no_change;
ALTER TABLE schema_migration ENABLE ALWAYS TRIGGER schema_migration_no_truncate;
CREATE TRIGGER site_version_no_change BEFORE UPDATE OR DELETE ON site_version
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER site_version_no_truncate BEFORE TRUNCATE ON site_version
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE site_version ENABLE ALWAYS TRIGGER site_version_no_change;
ALTER TABLE site_version ENABLE ALWAYS TRIGGER site_version_no_truncate;
CREATE TRIGGER source_query_no_change BEFORE UPDATE OR DELETE ON source_query
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER source_query_no_truncate BEFORE TRUNCATE ON source_query
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE source_query ENABLE ALWAYS TRIGGER source_query_no_change;
ALTER TABLE source_query ENABLE ALWAYS TRIGGER source_query_no_truncate;
CREATE TRIGGER evidence_chunk_no_change BEFORE UPDATE OR DELETE ON evidence_chunk
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER evidence_chunk_no_truncate BEFORE TRUNCATE ON evidence_chunk
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE evidence_chunk ENABLE ALWAYS TRIGGER evidence_chunk_no_change;
ALTER TABLE evidence_chunk ENABLE ALWAYS TRIGGER evidence_chunk_no_truncate;
CREATE TRIGGER evidence_manifest_no_change BEFORE UPDATE OR DELETE ON evidence_manifest
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER evidence_manifest_no_truncate BEFORE TRUNCATE ON evidence_manifest
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE evidence_manifest ENABLE ALWAYS TRIGGER evidence_manifest_no_change;
ALTER TABLE evidence_manifest ENABLE ALWAYS TRIGGER evidence_manifest_no_truncate;
CREATE TRIGGER tag_day_no_change BEFORE UPDATE OR DELETE ON tag_day
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER tag_day_no_truncate BEFORE TRUNCATE ON tag_day
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE tag_day ENABLE ALWAYS TRIGGER tag_day_no_change;
ALTER TABLE tag_day ENABLE ALWAYS TRIGGER tag_day_no_truncate;
CREATE TRIGGER record_no_change BEFORE UPDATE OR DELETE ON record
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER record_no_truncate BEFORE TRUNCATE ON record
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE record ENABLE ALWAYS TRIGGER record_no_change;
ALTER TABLE record ENABLE ALWAYS TRIGGER record_no_truncate;
CREATE TRIGGER source_change_no_change BEFORE UPDATE OR DELETE ON source_change
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER source_change_no_truncate BEFORE TRUNCATE ON source_change
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE source_change ENABLE ALWAYS TRIGGER source_change_no_change;
ALTER TABLE source_change ENABLE ALWAYS TRIGGER source_change_no_truncate;
CREATE TRIGGER decision_no_change BEFORE UPDATE OR DELETE ON decision
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER decision_no_truncate BEFORE TRUNCATE ON decision
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE decision ENABLE ALWAYS TRIGGER decision_no_change;
ALTER TABLE decision ENABLE ALWAYS TRIGGER decision_no_truncate;
CREATE TRIGGER decision_approval_no_change BEFORE UPDATE OR DELETE ON decision_approval
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER decision_approval_no_truncate BEFORE TRUNCATE ON decision_approval
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE decision_approval ENABLE ALWAYS TRIGGER decision_approval_no_change;
ALTER TABLE decision_approval ENABLE ALWAYS TRIGGER decision_approval_no_truncate;
CREATE TRIGGER run_no_change BEFORE UPDATE OR DELETE ON run
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER run_no_truncate BEFORE TRUNCATE ON run
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE run ENABLE ALWAYS TRIGGER run_no_change;
ALTER TABLE run ENABLE ALWAYS TRIGGER run_no_truncate;
CREATE TRIGGER measurement_no_change BEFORE UPDATE OR DELETE ON measurement
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER measurement_no_truncate BEFORE TRUNCATE ON measurement
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE measurement ENABLE ALWAYS TRIGGER measurement_no_change;
ALTER TABLE measurement ENABLE ALWAYS TRIGGER measurement_no_truncate;
CREATE TRIGGER estimate_no_change BEFORE UPDATE OR DELETE ON estimate
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER estimate_no_truncate BEFORE TRUNCATE ON estimate
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE estimate ENABLE ALWAYS TRIGGER estimate_no_change;
ALTER TABLE estimate ENABLE ALWAYS TRIGGER estimate_no_truncate;
CREATE TRIGGER source_offset_no_change BEFORE UPDATE OR DELETE ON source_offset
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER source_offset_no_truncate BEFORE TRUNCATE ON source_offset
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE source_offset ENABLE ALWAYS TRIGGER source_offset_no_change;
ALTER TABLE source_offset ENABLE ALWAYS TRIGGER source_offset_no_truncate;
CREATE TRIGGER finding_no_change BEFORE UPDATE OR DELETE ON finding
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER finding_no_truncate BEFORE TRUNCATE ON finding
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE finding ENABLE ALWAYS TRIGGER finding_no_change;
ALTER TABLE finding ENABLE ALWAYS TRIGGER finding_no_truncate;
CREATE TRIGGER figure_no_change BEFORE UPDATE OR DELETE ON figure
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER figure_no_truncate BEFORE TRUNCATE ON figure
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE figure ENABLE ALWAYS TRIGGER figure_no_change;
ALTER TABLE figure ENABLE ALWAYS TRIGGER figure_no_truncate;
CREATE TRIGGER table_cell_no_change BEFORE UPDATE OR DELETE ON table_cell
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER table_cell_no_truncate BEFORE TRUNCATE ON table_cell
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE table_cell ENABLE ALWAYS TRIGGER table_cell_no_change;
ALTER TABLE table_cell ENABLE ALWAYS TRIGGER table_cell_no_truncate;
CREATE TRIGGER closing_stock_no_change BEFORE UPDATE OR DELETE ON closing_stock
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER closing_stock_no_truncate BEFORE TRUNCATE ON closing_stock
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE closing_stock ENABLE ALWAYS TRIGGER closing_stock_no_change;
ALTER TABLE closing_stock ENABLE ALWAYS TRIGGER closing_stock_no_truncate;
CREATE TRIGGER year_leaf_no_change BEFORE UPDATE OR DELETE ON year_leaf
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER year_leaf_no_truncate BEFORE TRUNCATE ON year_leaf
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE year_leaf ENABLE ALWAYS TRIGGER year_leaf_no_change;
ALTER TABLE year_leaf ENABLE ALWAYS TRIGGER year_leaf_no_truncate;
CREATE TRIGGER closing_event_no_change BEFORE UPDATE OR DELETE ON closing_event
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER closing_event_no_truncate BEFORE TRUNCATE ON closing_event
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE closing_event ENABLE ALWAYS TRIGGER closing_event_no_change;
ALTER TABLE closing_event ENABLE ALWAYS TRIGGER closing_event_no_truncate;
CREATE TRIGGER prior_period_adjustment_no_change BEFORE UPDATE OR DELETE ON prior_period_adjustment
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER prior_period_adjustment_no_truncate BEFORE TRUNCATE ON prior_period_adjustment
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE prior_period_adjustment ENABLE ALWAYS TRIGGER prior_period_adjustment_no_change;
ALTER TABLE prior_period_adjustment ENABLE ALWAYS TRIGGER prior_period_adjustment_no_truncate;
CREATE TRIGGER document_no_change BEFORE UPDATE OR DELETE ON document
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER document_no_truncate BEFORE TRUNCATE ON document
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE document ENABLE ALWAYS TRIGGER document_no_change;
ALTER TABLE document ENABLE ALWAYS TRIGGER document_no_truncate;
CREATE TRIGGER audit_entry_no_change BEFORE UPDATE OR DELETE ON audit_entry
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER audit_entry_no_truncate BEFORE TRUNCATE ON audit_entry
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE audit_entry ENABLE ALWAYS TRIGGER audit_entry_no_change;
ALTER TABLE audit_entry ENABLE ALWAYS TRIGGER audit_entry_no_truncate;
