-- The shelf: salts, bases and acids, and their lots. An empty strength or assay means
-- that nobody read the label yet: the usual figures of the substance are assumed.

CREATE TABLE materials (
    id                     TEXT PRIMARY KEY,
    name                   TEXT NOT NULL UNIQUE COLLATE NOCASE CHECK (length(name) BETWEEN 1 AND 80),
    substance              TEXT NOT NULL,
    -- A liquid's strength in one of three ways, as its label prints it.
    strength_percent       REAL CHECK (strength_percent > 0 AND strength_percent <= 100),
    density_g_per_ml       REAL,
    strength_g_per_l       REAL CHECK (strength_g_per_l > 0),
    strength_meq_per_ml    REAL CHECK (strength_meq_per_ml > 0),
    chloride_percent       REAL CHECK (chloride_percent BETWEEN 0 AND 100),
    assay_percent          REAL CHECK (assay_percent > 0 AND assay_percent <= 100),
    assay_sd_percent       REAL CHECK (assay_sd_percent >= 0),
    -- Grams for a solid, millilitres for a liquid; prices per kilogram or litre.
    scale_step_g_or_ml     REAL NOT NULL CHECK (scale_step_g_or_ml > 0),
    highest_g_or_ml_per_hl REAL CHECK (highest_g_or_ml_per_hl > 0),
    price_per_kg_or_l      REAL CHECK (price_per_kg_or_l >= 0),
    into_liquor_tank       INTEGER NOT NULL CHECK (into_liquor_tank IN (0, 1)),
    into_mash              INTEGER NOT NULL CHECK (into_mash IN (0, 1)),
    into_sparge_liquor     INTEGER NOT NULL CHECK (into_sparge_liquor IN (0, 1)),
    into_kettle            INTEGER NOT NULL CHECK (into_kettle IN (0, 1)),
    avoid                  INTEGER NOT NULL CHECK (avoid IN (0, 1)),
    notes                  TEXT,
    in_use                 INTEGER NOT NULL CHECK (in_use IN (0, 1)),
    version                INTEGER NOT NULL,
    CHECK (into_liquor_tank + into_mash + into_sparge_liquor + into_kettle > 0),
    CHECK ((strength_percent IS NULL) = (density_g_per_ml IS NULL)),
    CHECK ((strength_meq_per_ml IS NULL) = (chloride_percent IS NULL)),
    CHECK ((strength_percent IS NOT NULL) + (strength_g_per_l IS NOT NULL) + (strength_meq_per_ml IS NOT NULL) <= 1),
    CHECK ((assay_percent IS NULL) = (assay_sd_percent IS NULL))
) STRICT;

CREATE TABLE material_lots (
    id                  TEXT PRIMARY KEY,
    material_id         TEXT NOT NULL REFERENCES materials (id),
    code                TEXT NOT NULL COLLATE NOCASE CHECK (length(code) BETWEEN 1 AND 60),
    received_on         TEXT,
    opened_on           TEXT,
    use_by              TEXT,
    strength_percent    REAL CHECK (strength_percent > 0 AND strength_percent <= 100),
    density_g_per_ml    REAL,
    strength_g_per_l    REAL CHECK (strength_g_per_l > 0),
    strength_meq_per_ml REAL CHECK (strength_meq_per_ml > 0),
    chloride_percent    REAL CHECK (chloride_percent BETWEEN 0 AND 100),
    assay_percent       REAL CHECK (assay_percent > 0 AND assay_percent <= 100),
    assay_sd_percent    REAL CHECK (assay_sd_percent >= 0),
    current             INTEGER NOT NULL CHECK (current IN (0, 1)),
    notes               TEXT,
    in_use              INTEGER NOT NULL CHECK (in_use IN (0, 1)),
    version             INTEGER NOT NULL,
    UNIQUE (material_id, code),
    CHECK (in_use OR NOT current),
    CHECK ((strength_percent IS NULL) = (density_g_per_ml IS NULL)),
    CHECK ((strength_meq_per_ml IS NULL) = (chloride_percent IS NULL)),
    CHECK ((strength_percent IS NOT NULL) + (strength_g_per_l IS NOT NULL) + (strength_meq_per_ml IS NOT NULL) <= 1),
    CHECK ((assay_percent IS NULL) = (assay_sd_percent IS NULL))
) STRICT;
-- The lot being weighed from: one at a time.
CREATE UNIQUE INDEX material_lots_current ON material_lots (material_id) WHERE current = 1;
