-- 0001: the book. Every table carries the site in its key; all but current_run, claim, watermark
-- and progress are append-only.
-- Times are UTC text of fixed width ending in Z; days are plant days; amounts are tonnes,
-- fractions mass fractions, u a standard uncertainty. A missing number is null, with a reason beside it.

-- Which numbered files have been applied, each recorded in the transaction that applied it.
CREATE TABLE schema_migration (
    number INTEGER NOT NULL,
    name TEXT NOT NULL,
    sha256 TEXT NOT NULL,
    applied_at TEXT NOT NULL,
    applied_by TEXT NOT NULL,
    PRIMARY KEY (number)
) STRICT, WITHOUT ROWID;

-- A version of a site's declaration as written; a balance names the digests it used.
CREATE TABLE site_version (
    site TEXT NOT NULL,
    digest TEXT NOT NULL,
    valid_from TEXT NOT NULL,
    known_at TEXT NOT NULL,
    added_by TEXT NOT NULL,
    content TEXT NOT NULL,
    PRIMARY KEY (site, digest)
) STRICT, WITHOUT ROWID;

-- What a source was asked: SQL, or name and digest of a sheet.
CREATE TABLE source_query (
    site TEXT NOT NULL,
    digest TEXT NOT NULL,
    content TEXT NOT NULL,
    first_seen TEXT NOT NULL,
    PRIMARY KEY (site, digest)
) STRICT, WITHOUT ROWID;

-- Rows as a source returned them, compressed with zlib, addressed by the SHA-256 of the uncompressed bytes.
CREATE TABLE evidence_chunk (
    site TEXT NOT NULL,
    digest TEXT NOT NULL,
    kind TEXT NOT NULL,
    subject TEXT NOT NULL,
    day TEXT NOT NULL,
    row_count INTEGER NOT NULL,
    query TEXT NOT NULL,
    first_seen TEXT NOT NULL,
    content BLOB NOT NULL,
    PRIMARY KEY (site, digest),
    FOREIGN KEY (site, query) REFERENCES source_query (site, digest)
) STRICT, WITHOUT ROWID;

-- The rows a run rests on with their chunks, one canonical line each, compressed; addressed by the SHA-256 of those lines.
CREATE TABLE evidence_manifest (
    site TEXT NOT NULL,
    digest TEXT NOT NULL,
    knowledge_cut TEXT NOT NULL,
    content BLOB NOT NULL,
    PRIMARY KEY (site, digest)
) STRICT, WITHOUT ROWID;

-- One tag's plant day of readings, integrated; the one seen last at a knowledge cut is in force. Hours; amount in the tag's unit x h.
CREATE TABLE tag_day (
    site TEXT NOT NULL,
    tag TEXT NOT NULL,
    day TEXT NOT NULL,
    first_seen TEXT NOT NULL,
    chunk TEXT NOT NULL,
    amount REAL,
    covered_hours REAL NOT NULL,
    day_hours REAL NOT NULL,
    running_hours REAL NOT NULL,
    mean REAL,
    readings INTEGER NOT NULL,
    bad INTEGER NOT NULL,
    last_known TEXT NOT NULL,
    said TEXT NOT NULL,
    PRIMARY KEY (site, tag, day, first_seen),
    FOREIGN KEY (site, chunk) REFERENCES evidence_chunk (site, digest)
) STRICT, WITHOUT ROWID;

-- An assay, ticket, survey item or event; of one natural key (document, subject, item, stage) the latest known at a cut is in force.
CREATE TABLE record (
    site TEXT NOT NULL,
    kind TEXT NOT NULL,
    document TEXT NOT NULL,
    subject TEXT NOT NULL,
    item TEXT NOT NULL,
    stage TEXT NOT NULL,
    known_at TEXT NOT NULL,
    first_seen TEXT NOT NULL,
    true_from TEXT NOT NULL,
    true_to TEXT NOT NULL,
    value REAL,
    unit TEXT NOT NULL,
    lot TEXT NOT NULL,
    extra TEXT NOT NULL,
    chunk TEXT NOT NULL,
    PRIMARY KEY (site, kind, document, subject, item, stage, known_at, first_seen),
    FOREIGN KEY (site, chunk) REFERENCES evidence_chunk (site, digest),
    CHECK (kind IN ('assay', 'ticket', 'survey', 'event'))
) STRICT, WITHOUT ROWID;

