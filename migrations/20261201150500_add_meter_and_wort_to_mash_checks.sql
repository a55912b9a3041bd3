-- A reading knows its meter and the calibration it rests on, and a reading of the wort how
-- much of it there is and where it should be at cast-out.

ALTER TABLE mash_checks ADD COLUMN meter_id TEXT REFERENCES meters (id);
ALTER TABLE mash_checks ADD COLUMN calibration_id TEXT REFERENCES meter_calibrations (id);
-- Whether somebody said that the meter really showed what looked mistyped.
ALTER TABLE mash_checks ADD COLUMN confirmed INTEGER NOT NULL DEFAULT 0 CHECK (confirmed IN (0, 1));
ALTER TABLE mash_checks ADD COLUMN wort_l REAL CHECK (wort_l > 0);
ALTER TABLE mash_checks ADD COLUMN cast_out_ph REAL CHECK (cast_out_ph BETWEEN 0 AND 14);
