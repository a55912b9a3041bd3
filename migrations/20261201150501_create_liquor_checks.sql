-- The alkalinity of sparge liquor, tested on the spot before it runs over the grains.

CREATE TABLE liquor_checks (
    id             TEXT PRIMARY KEY,
    plan_id        TEXT NOT NULL REFERENCES plans (id),
    checked_at     TEXT NOT NULL,
    -- As counted; absent where another test gave the alkalinity.
    drops          REAL CHECK (drops >= 0),
    mg_per_l_as_caco3_per_drop REAL CHECK (mg_per_l_as_caco3_per_drop > 0),
    alkalinity_mg_per_l_as_caco3 REAL NOT NULL,
    alkalinity_sd  REAL NOT NULL CHECK (alkalinity_sd >= 0),
    -- How much liquor was still to run.
    volume_l       REAL NOT NULL CHECK (volume_l > 0),
    -- What was advised, as it was shown.
    assessment     TEXT NOT NULL CHECK (json_valid(assessment)),
    -- The line of the weigh-out it led to. It goes when a later check overtakes it.
    dose_id        TEXT,
    checked_by     TEXT NOT NULL,
    withdrawn_at   TEXT,
    withdrawn_by   TEXT,
    withdrawal_reason TEXT,
    CHECK ((drops IS NULL) = (mg_per_l_as_caco3_per_drop IS NULL)),
    CHECK ((withdrawn_at IS NULL) = (withdrawal_reason IS NULL))
) STRICT;
CREATE INDEX liquor_checks_by_plan ON liquor_checks (plan_id, checked_at);