-- What changed, vanished or came back at a source after the book had it.
CREATE TABLE source_change (
    site TEXT NOT NULL,
    kind TEXT NOT NULL,
    subject TEXT NOT NULL,
    noticed_at TEXT NOT NULL,
    change TEXT NOT NULL,
    true_from TEXT NOT NULL,
    true_to TEXT NOT NULL,
    content TEXT NOT NULL,
    evidence TEXT NOT NULL,
    PRIMARY KEY (site, kind, subject, noticed_at),
    CHECK (change IN ('changed-at-source', 'vanished-at-source', 'back-at-source'))
) STRICT, WITHOUT ROWID;

-- What a person decided: set aside, corrected reading, override, setting, held figure, withdrawal, site version, reopening.
CREATE TABLE decision (
    site TEXT NOT NULL,
    decision TEXT NOT NULL,
    kind TEXT NOT NULL,
    subject TEXT NOT NULL,
    first_day TEXT,
    last_day TEXT,
    value REAL,
    reason TEXT NOT NULL,
    evidence TEXT NOT NULL,
    previews INTEGER NOT NULL,
    needs_approval INTEGER NOT NULL CHECK (needs_approval IN (0, 1)),
    made_by TEXT NOT NULL,
    made_at TEXT NOT NULL,
    PRIMARY KEY (site, decision),
    UNIQUE (site, decision, made_by)
) STRICT, WITHOUT ROWID;

-- The answer of another person to a decision, naming the digest of what was seen.
CREATE TABLE decision_approval (
    site TEXT NOT NULL,
    decision TEXT NOT NULL,
    made_by TEXT NOT NULL,
    approved_by TEXT NOT NULL,
    approved_at TEXT NOT NULL,
    digest_seen TEXT NOT NULL,
    granted INTEGER NOT NULL CHECK (granted IN (0, 1)),
    PRIMARY KEY (site, decision),
    FOREIGN KEY (site, decision, made_by) REFERENCES decision (site, decision, made_by),
    CHECK (approved_by <> made_by)
) STRICT, WITHOUT ROWID;

-- One computation; kind 'published' is unique by its data digest, other kinds are previews and re-runs.
CREATE TABLE run (
    site TEXT NOT NULL,
    run INTEGER NOT NULL,
    month TEXT NOT NULL,
    through_day TEXT NOT NULL,
    kind TEXT NOT NULL,
    revision INTEGER NOT NULL,
    data_digest TEXT NOT NULL,
    knowledge_cut TEXT NOT NULL,
    manifest TEXT NOT NULL,
    site_versions TEXT NOT NULL,
    method TEXT NOT NULL,
    summary TEXT NOT NULL,
    table_digests TEXT NOT NULL,
    result_digest TEXT NOT NULL,
    published_at TEXT NOT NULL,
    PRIMARY KEY (site, run),
    FOREIGN KEY (site, manifest) REFERENCES evidence_manifest (site, digest),
    CHECK (kind IN ('published', 'preview', 'as-known-at', 'window', 'prior-period'))
) STRICT, WITHOUT ROWID;

-- A measurement of a run with what the fit made of it, canonical units; a fraction's unit is 1.
CREATE TABLE measurement (
    site TEXT NOT NULL,
    run INTEGER NOT NULL,
    day TEXT NOT NULL,
    name TEXT NOT NULL,
    kind TEXT NOT NULL,
    stream TEXT,
    node TEXT,
    boundary TEXT,
    quantity TEXT NOT NULL,
    basis TEXT NOT NULL,
    unit TEXT NOT NULL,
    value REAL NOT NULL,
    u_random REAL,
    u REAL,
    held INTEGER NOT NULL CHECK (held IN (0, 1)),
    estimated INTEGER NOT NULL CHECK (estimated IN (0, 1)),
    reconciled REAL,
    adjustment REAL,
    standardised REAL,
    redundant INTEGER NOT NULL CHECK (redundant IN (0, 1)),
    sources TEXT NOT NULL,
    PRIMARY KEY (site, run, day, name),
    FOREIGN KEY (site, run) REFERENCES run (site, run)
) STRICT, WITHOUT ROWID;

