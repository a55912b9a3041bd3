-- What went in, told more fully: which lot and how strong it was, why it was not what was
-- planned, who stood by, and what was written down before it was corrected.

ALTER TABLE doses ADD COLUMN material_lot_id TEXT REFERENCES material_lots (id);
-- The lot as plans write materials down, so that what it did can be computed from the
-- record alone. Absent where the lot is not known: then the plan's own figures count.
ALTER TABLE doses ADD COLUMN shelf_item TEXT CHECK (shelf_item IS NULL OR json_valid(shelf_item));
ALTER TABLE doses ADD COLUMN reason TEXT;
ALTER TABLE doses ADD COLUMN witness_id TEXT REFERENCES members (id);
ALTER TABLE doses ADD COLUMN witness_name TEXT;
-- What a correction took the place of, the earliest first. Beside the dose and not in a
-- table of its own, because a revision takes its doses along under new identifiers.
ALTER TABLE doses ADD COLUMN corrections TEXT NOT NULL DEFAULT '[]' CHECK (json_valid(corrections));

CREATE INDEX doses_by_material_lot ON doses (material_lot_id, weighed_at) WHERE material_lot_id IS NOT NULL;

-- Everything that was really weighed out, each dose once. A revision takes what is in
-- along as a copy: only the last plan of a batch that was approved counts.
CREATE VIEW doses_in AS
SELECT doses.id, doses.plan_id, plans.batch, doses.position, doses.vessel, doses.material, doses.planned, doses.actual,
       doses.lot, doses.material_lot_id, doses.reason, doses.weighed_at, doses.weighed_by, doses.witness_name
FROM doses JOIN plans ON plans.id = doses.plan_id
WHERE doses.weighed_at IS NOT NULL AND plans.approved_at IS NOT NULL
  AND NOT EXISTS (SELECT 1 FROM plans AS later WHERE later.replaces = plans.id AND later.approved_at IS NOT NULL);
