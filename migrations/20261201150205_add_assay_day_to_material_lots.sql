-- When the brewery itself found the assay of a lot; empty where the certificate gave it.
-- A pack that stands open is as good as its last assay, and drifts away from it.

ALTER TABLE material_lots ADD COLUMN assayed_on TEXT CHECK (assayed_on IS NULL OR assay_percent IS NOT NULL);
