-- What an entry of the record book is about, so that it is found by batch, source, person or
-- lot. An entry is always about its own subject; the change that wrote it names the rest.

CREATE TABLE record_links (
    kind TEXT NOT NULL,
    id   TEXT NOT NULL,
    seq  INTEGER NOT NULL REFERENCES record_entries (seq),
    PRIMARY KEY (kind, id, seq)
) STRICT, WITHOUT ROWID;
CREATE INDEX record_links_by_entry ON record_links (seq);

CREATE INDEX record_by_member ON record_entries (member_id, seq);
CREATE INDEX record_by_time ON record_entries (at);
CREATE INDEX record_by_kind ON record_entries (subject_kind, seq);

-- Entries written before there were links: what can be told from the tables.
INSERT INTO record_links (kind, id, seq) SELECT subject_kind, subject_id, seq FROM record_entries;

CREATE TEMP TABLE entry_plans AS
SELECT seq, subject_id AS plan_id FROM record_entries WHERE subject_kind = 'plan'
UNION ALL
SELECT entry.seq, doses.plan_id FROM record_entries AS entry
JOIN doses ON entry.subject_kind = 'dose' AND doses.id = entry.subject_id
UNION ALL
SELECT entry.seq, mash_checks.plan_id FROM record_entries AS entry
JOIN mash_checks ON entry.subject_kind = 'mash check' AND mash_checks.id = entry.subject_id;

INSERT OR IGNORE INTO record_links (kind, id, seq) SELECT 'plan', plan_id, seq FROM entry_plans;
INSERT OR IGNORE INTO record_links (kind, id, seq)
SELECT 'batch', plans.batch, seq FROM entry_plans JOIN plans ON plans.id = plan_id;
INSERT OR IGNORE INTO record_links (kind, id, seq)
SELECT 'beer', plans.beer_id, seq FROM entry_plans JOIN plans ON plans.id = plan_id;
INSERT OR IGNORE INTO record_links (kind, id, seq)
SELECT 'source', source.value ->> 'source_id', entry.seq
FROM record_entries AS entry JOIN plans ON entry.subject_kind = 'plan' AND plans.id = entry.subject_id
JOIN json_each(plans.inputs, '$.sources') AS source JOIN json_each(plans.shares) AS share ON share.key = source.key
WHERE share.value > 0 AND source.value ->> 'source_id' <> '';
INSERT OR IGNORE INTO record_links (kind, id, seq)
SELECT 'water test', test.value, entry.seq
FROM record_entries AS entry JOIN plans ON entry.subject_kind = 'plan' AND plans.id = entry.subject_id
JOIN json_each(plans.inputs, '$.sources') AS source JOIN json_each(plans.shares) AS share ON share.key = source.key
JOIN json_each(source.value, '$.water_test_ids') AS test
WHERE share.value > 0;
INSERT OR IGNORE INTO record_links (kind, id, seq)
SELECT 'malt lot', malt.value ->> 'malt_lot_id', entry.seq
FROM record_entries AS entry JOIN plans ON entry.subject_kind = 'plan' AND plans.id = entry.subject_id
JOIN json_each(plans.inputs, '$.grist') AS malt
WHERE malt.value ->> 'malt_lot_id' <> '';
INSERT OR IGNORE INTO record_links (kind, id, seq)
SELECT 'material lot', material_lots.id, entry.seq
FROM record_entries AS entry JOIN doses ON entry.subject_kind = 'dose' AND doses.id = entry.subject_id
JOIN plans ON plans.id = doses.plan_id
JOIN material_lots
  ON material_lots.material_id = json_extract(plans.inputs, '$.shelf[' || doses.material || '].material_id')
 AND material_lots.code = doses.lot;
DROP TABLE entry_plans;

INSERT OR IGNORE INTO record_links (kind, id, seq)
SELECT 'source', water_tests.source_id, seq FROM record_entries
JOIN water_tests ON subject_kind = 'water test' AND water_tests.id = subject_id;
INSERT OR IGNORE INTO record_links (kind, id, seq)
SELECT 'material', material_lots.material_id, seq FROM record_entries
JOIN material_lots ON subject_kind = 'material lot' AND material_lots.id = subject_id;
INSERT OR IGNORE INTO record_links (kind, id, seq)
SELECT 'malt', malt_lots.malt_id, seq FROM record_entries
JOIN malt_lots ON subject_kind = 'malt lot' AND malt_lots.id = subject_id;
INSERT OR IGNORE INTO record_links (kind, id, seq)
SELECT 'malt lot', malt_titrations.malt_lot_id, seq FROM record_entries
JOIN malt_titrations ON subject_kind = 'malt titration' AND malt_titrations.id = subject_id;

-- A link is written with its entry and stays; nothing takes the place of an entry either.
CREATE TRIGGER record_links_are_written_with_their_entry BEFORE INSERT ON record_links
WHEN NEW.seq IS NOT (SELECT max(seq) FROM record_entries)
  OR EXISTS (SELECT 1 FROM record_links WHERE kind = NEW.kind AND id = NEW.id AND seq = NEW.seq)
BEGIN
    SELECT RAISE(ABORT, 'The record book is append-only');
END;
CREATE TRIGGER record_links_are_not_changed BEFORE UPDATE ON record_links
BEGIN
    SELECT RAISE(ABORT, 'The record book is append-only');
END;
CREATE TRIGGER record_links_are_not_removed BEFORE DELETE ON record_links
BEGIN
    SELECT RAISE(ABORT, 'The record book is append-only');
END;
CREATE TRIGGER record_entries_are_not_replaced BEFORE INSERT ON record_entries
WHEN EXISTS (SELECT 1 FROM record_entries WHERE seq = NEW.seq)
BEGIN
    SELECT RAISE(ABORT, 'The record book is append-only');
END;
