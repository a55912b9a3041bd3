-- What came onto the shelf and what was counted there. Nothing is changed or removed: a
-- mistake is corrected by another movement that names it. How much is there is never stored:
-- it follows from the last count, what came since, and what was weighed out since.

CREATE TABLE material_movements (
    id              TEXT PRIMARY KEY,
    material_lot_id TEXT NOT NULL REFERENCES material_lots (id),
    -- A removal takes back what it corrects and puts nothing in its place.
    kind            TEXT NOT NULL CHECK (kind IN ('delivery', 'count', 'removal')),
    -- Grams for a solid, millilitres for a liquid.
    amount_g_or_ml  REAL NOT NULL CHECK (amount_g_or_ml >= 0),
    moved_at        TEXT NOT NULL,
    supplier        TEXT CHECK (length(supplier) BETWEEN 1 AND 120),
    delivery_note   TEXT CHECK (length(delivery_note) BETWEEN 1 AND 120),
    reason          TEXT CHECK (length(reason) BETWEEN 1 AND 500),
    -- Each is corrected once; its correction may be corrected again.
    corrects        TEXT UNIQUE REFERENCES material_movements (id),
    entered_at      TEXT NOT NULL,
    entered_by      TEXT NOT NULL,
    CHECK (kind <> 'delivery' OR amount_g_or_ml > 0),
    CHECK (kind <> 'removal' OR corrects IS NOT NULL),
    CHECK (corrects IS NULL OR reason IS NOT NULL)
) STRICT;
CREATE INDEX material_movements_by_lot ON material_movements (material_lot_id, moved_at);

CREATE TRIGGER material_movements_are_not_changed BEFORE UPDATE ON material_movements
BEGIN
    SELECT RAISE(ABORT, 'A movement of stock is corrected by another movement');
END;
CREATE TRIGGER material_movements_are_not_removed BEFORE DELETE ON material_movements
BEGIN
    SELECT RAISE(ABORT, 'A movement of stock is corrected by another movement');
END;
-- REPLACE fires no trigger on DELETE.
CREATE TRIGGER material_movements_are_not_replaced BEFORE INSERT ON material_movements
WHEN EXISTS (SELECT 1 FROM material_movements WHERE id = NEW.id OR corrects = NEW.corrects)
BEGIN
    SELECT RAISE(ABORT, 'A movement of stock is corrected once, by another movement');
END;

-- Those that count: not corrected, and no removals.
CREATE VIEW material_movements_in_force AS
SELECT * FROM material_movements AS movement
WHERE kind <> 'removal'
  AND NOT EXISTS (SELECT 1 FROM material_movements AS later WHERE later.corrects = movement.id);

-- Whether a later plan took over what was weighed is asked for every dose of a lot.
CREATE INDEX plans_by_predecessor ON plans (replaces) WHERE replaces IS NOT NULL;
