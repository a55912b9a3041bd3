-- Plans: one row per revision of the treatment of one batch.

CREATE TABLE plans (
    id              TEXT PRIMARY KEY,
    batch           TEXT NOT NULL CHECK (length(batch) BETWEEN 1 AND 40),
    revision        INTEGER NOT NULL CHECK (revision >= 1),
    replaces        TEXT REFERENCES plans (id),
    beer_id         TEXT NOT NULL REFERENCES beers (id),
    beer_name       TEXT NOT NULL,
    brewed_on       TEXT NOT NULL,
    state           TEXT NOT NULL CHECK (state IN ('draft', 'approved', 'dosed', 'closed', 'withdrawn')),
    -- Everything the predictions follow from, as the body of a preview: a draft
    -- reads it anew when asked to, an approval freezes it.
    inputs          TEXT NOT NULL CHECK (json_valid(inputs)),
    inputs_read_at  TEXT NOT NULL,
    way             TEXT NOT NULL CHECK (way IN ('closest_to_preferred', 'fewest_additions', 'least_blending_water', 'cheapest', 'by_hand')),
    shares          TEXT NOT NULL CHECK (json_valid(shares)),
    created_at      TEXT NOT NULL,
    created_by      TEXT NOT NULL,
    approved_at     TEXT,
    approved_by     TEXT,
    approval_reason TEXT,
    prediction      TEXT CHECK (prediction IS NULL OR json_valid(prediction)),
    withdrawn_at    TEXT,
    withdrawn_by    TEXT,
    withdrawal_reason TEXT,
    closed_at       TEXT,
    closed_by       TEXT,
    closing_note    TEXT,
    outcome         TEXT CHECK (outcome IS NULL OR json_valid(outcome)),
    version         INTEGER NOT NULL,
    UNIQUE (batch, revision),
    CHECK (state NOT IN ('approved', 'dosed', 'closed') OR (approved_at IS NOT NULL AND prediction IS NOT NULL)),
    CHECK (state <> 'withdrawn' OR withdrawal_reason IS NOT NULL),
    CHECK (state <> 'closed' OR outcome IS NOT NULL)
) STRICT;
CREATE INDEX plans_by_state ON plans (state, brewed_on);
CREATE INDEX plans_by_beer ON plans (beer_id, brewed_on);
-- Two people cannot begin two next revisions of one plan.
CREATE UNIQUE INDEX plans_by_replaced ON plans (replaces) WHERE state <> 'withdrawn';

-- Frozen means frozen: once approved, inputs stay as they are.
CREATE TRIGGER approved_inputs_are_not_changed BEFORE UPDATE OF inputs, shares ON plans
WHEN OLD.state IN ('approved', 'dosed', 'closed') AND NEW.state <> 'draft'
     AND (NEW.inputs IS NOT OLD.inputs OR NEW.shares IS NOT OLD.shares)
BEGIN
    SELECT RAISE(ABORT, 'The inputs of an approved plan are frozen');
END;

-- Each dose: what was planned, and what went in.
CREATE TABLE doses (
    id           TEXT PRIMARY KEY,
    plan_id      TEXT NOT NULL REFERENCES plans (id),
    position     INTEGER NOT NULL,
    vessel       TEXT NOT NULL CHECK (vessel IN ('liquor_tank', 'mash', 'sparge_liquor', 'kettle')),
    -- Its place on the shelf that is frozen in the plan's inputs.
    material     INTEGER NOT NULL CHECK (material >= 0),
    planned      REAL NOT NULL CHECK (planned >= 0),
    -- The mash check whose first step this is; absent for the plan's own doses.
    mash_check_id TEXT REFERENCES mash_checks (id),
    actual       REAL CHECK (actual IS NULL OR actual >= 0),
    lot          TEXT,
    weighed_at   TEXT,
    weighed_by   TEXT,
    CHECK ((actual IS NULL) = (weighed_at IS NULL)),
    UNIQUE (plan_id, position)
) STRICT;

CREATE TABLE mash_checks (
    id            TEXT PRIMARY KEY,
    plan_id       TEXT NOT NULL REFERENCES plans (id),
    stage         TEXT NOT NULL,
    read_at       TEXT NOT NULL,
    minute        REAL NOT NULL,
    ph            REAL NOT NULL,
    sample_c      REAL NOT NULL,
    meter         TEXT NOT NULL,
    meter_sd      REAL NOT NULL,
    meter_checked INTEGER NOT NULL CHECK (meter_checked IN (0, 1)),
    -- What was advised, as it was shown.
    assessment    TEXT NOT NULL CHECK (json_valid(assessment)),
    full_dose     REAL,
    read_by       TEXT NOT NULL,
    withdrawn_at  TEXT,
    withdrawn_by  TEXT,
    withdrawal_reason TEXT
) STRICT;
CREATE INDEX mash_checks_by_plan ON mash_checks (plan_id, read_at);