-- A reconciled amount or fraction of a stream's day, or of a stock at a day's end (boundary 'closing') or the month's start.
CREATE TABLE estimate (
    site TEXT NOT NULL,
    run INTEGER NOT NULL,
    day TEXT NOT NULL,
    place TEXT NOT NULL,
    boundary TEXT NOT NULL,
    quantity TEXT NOT NULL,
    basis TEXT NOT NULL,
    value REAL,
    u REAL,
    determined INTEGER NOT NULL CHECK (determined IN (0, 1)),
    at_bound INTEGER NOT NULL CHECK (at_bound IN (0, 1)),
    reason TEXT NOT NULL,
    PRIMARY KEY (site, run, day, place, boundary, quantity, basis),
    FOREIGN KEY (site, run) REFERENCES run (site, run)
) STRICT, WITHOUT ROWID;

-- Offset of one draw of a shared error source.
CREATE TABLE source_offset (
    site TEXT NOT NULL,
    run INTEGER NOT NULL,
    source TEXT NOT NULL,
    draw_from TEXT NOT NULL,
    value REAL NOT NULL,
    u REAL NOT NULL,
    standardised REAL,
    PRIMARY KEY (site, run, source, draw_from),
    FOREIGN KEY (site, run) REFERENCES run (site, run)
) STRICT, WITHOUT ROWID;

-- What a check or screen found in a run, in the order found; day where it belongs to one.
CREATE TABLE finding (
    site TEXT NOT NULL,
    run INTEGER NOT NULL,
    seq INTEGER NOT NULL,
    code TEXT NOT NULL,
    subject TEXT NOT NULL,
    severity TEXT NOT NULL,
    day TEXT,
    period INTEGER,
    content TEXT NOT NULL,
    evidence TEXT NOT NULL,
    PRIMARY KEY (site, run, seq),
    FOREIGN KEY (site, run) REFERENCES run (site, run)
) STRICT, WITHOUT ROWID;

-- A published figure with its budget.
CREATE TABLE figure (
    site TEXT NOT NULL,
    run INTEGER NOT NULL,
    name TEXT NOT NULL,
    period TEXT NOT NULL,
    value REAL,
    u REAL,
    basis TEXT NOT NULL,
    budget TEXT NOT NULL,
    reason TEXT NOT NULL,
    PRIMARY KEY (site, run, name, period),
    FOREIGN KEY (site, run) REFERENCES run (site, run)
) STRICT, WITHOUT ROWID;

-- A printed cell of a metal accounting table; row and column are the stable names of the dictionary of columns.
CREATE TABLE table_cell (
    site TEXT NOT NULL,
    run INTEGER NOT NULL,
    table_name TEXT NOT NULL,
    period TEXT NOT NULL,
    row_key TEXT NOT NULL,
    column_key TEXT NOT NULL,
    value REAL,
    content TEXT,
    u REAL,
    unit TEXT NOT NULL,
    basis TEXT NOT NULL,
    reason TEXT NOT NULL,
    PRIMARY KEY (site, run, table_name, period, row_key, column_key),
    FOREIGN KEY (site, run) REFERENCES run (site, run)
) STRICT, WITHOUT ROWID;

-- A stock at the end of a run's last day as the measured chain states it [t]: the next month's opening, with booked lines.
CREATE TABLE closing_stock (
    site TEXT NOT NULL,
    run INTEGER NOT NULL,
    node TEXT NOT NULL,
    quantity TEXT NOT NULL,
    value REAL,
    u REAL,
    basis TEXT NOT NULL,
    booked REAL NOT NULL,
    PRIMARY KEY (site, run, node, quantity),
    FOREIGN KEY (site, run) REFERENCES run (site, run)
) STRICT, WITHOUT ROWID;

-- A leaf of a run's month that the year to date of later months adds [t].
CREATE TABLE year_leaf (
    site TEXT NOT NULL,
    run INTEGER NOT NULL,
    month TEXT NOT NULL,
    table_name TEXT NOT NULL,
    row_key TEXT NOT NULL,
    column_key TEXT NOT NULL,
    value REAL NOT NULL,
    PRIMARY KEY (site, run, month, table_name, row_key, column_key),
    FOREIGN KEY (site, run) REFERENCES run (site, run)
) STRICT, WITHOUT ROWID;

