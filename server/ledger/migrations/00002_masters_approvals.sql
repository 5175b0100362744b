-- Masters and what hangs on them, approvals of recipes, and retests in the roll-ups. The
-- tables are append-only. Forward only.

-- +goose Up
CREATE TABLE IF NOT EXISTS master_checks (
    inspection_id BIGINT NOT NULL PRIMARY KEY REFERENCES inspections (id),
    part       TEXT NOT NULL,
    surface    TEXT NOT NULL,
    line       TEXT NOT NULL,
    station    TEXT NOT NULL,
    master     TEXT NOT NULL,    -- its unit id
    view       TEXT NOT NULL,    -- what it proves; may be empty for a conforming one
    kind       TEXT NOT NULL,
    expected   TEXT NOT NULL,    -- accept or reject
    verdict    TEXT NOT NULL,
    result     TEXT NOT NULL,    -- pass, fail or void
    why        TEXT NOT NULL,
    measure    TEXT NOT NULL,
    value      DOUBLE PRECISION, -- NULL = the defect was not found
    low        DOUBLE PRECISION, -- NULL = no bound
    high       DOUBLE PRECISION,
    recipe     TEXT NOT NULL,
    conditions TEXT NOT NULL,    -- JSON: calibration, lamp and lens by view
    at_us      BIGINT NOT NULL,  -- when it was judged
    counted_us BIGINT NOT NULL
);
CREATE INDEX IF NOT EXISTS master_checks_place
    ON master_checks (part, surface, line, station, master, result, at_us);
CREATE INDEX IF NOT EXISTS master_checks_at ON master_checks (at_us);

CREATE TABLE IF NOT EXISTS suspects (
    inspection_id BIGINT NOT NULL REFERENCES inspections (id),
    master        TEXT NOT NULL,
    cause         TEXT NOT NULL, -- failed or overdue
    why           TEXT NOT NULL,
    at_us         BIGINT NOT NULL,
    PRIMARY KEY (inspection_id, master, cause)
);
CREATE INDEX IF NOT EXISTS suspects_at ON suspects (at_us, inspection_id);
CREATE INDEX IF NOT EXISTS inspections_station ON inspections (line, station, judged_us);

CREATE TABLE IF NOT EXISTS station_changes (
    id      BIGINT NOT NULL PRIMARY KEY,
    line    TEXT NOT NULL,
    station TEXT NOT NULL,
    what    TEXT NOT NULL, -- lamp, lens or camera
    person  TEXT NOT NULL,
    reason  TEXT NOT NULL,
    at_us   BIGINT NOT NULL
);
CREATE INDEX IF NOT EXISTS station_changes_place ON station_changes (line, station, at_us);

CREATE TABLE IF NOT EXISTS approvals (
    id        BIGINT NOT NULL PRIMARY KEY,
    hash      TEXT NOT NULL REFERENCES recipes (hash),
    author    TEXT NOT NULL,
    approver  TEXT NOT NULL,
    reason    TEXT NOT NULL,
    effective TEXT NOT NULL, -- now or next_lot
    at_us     BIGINT NOT NULL
);
CREATE INDEX IF NOT EXISTS approvals_hash ON approvals (hash);

-- Units whose first attempt had the row's verdict and that a later attempt accepted.
ALTER TABLE rollup_verdicts ADD COLUMN retest_accepts BIGINT NOT NULL DEFAULT 0;
INSERT INTO dirty_buckets (bucket_us, mark)
    SELECT DISTINCT bucket_us, 2 FROM rollup_verdicts WHERE true
    ON CONFLICT (bucket_us) DO UPDATE SET mark = excluded.mark;
