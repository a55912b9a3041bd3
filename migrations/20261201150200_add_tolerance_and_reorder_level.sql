-- How far a weighed dose may be from its plan, and when to buy more. An empty tolerance is
-- the usual one; an empty level never warns. Grams for a solid, millilitres for a liquid.

ALTER TABLE materials ADD COLUMN tolerance_percent REAL CHECK (tolerance_percent > 0 AND tolerance_percent <= 20);
ALTER TABLE materials ADD COLUMN reorder_below_g_or_ml REAL CHECK (reorder_below_g_or_ml > 0);