-- A step of a month: draft, reviewed, approved, closed, reopened.
CREATE TABLE closing_event (
    site TEXT NOT NULL,
    month TEXT NOT NULL,
    seq INTEGER NOT NULL,
    state TEXT NOT NULL,
    run INTEGER,
    knowledge_cut TEXT,
    digest_seen TEXT NOT NULL,
    by_person TEXT NOT NULL,
    at TEXT NOT NULL,
    content TEXT NOT NULL,
    PRIMARY KEY (site, month, seq),
    CHECK (state IN ('draft', 'reviewed', 'approved', 'closed', 'reopened'))
) STRICT, WITHOUT ROWID;

-- Late data booked in an open month; the four numbers are per component, in tonnes.
CREATE TABLE prior_period_adjustment (
    site TEXT NOT NULL,
    booked_month TEXT NOT NULL,
    seq INTEGER NOT NULL,
    component TEXT NOT NULL,
    first_month TEXT NOT NULL,
    last_month TEXT NOT NULL,
    item TEXT NOT NULL,
    class TEXT NOT NULL,
    delta_opening REAL NOT NULL,
    delta_net_in REAL NOT NULL,
    delta_closing REAL NOT NULL,
    delta_unaccounted REAL NOT NULL,
    named_by TEXT NOT NULL,
    content TEXT NOT NULL,
    PRIMARY KEY (site, booked_month, seq, component),
    CHECK (class IN ('estimate', 'error', 'software'))
) STRICT, WITHOUT ROWID;

-- A statement or workbook as issued, byte for byte.
CREATE TABLE document (
    site TEXT NOT NULL,
    month TEXT NOT NULL,
    name TEXT NOT NULL,
    digest TEXT NOT NULL,
    content BLOB NOT NULL,
    issued_at TEXT NOT NULL,
    PRIMARY KEY (site, month, name, digest)
) STRICT, WITHOUT ROWID;

-- The audit chain of a site: each hash covers the entry before; seq has no gap.
CREATE TABLE audit_entry (
    site TEXT NOT NULL,
    seq INTEGER NOT NULL,
    at TEXT NOT NULL,
    actor TEXT NOT NULL,
    action TEXT NOT NULL,
    subject TEXT NOT NULL,
    body BLOB NOT NULL,
    prev_hash TEXT NOT NULL,
    hash TEXT NOT NULL,
    PRIMARY KEY (site, seq)
) STRICT, WITHOUT ROWID;

-- Which run speaks for a month through a day; moved by the publisher only, each move is an audit entry.
CREATE TABLE current_run (
    site TEXT NOT NULL,
    month TEXT NOT NULL,
    through_day TEXT NOT NULL,
    run INTEGER NOT NULL,
    knowledge_cut TEXT NOT NULL,
    moved_at TEXT NOT NULL,
    PRIMARY KEY (site, month, through_day),
    FOREIGN KEY (site, run) REFERENCES run (site, run)
) STRICT, WITHOUT ROWID;

-- Who computes a month through a day; the token fences off everybody before.
CREATE TABLE claim (
    site TEXT NOT NULL,
    month TEXT NOT NULL,
    through_day TEXT NOT NULL,
    owner TEXT NOT NULL,
    token INTEGER NOT NULL,
    data_digest TEXT NOT NULL,
    knowledge_cut TEXT NOT NULL,
    lease_until TEXT NOT NULL,
    done INTEGER NOT NULL CHECK (done IN (0, 1)),
    PRIMARY KEY (site, month, through_day)
) STRICT, WITHOUT ROWID;

-- How far each source has been read, by the time its rows became known.
CREATE TABLE watermark (
    site TEXT NOT NULL,
    source TEXT NOT NULL,
    known_through TEXT NOT NULL,
    fingerprint TEXT NOT NULL,
    read_at TEXT NOT NULL,
    PRIMARY KEY (site, source)
) STRICT, WITHOUT ROWID;

