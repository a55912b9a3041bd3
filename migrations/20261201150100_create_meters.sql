-- pH meters and their calibrations.

CREATE TABLE meters (
    id            TEXT PRIMARY KEY,
    name          TEXT NOT NULL UNIQUE COLLATE NOCASE CHECK (length(name) BETWEEN 1 AND 80),
    kind          TEXT NOT NULL CHECK (kind IN ('bench', 'handheld', 'inline')),
    serial        TEXT,
    resolution_ph REAL NOT NULL CHECK (resolution_ph > 0),
    -- Whether the meter corrects its slope for the temperature of the sample.
    compensated   INTEGER NOT NULL CHECK (compensated IN (0, 1)),
    notes         TEXT,
    in_use        INTEGER NOT NULL CHECK (in_use IN (0, 1)),
    version       INTEGER NOT NULL
) STRICT;

-- A calibration stays as it was entered; a slip is withdrawn and done again. Slope and
-- offset are those worked out, or read off the meter, on the day.
CREATE TABLE meter_calibrations (
    id                   TEXT PRIMARY KEY,
    meter_id             TEXT NOT NULL REFERENCES meters (id),
    calibrated_at        TEXT NOT NULL,
    method               TEXT NOT NULL CHECK (method IN ('millivolts', 'ph', 'display')),
    slope_percent        REAL NOT NULL,
    offset_mv            REAL NOT NULL,
    residual_ph          REAL CHECK (residual_ph >= 0),
    -- What the meter was set to before, where its pH readings were worked back from.
    before_slope_percent REAL,
    before_offset_mv     REAL,
    notes                TEXT,
    entered_at           TEXT NOT NULL,
    entered_by           TEXT NOT NULL,
    withdrawn_at         TEXT,
    withdrawn_reason     TEXT,
    CHECK ((before_slope_percent IS NULL) = (before_offset_mv IS NULL)),
    CHECK ((withdrawn_at IS NULL) = (withdrawn_reason IS NULL))
) STRICT;
CREATE INDEX meter_calibrations_by_time ON meter_calibrations (meter_id, calibrated_at);

CREATE TABLE meter_calibration_buffers (
    calibration_id TEXT NOT NULL REFERENCES meter_calibrations (id),
    position       INTEGER NOT NULL,
    buffer         TEXT NOT NULL,
    ph             REAL NOT NULL CHECK (ph BETWEEN 0 AND 14),
    -- Whether the pH is the bottle's own instead of the table's.
    own_ph         INTEGER NOT NULL CHECK (own_ph IN (0, 1)),
    lot            TEXT,
    use_by         TEXT,
    temperature_c  REAL NOT NULL CHECK (temperature_c BETWEEN 0 AND 50),
    reading_mv     REAL,
    before_ph      REAL CHECK (before_ph BETWEEN 0 AND 14),
    after_ph       REAL CHECK (after_ph BETWEEN 0 AND 14),
    PRIMARY KEY (calibration_id, position)
) STRICT;

CREATE TRIGGER meter_calibrations_are_only_withdrawn
BEFORE UPDATE OF id, meter_id, calibrated_at, method, slope_percent, offset_mv, residual_ph,
    before_slope_percent, before_offset_mv, notes, entered_at, entered_by
ON meter_calibrations
BEGIN
    SELECT RAISE(ABORT, 'A calibration is only ever withdrawn');
END;
CREATE TRIGGER meter_calibrations_are_withdrawn_once
BEFORE UPDATE ON meter_calibrations WHEN OLD.withdrawn_at IS NOT NULL
BEGIN
    SELECT RAISE(ABORT, 'A calibration is withdrawn once');
END;
CREATE TRIGGER meter_calibrations_are_not_removed BEFORE DELETE ON meter_calibrations
BEGIN
    SELECT RAISE(ABORT, 'A calibration is only ever withdrawn');
END;
CREATE TRIGGER meter_calibration_buffers_are_not_changed BEFORE UPDATE ON meter_calibration_buffers
BEGIN
    SELECT RAISE(ABORT, 'The buffers of a calibration stay as they were entered');
END;
CREATE TRIGGER meter_calibration_buffers_are_not_removed BEFORE DELETE ON meter_calibration_buffers
BEGIN
    SELECT RAISE(ABORT, 'The buffers of a calibration stay as they were entered');
END;
