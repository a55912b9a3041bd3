-- Beers: grist, volumes, spec. A beer that history refers to is retired, never removed.

CREATE TABLE beers (
    id                       TEXT PRIMARY KEY,
    name                     TEXT NOT NULL COLLATE NOCASE UNIQUE CHECK (length(name) BETWEEN 1 AND 80),
    batch_l                  REAL NOT NULL CHECK (batch_l > 0),
    mash_l                   REAL NOT NULL CHECK (mash_l > 0),
    sparge_l                 REAL NOT NULL CHECK (sparge_l >= 0),
    mash_ph_target           REAL NOT NULL,
    mash_ph_low              REAL NOT NULL CHECK (mash_ph_low <= mash_ph_target),
    mash_ph_high             REAL NOT NULL CHECK (mash_ph_high >= mash_ph_target),
    highest_lactate_mg_per_l REAL CHECK (highest_lactate_mg_per_l >= 0),
    highest_sodium_mg_per_l  REAL CHECK (highest_sodium_mg_per_l >= 0),
    notes                    TEXT,
    in_use                   INTEGER NOT NULL CHECK (in_use IN (0, 1)),
    version                  INTEGER NOT NULL
) STRICT;

CREATE TABLE beer_grist (
    beer_id   TEXT NOT NULL REFERENCES beers (id),
    position  INTEGER NOT NULL,
    malt_id   TEXT NOT NULL REFERENCES malts (id),
    kilograms REAL NOT NULL CHECK (kilograms > 0),
    PRIMARY KEY (beer_id, position),
    UNIQUE (beer_id, malt_id)
) STRICT;
CREATE INDEX beer_grist_by_malt ON beer_grist (malt_id);

-- One row for each figure of the spec that has a window. `figure` carries its unit.
CREATE TABLE beer_windows (
    beer_id   TEXT NOT NULL REFERENCES beers (id),
    figure    TEXT NOT NULL CHECK (figure IN (
        'calcium_mg_per_l', 'magnesium_mg_per_l', 'sodium_mg_per_l', 'potassium_mg_per_l',
        'sulfate_mg_per_l', 'chloride_mg_per_l', 'nitrate_mg_per_l',
        'mash_calcium_mg_per_l', 'sulfate_to_chloride', 'sparge_alkalinity_mg_per_l_as_caco3')),
    low       REAL CHECK (low >= 0),
    high      REAL CHECK (high >= 0),
    preferred REAL CHECK (preferred >= 0),
    priority  TEXT NOT NULL CHECK (priority IN ('high', 'middle', 'low')),
    PRIMARY KEY (beer_id, figure),
    CHECK (low IS NULL OR high IS NULL OR low <= high)
) STRICT;