-- What long work is doing now.
CREATE TABLE progress (
    site TEXT NOT NULL,
    work TEXT NOT NULL,
    done INTEGER NOT NULL,
    total INTEGER NOT NULL,
    message TEXT NOT NULL,
    at TEXT NOT NULL,
    PRIMARY KEY (site, work)
) STRICT, WITHOUT ROWID;

-- One published run a month, day and data digest.
CREATE UNIQUE INDEX run_published ON run (site, month, through_day, data_digest) WHERE kind = 'published';

-- Records of a span of time.
CREATE INDEX record_span ON record (site, kind, true_from);

-- Tag days of a span of days.
CREATE INDEX tag_day_span ON tag_day (site, day);

-- Append-only. The insert triggers close the way round through INSERT OR REPLACE, which deletes unseen
-- where recursive_triggers is off; tables without rowid close the same way by rowid.
CREATE TRIGGER schema_migration_no_update BEFORE UPDATE ON schema_migration
BEGIN SELECT RAISE(ABORT, 'schema_migration is append-only'); END;
CREATE TRIGGER schema_migration_no_delete BEFORE DELETE ON schema_migration
BEGIN SELECT RAISE(ABORT, 'schema_migration is append-only'); END;
CREATE TRIGGER schema_migration_no_replace BEFORE INSERT ON schema_migration
WHEN EXISTS (SELECT 1 FROM schema_migration WHERE number = NEW.number)
BEGIN SELECT RAISE(ABORT, 'schema_migration already holds this key'); END;
CREATE TRIGGER site_version_no_update BEFORE UPDATE ON site_version
BEGIN SELECT RAISE(ABORT, 'site_version is append-only'); END;
CREATE TRIGGER site_version_no_delete BEFORE DELETE ON site_version
BEGIN SELECT RAISE(ABORT, 'site_version is append-only'); END;
CREATE TRIGGER site_version_no_replace BEFORE INSERT ON site_version
WHEN EXISTS (SELECT 1 FROM site_version WHERE site = NEW.site AND digest = NEW.digest)
BEGIN SELECT RAISE(ABORT, 'site_version already holds this key'); END;
CREATE TRIGGER source_query_no_update BEFORE UPDATE ON source_query
BEGIN SELECT RAISE(ABORT, 'source_query is append-only'); END;
CREATE TRIGGER source_query_no_delete BEFORE DELETE ON source_query
BEGIN SELECT RAISE(ABORT, 'source_query is append-only'); END;
CREATE TRIGGER source_query_no_replace BEFORE INSERT ON source_query
WHEN EXISTS (SELECT 1 FROM source_query WHERE site = NEW.site AND digest = NEW.digest)
BEGIN SELECT RAISE(ABORT, 'source_query already holds this key'); END;
CREATE TRIGGER evidence_chunk_no_update BEFORE UPDATE ON evidence_chunk
BEGIN SELECT RAISE(ABORT, 'evidence_chunk is append-only'); END;
CREATE TRIGGER evidence_chunk_no_delete BEFORE DELETE ON evidence_chunk
BEGIN SELECT RAISE(ABORT, 'evidence_chunk is append-only'); END;
CREATE TRIGGER evidence_chunk_no_replace BEFORE INSERT ON evidence_chunk
WHEN EXISTS (SELECT 1 FROM evidence_chunk WHERE site = NEW.site AND digest = NEW.digest)
BEGIN SELECT RAISE(ABORT, 'evidence_chunk already holds this key'); END;
CREATE TRIGGER evidence_manifest_no_update BEFORE UPDATE ON evidence_manifest
BEGIN SELECT RAISE(ABORT, 'evidence_manifest is append-only'); END;
CREATE TRIGGER evidence_manifest_no_delete BEFORE DELETE ON evidence_manifest
BEGIN SELECT RAISE(ABORT, 'evidence_manifest is append-only'); END;
CREATE TRIGGER evidence_manifest_no_replace BEFORE INSERT ON evidence_manifest
WHEN EXISTS (SELECT 1 FROM evidence_manifest WHERE site = NEW.site AND digest = NEW.digest)
BEGIN SELECT RAISE(ABORT, 'evidence_manifest already holds this key'); END;
CREATE TRIGGER tag_day_no_update BEFORE UPDATE ON tag_day
BEGIN SELECT RAISE(ABORT, 'tag_day is append-only'); END;
CREATE TRIGGER tag_day_no_delete BEFORE DELETE ON tag_day
BEGIN SELECT RAISE(ABORT, 'tag_day is append-only'); END;
CREATE TRIGGER tag_day_no_replace BEFORE INSERT ON tag_day
WHEN EXISTS (SELECT 1 FROM tag_day WHERE site = NEW.site AND tag = NEW.tag AND day = NEW.day AND first_seen = NEW.first_seen)
BEGIN SELECT RAISE(ABORT, 'tag_day already holds this key'); END;
CREATE TRIGGER record_no_update BEFORE UPDATE ON record
BEGIN SELECT RAISE(ABORT, 'record is append-only'); END;
CREATE TRIGGER record_no_delete BEFORE DELETE ON record
BEGIN SELECT RAISE(ABORT, 'record is append-only'); END;
CREATE TRIGGER record_no_replace BEFORE INSERT ON record
WHEN EXISTS (SELECT 1 FROM record WHERE site = NEW.site AND kind = NEW.kind AND document = NEW.document AND subject = NEW.subject AND item = NEW.item AND stage = NEW.stage AND known_at = NEW.known_at AND first_seen = NEW.first_seen)
BEGIN SELECT RAISE(ABORT, 'record already holds this key'); END;
CREATE TRIGGER source_change_no_update BEFORE UPDATE ON source_change
BEGIN SELECT RAISE(ABORT, 'source_change is append-only'); END;
CREATE TRIGGER source_change_no_delete BEFORE DELETE ON source_change
BEGIN SELECT RAISE(ABORT, 'source_change is append-only'); END;
CREATE TRIGGER source_change_no_replace BEFORE INSERT ON source_change
WHEN EXISTS (SELECT 1 FROM source_change WHERE site = NEW.site AND kind = NEW.kind AND subject = NEW.subject AND noticed_at = NEW.noticed_at)
BEGIN SELECT RAISE(ABORT, 'source_change already holds this key'); END;
CREATE TRIGGER decision_no_update BEFORE UPDATE ON decision
BEGIN SELECT RAISE(ABORT, 'decision is append-only'); END;
CREATE TRIGGER decision_no_delete BEFORE DELETE ON decision
BEGIN SELECT RAISE(ABORT, 'decision is append-only'); END;
CREATE TRIGGER decision_no_replace BEFORE INSERT ON decision
WHEN EXISTS (SELECT 1 FROM decision WHERE site = NEW.site AND decision = NEW.decision)
BEGIN SELECT RAISE(ABORT, 'decision already holds this key'); END;
CREATE TRIGGER decision_approval_no_update BEFORE UPDATE ON decision_approval
BEGIN SELECT RAISE(ABORT, 'decision_approval is append-only'); END;
CREATE TRIGGER decision_approval_no_delete BEFORE DELETE ON decision_approval
BEGIN SELECT RAISE(ABORT, 'decision_approval is append-only'); END;
CREATE TRIGGER decision_approval_no_replace BEFORE INSERT ON decision_approval
WHEN EXISTS (SELECT 1 FROM decision_approval WHERE site = NEW.site AND decision = NEW.decision)
BEGIN SELECT RAISE(ABORT, 'decision_approval already holds this key'); END;
CREATE TRIGGER run_no_update BEFORE UPDATE ON run
BEGIN SELECT RAISE(ABORT, 'run is append-only'); END;
CREATE TRIGGER run_no_delete BEFORE DELETE ON run
BEGIN SELECT RAISE(ABORT, 'run is append-only'); END;
CREATE TRIGGER run_no_replace BEFORE INSERT ON run
WHEN EXISTS (SELECT 1 FROM run WHERE site = NEW.site AND run = NEW.run)
OR (NEW.kind = 'published' AND EXISTS (SELECT 1 FROM run WHERE kind = 'published' AND site = NEW.site
    AND month = NEW.month AND through_day = NEW.through_day AND data_digest = NEW.data_digest))
