-- Alarms of stations, how showings of a unit lie to each other, and what that makes of the
-- roll-ups. Forward only.

-- +goose Up
CREATE TABLE IF NOT EXISTS alarms (
    id         BIGINT NOT NULL PRIMARY KEY,
    name       TEXT NOT NULL,
    line       TEXT NOT NULL,
    station    TEXT NOT NULL,
    view       TEXT NOT NULL,
    x_px       DOUBLE PRECISION NOT NULL,
    y_px       DOUBLE PRECISION NOT NULL,
    units      TEXT NOT NULL,   -- JSON: ids, oldest first
    detail     TEXT NOT NULL,
    raised_by  BIGINT NOT NULL, -- inspection
    raised_us  BIGINT NOT NULL,
    cleared_by BIGINT NOT NULL, -- inspection; 0 = it is open
    cleared_us BIGINT NOT NULL
);
CREATE INDEX IF NOT EXISTS alarms_place ON alarms (line, station, raised_us);
CREATE INDEX IF NOT EXISTS alarms_open ON alarms (line, station) WHERE cleared_us = 0;

-- A showing held against the one before it.
CREATE TABLE IF NOT EXISTS registrations (
    inspection_id     BIGINT NOT NULL PRIMARY KEY REFERENCES inspections (id),
    previous_id       BIGINT NOT NULL,
    body              TEXT NOT NULL, -- JSON
    permanent_verdict TEXT NOT NULL, -- of the unit's first showing, by its permanent defects alone
    permanent_reasons TEXT NOT NULL, -- JSON: names
    at_us             BIGINT NOT NULL
);
CREATE INDEX IF NOT EXISTS inspections_again ON inspections (counted_us, id) WHERE attempt > 1;

ALTER TABLE rollup_verdicts ADD COLUMN permanent BIGINT NOT NULL DEFAULT 0;
ALTER TABLE rollup_reasons ADD COLUMN removable BIGINT NOT NULL DEFAULT 0;
INSERT INTO dirty_buckets (bucket_us, mark)
    SELECT DISTINCT bucket_us, 3 FROM rollup_verdicts WHERE true
    ON CONFLICT (bucket_us) DO UPDATE SET mark = excluded.mark;
