-- Where water comes from, and what was found in it.

CREATE TABLE sources (
    id                 TEXT PRIMARY KEY,
    name               TEXT NOT NULL COLLATE NOCASE UNIQUE CHECK (length(name) BETWEEN 1 AND 80),
    kind               TEXT NOT NULL CHECK (kind IN ('mains', 'borehole', 'surface', 'permeate', 'other')),
    blending           INTEGER NOT NULL CHECK (blending IN (0, 1)),
    price_per_m3       REAL CHECK (price_per_m3 BETWEEN 0 AND 10000),
    days_between_tests INTEGER NOT NULL CHECK (days_between_tests BETWEEN 1 AND 3650),
    notes              TEXT NOT NULL,
    in_use             INTEGER NOT NULL CHECK (in_use IN (0, 1)),
    version            INTEGER NOT NULL
) STRICT;

-- One sample of one source. Nothing is deleted: a test that should not count is
-- withdrawn, or kept without being trusted, each with its reason.
CREATE TABLE water_tests (
    id                     TEXT PRIMARY KEY,
    source_id              TEXT NOT NULL REFERENCES sources (id),
    sampled_on             TEXT NOT NULL CHECK (sampled_on GLOB '[0-9][0-9][0-9][0-9]-[0-9][0-9]-[0-9][0-9]'),
    laboratory             TEXT NOT NULL,
    reference              TEXT NOT NULL,
    sample_kind            TEXT NOT NULL CHECK (sample_kind IN ('single_sample', 'average')),
    ph_temperature_celsius REAL,
    notes                  TEXT NOT NULL,
    trust                  TEXT NOT NULL CHECK (trust IN ('trusted', 'trusted_despite', 'does_not_add_up', 'excluded')),
    trust_reason           TEXT CHECK ((trust_reason IS NOT NULL) = (trust IN ('trusted_despite', 'excluded'))),
    withdrawn_at           TEXT,
    withdrawn_reason       TEXT CHECK ((withdrawn_reason IS NULL) = (withdrawn_at IS NULL)),
    entered_at             TEXT NOT NULL,
    version                INTEGER NOT NULL
) STRICT;
CREATE INDEX water_tests_by_source ON water_tests (source_id, sampled_on DESC, id DESC);

-- The lines as the report printed them. `number` is what the typed text was
-- understood as, in the printed unit; figures in mg/L are always worked out again.
CREATE TABLE water_test_readings (
    water_test_id         TEXT NOT NULL REFERENCES water_tests (id),
    line                  INTEGER NOT NULL CHECK (line >= 0),
    analyte               TEXT NOT NULL,
    typed                 TEXT NOT NULL CHECK (length(typed) BETWEEN 1 AND 40),
    number                REAL NOT NULL CHECK (number >= 0),
    qualifier             TEXT NOT NULL CHECK (qualifier IN ('measured', 'below')),
    unit                  TEXT NOT NULL,
    method                TEXT NOT NULL CHECK (method IN ('laboratory', 'drop_kit', 'photometer', 'meter')),
    drop_mg_per_l_as_caco3 REAL CHECK ((drop_mg_per_l_as_caco3 IS NOT NULL) = (method = 'drop_kit')),
    PRIMARY KEY (water_test_id, line),
    UNIQUE (water_test_id, analyte)
) STRICT;

-- What was worked out from the lines and accepted by somebody.
CREATE TABLE water_test_inferences (
    water_test_id TEXT NOT NULL REFERENCES water_tests (id),
    analyte       TEXT NOT NULL,
    kind          TEXT NOT NULL,
    PRIMARY KEY (water_test_id, analyte)
) STRICT;
