-- 0001: the book. Every table carries the site in its key; all but claim, watermark, progress and
-- current_run are append-only. Times are UTC; days are plant days; values are tonnes or fractions.

-- A version of a site's declaration; a balance names the digests it used.
CREATE TABLE site_version (
    site text NOT NULL,
    digest text NOT NULL,
    valid_from date NOT NULL,
    known_at timestamptz NOT NULL,
    added_by text NOT NULL,
    content text NOT NULL,
    PRIMARY KEY (site, digest)
);

-- Rows as returned by a source, compressed, addressed by the digest of their canonical bytes.
CREATE TABLE evidence_chunk (
    site text NOT NULL,
    digest text NOT NULL,
    kind text NOT NULL,
    subject text NOT NULL,
    day date NOT NULL,
    row_count bigint NOT NULL,
    query_digest text NOT NULL,
    first_seen timestamptz NOT NULL,
    content bytea NOT NULL,
    PRIMARY KEY (site, digest)
);

-- The chunks in force at a knowledge cut; addressed by its digest.
CREATE TABLE evidence_manifest (
    site text NOT NULL,
    digest text NOT NULL,
    knowledge_cut timestamptz NOT NULL,
    content bytea NOT NULL,
    PRIMARY KEY (site, digest)
);

-- One row in force: a record of a source, or one tag's day of readings (value = amount or mean, chunk = its rows).
CREATE TABLE input_row (
    site text NOT NULL,
    kind text NOT NULL,
    natural_key text NOT NULL,
    known_at timestamptz NOT NULL,
    true_from timestamptz NOT NULL,
    true_to timestamptz NOT NULL,
    first_seen timestamptz NOT NULL,
    value double precision,
    unit text NOT NULL,
    stage text NOT NULL,
    chunk text NOT NULL,
    PRIMARY KEY (site, kind, natural_key, known_at, chunk)
);

-- What a person decided: set aside, corrected reading, override, setting, held figure, site version, reopening.
CREATE TABLE decision (
    site text NOT NULL,
    decision text NOT NULL,
    kind text NOT NULL,
    subject text NOT NULL,
    true_from timestamptz,
    true_to timestamptz,
    content text NOT NULL,
    reason text NOT NULL,
    evidence text NOT NULL,
    previews bigint NOT NULL,
    made_by text NOT NULL,
    made_at timestamptz NOT NULL,
    PRIMARY KEY (site, decision)
);

-- Approval of a decision by another person, naming the digest of what was seen.
CREATE TABLE decision_approval (
    site text NOT NULL,
    decision text NOT NULL,
    approved_by text NOT NULL,
    approved_at timestamptz NOT NULL,
    digest_seen text NOT NULL,
    granted boolean NOT NULL,
    PRIMARY KEY (site, decision, approved_by),
    FOREIGN KEY (site, decision) REFERENCES decision (site, decision)
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
    result_digest text NOT NULL,
    summary text NOT NULL,
    published_at timestamptz NOT NULL,
    PRIMARY KEY (site, run),
    CHECK (kind IN ('published', 'preview', 'as-known-at', 'window', 'prior-period'))
);

-- A measurement of a run with what the fit made of it, canonical units.
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

-- What a check or screen found in a run.
CREATE TABLE finding (
    site text NOT NULL,
    run bigint NOT NULL,
    seq bigint NOT NULL,
    code text NOT NULL,
    subject text NOT NULL,
    day date,
    severity text NOT NULL,
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

-- Which run speaks for a month through a day; moved by the publisher only, each move is an audit entry.
CREATE TABLE current_run (
    site text NOT NULL,
    month date NOT NULL,
    through_day date NOT NULL,
    run bigint NOT NULL,
    moved_at timestamptz NOT NULL,
    PRIMARY KEY (site, month, through_day),
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
    PRIMARY KEY (site, booked_month, seq, component)
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

-- Who computes a month through a day; the token fences off everybody before.
CREATE TABLE claim (
    site text NOT NULL,
    month date NOT NULL,
    through_day date NOT NULL,
    owner text NOT NULL,
    token bigint NOT NULL,
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

-- Append-only, also against TRUNCATE and against a session that plays replica.
CREATE FUNCTION refuse_change() RETURNS trigger LANGUAGE plpgsql AS $$
BEGIN
    RAISE EXCEPTION '% is append-only', TG_TABLE_NAME;
END
$$;
CREATE TRIGGER site_version_no_change BEFORE UPDATE OR DELETE ON site_version
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER site_version_no_truncate BEFORE TRUNCATE ON site_version
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE site_version ENABLE ALWAYS TRIGGER site_version_no_change;
ALTER TABLE site_version ENABLE ALWAYS TRIGGER site_version_no_truncate;
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
CREATE TRIGGER input_row_no_change BEFORE UPDATE OR DELETE ON input_row
    FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER input_row_no_truncate BEFORE TRUNCATE ON input_row
    FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
ALTER TABLE input_row ENABLE ALWAYS TRIGGER input_row_no_change;
ALTER TABLE input_row ENABLE ALWAYS TRIGGER input_row_no_truncate;
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
