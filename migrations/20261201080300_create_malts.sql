-- Malts, their lots and what the bench says of a lot. Where a figure is empty, the
-- class of the malt tells what to assume.

CREATE TABLE malts (
    id                     TEXT PRIMARY KEY,
    name                   TEXT NOT NULL UNIQUE COLLATE NOCASE CHECK (length(name) BETWEEN 1 AND 80),
    class                  TEXT NOT NULL,
    colour_ebc             REAL CHECK (colour_ebc >= 0),
    supplier               TEXT,
    distilled_ph           REAL,
    distilled_ph_sd        REAL CHECK (distilled_ph_sd > 0),
    relative_buffering     REAL CHECK (relative_buffering > 0),
    relative_buffering_sd  REAL CHECK (relative_buffering_sd > 0),
    lactic_percent         REAL CHECK (lactic_percent > 0),
    lactic_sd_percent      REAL CHECK (lactic_sd_percent >= 0),
    a1_meq_per_kg_ph       REAL CHECK (a1_meq_per_kg_ph < 0),
    a2_meq_per_kg_ph2      REAL,
    a3_meq_per_kg_ph3      REAL,
    coefficient_sd_percent REAL CHECK (coefficient_sd_percent >= 0),
    notes                  TEXT,
    in_use                 INTEGER NOT NULL CHECK (in_use IN (0, 1)),
    version                INTEGER NOT NULL,
    CHECK ((distilled_ph IS NULL) = (distilled_ph_sd IS NULL)),
    CHECK ((relative_buffering IS NULL) = (relative_buffering_sd IS NULL)),
    CHECK ((lactic_percent IS NULL) = (lactic_sd_percent IS NULL)),
    CHECK ((a1_meq_per_kg_ph IS NULL) = (a2_meq_per_kg_ph2 IS NULL)),
    CHECK ((a1_meq_per_kg_ph IS NULL) = (a3_meq_per_kg_ph3 IS NULL)),
    CHECK ((a1_meq_per_kg_ph IS NULL) = (coefficient_sd_percent IS NULL)),
    CHECK (a1_meq_per_kg_ph IS NULL OR distilled_ph IS NOT NULL)
) STRICT;

CREATE TABLE malt_lots (
    id                TEXT PRIMARY KEY,
    malt_id           TEXT NOT NULL REFERENCES malts (id),
    code              TEXT NOT NULL COLLATE NOCASE CHECK (length(code) BETWEEN 1 AND 60),
    received_on       TEXT,
    wort_ph           REAL,
    lactic_percent    REAL CHECK (lactic_percent > 0),
    lactic_sd_percent REAL CHECK (lactic_sd_percent >= 0),
    current           INTEGER NOT NULL CHECK (current IN (0, 1)),
    notes             TEXT,
    in_use            INTEGER NOT NULL CHECK (in_use IN (0, 1)),
    version           INTEGER NOT NULL,
    UNIQUE (malt_id, code),
    CHECK (in_use OR NOT current),
    CHECK ((lactic_percent IS NULL) = (lactic_sd_percent IS NULL))
) STRICT;
-- The lot being mashed from: one at a time.
CREATE UNIQUE INDEX malt_lots_current ON malt_lots (malt_id) WHERE current = 1;

-- A bench titration stays as it was typed; a slip is withdrawn and done again.
CREATE TABLE malt_titrations (
    id               TEXT PRIMARY KEY,
    malt_lot_id      TEXT NOT NULL REFERENCES malt_lots (id),
    tested_on        TEXT NOT NULL,
    malt_g           REAL NOT NULL CHECK (malt_g > 0),
    acid_meq_per_ml  REAL CHECK (acid_meq_per_ml > 0),
    base_meq_per_ml  REAL CHECK (base_meq_per_ml > 0),
    notes            TEXT,
    entered_at       TEXT NOT NULL,
    entered_by       TEXT NOT NULL,
    withdrawn_at     TEXT,
    withdrawn_reason TEXT,
    CHECK ((withdrawn_at IS NULL) = (withdrawn_reason IS NULL))
) STRICT;
CREATE INDEX malt_titrations_by_lot ON malt_titrations (malt_lot_id);

CREATE TABLE malt_titration_jars (
    titration_id  TEXT NOT NULL REFERENCES malt_titrations (id),
    position      INTEGER NOT NULL,
    acid_ml       REAL NOT NULL CHECK (acid_ml >= 0),
    base_ml       REAL NOT NULL CHECK (base_ml >= 0),
    ph            REAL NOT NULL,
    acid_ml_typed TEXT NOT NULL,
    base_ml_typed TEXT NOT NULL,
    ph_typed      TEXT NOT NULL,
    PRIMARY KEY (titration_id, position)
) STRICT;

CREATE TRIGGER malt_titrations_are_only_withdrawn
BEFORE UPDATE OF id, malt_lot_id, tested_on, malt_g, acid_meq_per_ml, base_meq_per_ml, notes, entered_at, entered_by
ON malt_titrations
BEGIN
    SELECT RAISE(ABORT, 'A titration is only ever withdrawn');
END;
CREATE TRIGGER malt_titrations_are_not_removed BEFORE DELETE ON malt_titrations
BEGIN
    SELECT RAISE(ABORT, 'A titration is only ever withdrawn');
END;
CREATE TRIGGER malt_titration_jars_are_not_changed BEFORE UPDATE ON malt_titration_jars
BEGIN
    SELECT RAISE(ABORT, 'The jars of a titration stay as they were typed');
END;
CREATE TRIGGER malt_titration_jars_are_not_removed BEFORE DELETE ON malt_titration_jars
BEGIN
    SELECT RAISE(ABORT, 'The jars of a titration stay as they were typed');
END;
