-- Types are those that SQLite and PostgreSQL-wire databases share; times are µs since
-- 1970 UTC, booleans are 0 or 1, JSON is TEXT, BYTEA is a blob (SQLite keeps a blob as it
-- is under any type name). Forward only.

-- +goose Up
CREATE TABLE IF NOT EXISTS inspections (
    id          BIGINT NOT NULL PRIMARY KEY, -- random, so that several servers need no sequence
    part        TEXT NOT NULL,
    revision    TEXT NOT NULL,
    surface     TEXT NOT NULL,
    process     TEXT NOT NULL,
    lot         TEXT NOT NULL,
    unit        TEXT NOT NULL,
    line        TEXT NOT NULL,
    station     TEXT NOT NULL,
    attempt     BIGINT NOT NULL,
    purpose     TEXT NOT NULL,
    digest      TEXT NOT NULL,
    request_id  TEXT NOT NULL,
    captured_us BIGINT NOT NULL,
    counted_us  BIGINT NOT NULL, -- the time under which the showing counts
    judged_us   BIGINT NOT NULL,
    clock       TEXT NOT NULL,   -- '', 'ahead' or 'behind'
    late        SMALLINT NOT NULL,
    verdict     TEXT NOT NULL,   -- the line's, for ever
    recipe      TEXT NOT NULL,
    latency_ms  DOUBLE PRECISION NOT NULL
);
-- The identity; its first six columns are one unit's surface at one station.
CREATE UNIQUE INDEX IF NOT EXISTS inspections_identity
    ON inspections (part, lot, unit, surface, station, purpose, attempt, line);
CREATE INDEX IF NOT EXISTS inspections_counted ON inspections (counted_us, id);
CREATE INDEX IF NOT EXISTS inspections_lot ON inspections (lot, counted_us, id);
CREATE INDEX IF NOT EXISTS inspections_unit ON inspections (unit);
CREATE INDEX IF NOT EXISTS inspections_request ON inspections (request_id) WHERE request_id <> '';
CREATE INDEX IF NOT EXISTS inspections_hold ON inspections (counted_us, id) WHERE verdict = 'hold';

CREATE TABLE IF NOT EXISTS views (
    inspection_id BIGINT NOT NULL REFERENCES inspections (id),
    ordinal       BIGINT NOT NULL,
    name          TEXT NOT NULL,
    frames        TEXT NOT NULL, -- JSON: header and image key of each frame
    calibration   TEXT NOT NULL,
    coverage      DOUBLE PRECISION NOT NULL,
    PRIMARY KEY (inspection_id, ordinal)
);

CREATE TABLE IF NOT EXISTS evidence (
    inspection_id BIGINT NOT NULL PRIMARY KEY REFERENCES inspections (id),
    body          BYTEA NOT NULL -- gzip of JSON, without the frames, which stand in views
);

CREATE TABLE IF NOT EXISTS judgements (
    inspection_id   BIGINT NOT NULL REFERENCES inspections (id),
    seq             BIGINT NOT NULL, -- 0 is the line's
    made_by         TEXT NOT NULL,
    person          TEXT NOT NULL,
    verdict         TEXT NOT NULL,
    reasons         TEXT NOT NULL, -- JSON
    recipe          TEXT NOT NULL,
    detection_hash  TEXT NOT NULL,
    judging_hash    TEXT NOT NULL,
    program_version TEXT NOT NULL,
    stage_versions  TEXT NOT NULL, -- JSON
    at_us           BIGINT NOT NULL,
    PRIMARY KEY (inspection_id, seq)
);

CREATE TABLE IF NOT EXISTS dispositions (
    inspection_id BIGINT NOT NULL PRIMARY KEY REFERENCES inspections (id),
    decision      TEXT NOT NULL,
    person        TEXT NOT NULL,
    reason        TEXT NOT NULL,
    at_us         BIGINT NOT NULL
);

