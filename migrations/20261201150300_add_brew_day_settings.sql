-- How a brewery weighs out, who looks on, and when a tablet goes back to the names.

ALTER TABLE brewery ADD COLUMN vessel_order TEXT NOT NULL DEFAULT 'liquor_tank,mash,sparge_liquor,kettle'
    -- The four vessels, each once: their keys and three commas.
    CHECK (length(vessel_order) = 37 AND instr(vessel_order, 'liquor_tank') AND instr(vessel_order, 'mash')
           AND instr(vessel_order, 'sparge_liquor') AND instr(vessel_order, 'kettle'));
ALTER TABLE brewery ADD COLUMN second_person TEXT NOT NULL DEFAULT 'never'
    CHECK (second_person IN ('never', 'acid_and_lime'));
ALTER TABLE brewery ADD COLUMN tablet_idle_minutes INTEGER NOT NULL DEFAULT 5
    CHECK (tablet_idle_minutes BETWEEN 1 AND 60);