BEGIN SELECT RAISE(ABORT, 'run already holds this key'); END;
CREATE TRIGGER measurement_no_update BEFORE UPDATE ON measurement
BEGIN SELECT RAISE(ABORT, 'measurement is append-only'); END;
CREATE TRIGGER measurement_no_delete BEFORE DELETE ON measurement
BEGIN SELECT RAISE(ABORT, 'measurement is append-only'); END;
CREATE TRIGGER measurement_no_replace BEFORE INSERT ON measurement
WHEN EXISTS (SELECT 1 FROM measurement WHERE site = NEW.site AND run = NEW.run AND day = NEW.day AND name = NEW.name)
BEGIN SELECT RAISE(ABORT, 'measurement already holds this key'); END;
CREATE TRIGGER estimate_no_update BEFORE UPDATE ON estimate
BEGIN SELECT RAISE(ABORT, 'estimate is append-only'); END;
CREATE TRIGGER estimate_no_delete BEFORE DELETE ON estimate
BEGIN SELECT RAISE(ABORT, 'estimate is append-only'); END;
CREATE TRIGGER estimate_no_replace BEFORE INSERT ON estimate
WHEN EXISTS (SELECT 1 FROM estimate WHERE site = NEW.site AND run = NEW.run AND day = NEW.day AND place = NEW.place AND boundary = NEW.boundary AND quantity = NEW.quantity AND basis = NEW.basis)
BEGIN SELECT RAISE(ABORT, 'estimate already holds this key'); END;
CREATE TRIGGER source_offset_no_update BEFORE UPDATE ON source_offset
BEGIN SELECT RAISE(ABORT, 'source_offset is append-only'); END;
CREATE TRIGGER source_offset_no_delete BEFORE DELETE ON source_offset
BEGIN SELECT RAISE(ABORT, 'source_offset is append-only'); END;
CREATE TRIGGER source_offset_no_replace BEFORE INSERT ON source_offset
WHEN EXISTS (SELECT 1 FROM source_offset WHERE site = NEW.site AND run = NEW.run AND source = NEW.source AND draw_from = NEW.draw_from)
BEGIN SELECT RAISE(ABORT, 'source_offset already holds this key'); END;
CREATE TRIGGER finding_no_update BEFORE UPDATE ON finding
BEGIN SELECT RAISE(ABORT, 'finding is append-only'); END;
CREATE TRIGGER finding_no_delete BEFORE DELETE ON finding
BEGIN SELECT RAISE(ABORT, 'finding is append-only'); END;
CREATE TRIGGER finding_no_replace BEFORE INSERT ON finding
WHEN EXISTS (SELECT 1 FROM finding WHERE site = NEW.site AND run = NEW.run AND seq = NEW.seq)
BEGIN SELECT RAISE(ABORT, 'finding already holds this key'); END;
CREATE TRIGGER figure_no_update BEFORE UPDATE ON figure
BEGIN SELECT RAISE(ABORT, 'figure is append-only'); END;
CREATE TRIGGER figure_no_delete BEFORE DELETE ON figure
BEGIN SELECT RAISE(ABORT, 'figure is append-only'); END;
CREATE TRIGGER figure_no_replace BEFORE INSERT ON figure
WHEN EXISTS (SELECT 1 FROM figure WHERE site = NEW.site AND run = NEW.run AND name = NEW.name AND period = NEW.period)
BEGIN SELECT RAISE(ABORT, 'figure already holds this key'); END;
CREATE TRIGGER table_cell_no_update BEFORE UPDATE ON table_cell
BEGIN SELECT RAISE(ABORT, 'table_cell is append-only'); END;
CREATE TRIGGER table_cell_no_delete BEFORE DELETE ON table_cell
BEGIN SELECT RAISE(ABORT, 'table_cell is append-only'); END;
CREATE TRIGGER table_cell_no_replace BEFORE INSERT ON table_cell
WHEN EXISTS (SELECT 1 FROM table_cell WHERE site = NEW.site AND run = NEW.run AND table_name = NEW.table_name AND period = NEW.period AND row_key = NEW.row_key AND column_key = NEW.column_key)
BEGIN SELECT RAISE(ABORT, 'table_cell already holds this key'); END;
CREATE TRIGGER closing_stock_no_update BEFORE UPDATE ON closing_stock
BEGIN SELECT RAISE(ABORT, 'closing_stock is append-only'); END;
CREATE TRIGGER closing_stock_no_delete BEFORE DELETE ON closing_stock
BEGIN SELECT RAISE(ABORT, 'closing_stock is append-only'); END;
CREATE TRIGGER closing_stock_no_replace BEFORE INSERT ON closing_stock
WHEN EXISTS (SELECT 1 FROM closing_stock WHERE site = NEW.site AND run = NEW.run AND node = NEW.node AND quantity = NEW.quantity)
BEGIN SELECT RAISE(ABORT, 'closing_stock already holds this key'); END;
CREATE TRIGGER year_leaf_no_update BEFORE UPDATE ON year_leaf
BEGIN SELECT RAISE(ABORT, 'year_leaf is append-only'); END;
CREATE TRIGGER year_leaf_no_delete BEFORE DELETE ON year_leaf
BEGIN SELECT RAISE(ABORT, 'year_leaf is append-only'); END;
CREATE TRIGGER year_leaf_no_replace BEFORE INSERT ON year_leaf
WHEN EXISTS (SELECT 1 FROM year_leaf WHERE site = NEW.site AND run = NEW.run AND month = NEW.month AND table_name = NEW.table_name AND row_key = NEW.row_key AND column_key = NEW.column_key)
BEGIN SELECT RAISE(ABORT, 'year_leaf already holds this key'); END;
CREATE TRIGGER closing_event_no_update BEFORE UPDATE ON closing_event
BEGIN SELECT RAISE(ABORT, 'closing_event is append-only'); END;
CREATE TRIGGER closing_event_no_delete BEFORE DELETE ON closing_event
BEGIN SELECT RAISE(ABORT, 'closing_event is append-only'); END;
CREATE TRIGGER closing_event_no_replace BEFORE INSERT ON closing_event
WHEN EXISTS (SELECT 1 FROM closing_event WHERE site = NEW.site AND month = NEW.month AND seq = NEW.seq)
BEGIN SELECT RAISE(ABORT, 'closing_event already holds this key'); END;
CREATE TRIGGER prior_period_adjustment_no_update BEFORE UPDATE ON prior_period_adjustment
BEGIN SELECT RAISE(ABORT, 'prior_period_adjustment is append-only'); END;
CREATE TRIGGER prior_period_adjustment_no_delete BEFORE DELETE ON prior_period_adjustment
BEGIN SELECT RAISE(ABORT, 'prior_period_adjustment is append-only'); END;
CREATE TRIGGER prior_period_adjustment_no_replace BEFORE INSERT ON prior_period_adjustment
WHEN EXISTS (SELECT 1 FROM prior_period_adjustment WHERE site = NEW.site AND booked_month = NEW.booked_month AND seq = NEW.seq AND component = NEW.component)
BEGIN SELECT RAISE(ABORT, 'prior_period_adjustment already holds this key'); END;
CREATE TRIGGER document_no_update BEFORE UPDATE ON document
BEGIN SELECT RAISE(ABORT, 'document is append-only'); END;
CREATE TRIGGER document_no_delete BEFORE DELETE ON document
BEGIN SELECT RAISE(ABORT, 'document is append-only'); END;
CREATE TRIGGER document_no_replace BEFORE INSERT ON document
WHEN EXISTS (SELECT 1 FROM document WHERE site = NEW.site AND month = NEW.month AND name = NEW.name AND digest = NEW.digest)
BEGIN SELECT RAISE(ABORT, 'document already holds this key'); END;
CREATE TRIGGER audit_entry_no_update BEFORE UPDATE ON audit_entry
BEGIN SELECT RAISE(ABORT, 'audit_entry is append-only'); END;
CREATE TRIGGER audit_entry_no_delete BEFORE DELETE ON audit_entry
BEGIN SELECT RAISE(ABORT, 'audit_entry is append-only'); END;
CREATE TRIGGER audit_entry_no_replace BEFORE INSERT ON audit_entry
WHEN EXISTS (SELECT 1 FROM audit_entry WHERE site = NEW.site AND seq = NEW.seq)
BEGIN SELECT RAISE(ABORT, 'audit_entry already holds this key'); END;