CREATE TABLE IF NOT EXISTS outcomes (
    inspection_id BIGINT NOT NULL REFERENCES inspections (id),
    seq           BIGINT NOT NULL, -- the highest is the word that counts
    bin           TEXT NOT NULL,
    confirmed     SMALLINT NOT NULL,
    mismatch      SMALLINT NOT NULL, -- does not fit the verdict; neither ever changes
    at_us         BIGINT NOT NULL,
    reported_us   BIGINT NOT NULL,
    PRIMARY KEY (inspection_id, seq)
);
CREATE INDEX IF NOT EXISTS outcomes_mismatch ON outcomes (inspection_id) WHERE mismatch = 1;

CREATE TABLE IF NOT EXISTS recipes (
    hash     TEXT NOT NULL PRIMARY KEY,
    part     TEXT NOT NULL,
    revision TEXT NOT NULL,
    surface  TEXT NOT NULL,
    file     TEXT NOT NULL,
    body     TEXT NOT NULL,
    added_us BIGINT NOT NULL
);

CREATE TABLE IF NOT EXISTS calibrations (
    hash     TEXT NOT NULL PRIMARY KEY,
    camera   TEXT NOT NULL,
    light    TEXT NOT NULL,
    mode     TEXT NOT NULL,
    made_at  TEXT NOT NULL,
    body     TEXT NOT NULL,
    added_us BIGINT NOT NULL
);

CREATE TABLE IF NOT EXISTS unit_counters (
    part      TEXT NOT NULL PRIMARY KEY,
    last_unit BIGINT NOT NULL
);

-- Attempts given out and not yet recorded.
CREATE TABLE IF NOT EXISTS attempts_issued (
    part    TEXT NOT NULL,
    lot     TEXT NOT NULL,
    unit    TEXT NOT NULL,
    surface TEXT NOT NULL,
    station TEXT NOT NULL,
    purpose TEXT NOT NULL,
    attempt BIGINT NOT NULL,
    PRIMARY KEY (part, lot, unit, surface, station, purpose)
);

-- Buckets whose roll-ups no longer fit the inspections; mark changes with every change.
CREATE TABLE IF NOT EXISTS dirty_buckets (
    bucket_us BIGINT NOT NULL PRIMARY KEY,
    mark      BIGINT NOT NULL
);

CREATE TABLE IF NOT EXISTS rollup_verdicts (
    bucket_us    BIGINT NOT NULL,
    part         TEXT NOT NULL,
    surface      TEXT NOT NULL,
    process      TEXT NOT NULL,
    lot          TEXT NOT NULL,
    line         TEXT NOT NULL,
    station      TEXT NOT NULL,
    recipe       TEXT NOT NULL,
    purpose      TEXT NOT NULL,
    verdict      TEXT NOT NULL,
    showings     BIGINT NOT NULL,
    first_pass   BIGINT NOT NULL,
    final        BIGINT NOT NULL,
    attempts     BIGINT NOT NULL,
    binned       BIGINT NOT NULL,
    first_binned BIGINT NOT NULL,
    PRIMARY KEY (bucket_us, part, surface, process, lot, line, station, recipe, purpose, verdict)
);

CREATE TABLE IF NOT EXISTS rollup_reasons (
    bucket_us       BIGINT NOT NULL,
    part            TEXT NOT NULL,
    surface         TEXT NOT NULL,
    process         TEXT NOT NULL,
    lot             TEXT NOT NULL,
    line            TEXT NOT NULL,
    station         TEXT NOT NULL,
    recipe          TEXT NOT NULL,
    purpose         TEXT NOT NULL,
    verdict         TEXT NOT NULL,
    reason          TEXT NOT NULL,
    showings        BIGINT NOT NULL, -- every showing with this reason
    principal       BIGINT NOT NULL, -- showings with this reason first: they add up to the showings
    first_showings  BIGINT NOT NULL, -- the same two for first attempts only
    first_principal BIGINT NOT NULL,
    PRIMARY KEY (bucket_us, part, surface, process, lot, line, station, recipe, purpose, verdict, reason)
);
