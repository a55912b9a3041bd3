-- What is found out about a batch after it was closed. Its plan stays as it was closed; a
-- correction stands beside it, with what was said before.

CREATE TABLE plan_corrections (
    id              TEXT PRIMARY KEY,
    plan_id         TEXT NOT NULL REFERENCES plans (id),
    what            TEXT NOT NULL CHECK (what IN ('lot', 'amount', 'reading', 'other')),
    dose_id         TEXT REFERENCES doses (id),
    said_before     TEXT NOT NULL,
    says_now        TEXT NOT NULL CHECK (length(says_now) BETWEEN 1 AND 500),
    -- An amount as it really was, grams or millilitres; a lot, where the shelf knows it.
    amount_g_or_ml  REAL CHECK (amount_g_or_ml >= 0),
    material_lot_id TEXT REFERENCES material_lots (id),
    -- Whether the batch teaches the next prediction all the same.
    teaches         INTEGER NOT NULL CHECK (teaches IN (0, 1)),
    reason          TEXT NOT NULL CHECK (length(reason) BETWEEN 1 AND 500),
    corrected_at    TEXT NOT NULL,
    corrected_by    TEXT NOT NULL,
    CHECK ((what IN ('lot', 'amount')) = (dose_id IS NOT NULL)),
    CHECK ((what = 'amount') = (amount_g_or_ml IS NOT NULL)),
    CHECK (what = 'lot' OR material_lot_id IS NULL)
) STRICT;
CREATE INDEX plan_corrections_by_plan ON plan_corrections (plan_id, corrected_at);
CREATE INDEX plan_corrections_by_lot ON plan_corrections (material_lot_id) WHERE material_lot_id IS NOT NULL;
CREATE INDEX plan_corrections_by_dose ON plan_corrections (dose_id) WHERE dose_id IS NOT NULL;

CREATE TRIGGER plan_corrections_are_not_changed BEFORE UPDATE ON plan_corrections
BEGIN
    SELECT RAISE(ABORT, 'Corrections are append-only');
END;
CREATE TRIGGER plan_corrections_are_not_removed BEFORE DELETE ON plan_corrections
BEGIN
    SELECT RAISE(ABORT, 'Corrections are append-only');
END;
CREATE TRIGGER plan_corrections_are_not_replaced BEFORE INSERT ON plan_corrections
WHEN EXISTS (SELECT 1 FROM plan_corrections WHERE id = NEW.id)
BEGIN
    SELECT RAISE(ABORT, 'Corrections are append-only');
END;

-- What of a batch was not as planned, with the reasons, as it was closed.
ALTER TABLE plans ADD COLUMN deviations TEXT CHECK (deviations IS NULL OR json_valid(deviations));

-- Whether a later revision took a plan's place is asked of every dose that is traced.
CREATE INDEX plans_by_earlier ON plans (replaces) WHERE replaces IS NOT NULL;
