-- Certificates of lots and safety data sheets of materials, as they were uploaded. A newer one
-- takes the place of an older one; nothing is changed or removed. In the database, so that one
-- file is the whole backup.

CREATE TABLE attachments (
    id              TEXT PRIMARY KEY,
    material_id     TEXT NOT NULL REFERENCES materials (id),
    -- The lot that a certificate is about; absent for a safety data sheet.
    material_lot_id TEXT REFERENCES material_lots (id),
    file_name       TEXT NOT NULL CHECK (length(file_name) BETWEEN 1 AND 120),
    -- What the bytes are, whatever the name says.
    media_type      TEXT NOT NULL CHECK (media_type IN ('application/pdf', 'image/png', 'image/jpeg', 'image/webp')),
    sha256          TEXT NOT NULL,
    attached_at     TEXT NOT NULL,
    attached_by     TEXT NOT NULL,
    -- Last, so that a list never reads through them: 5 MB at most.
    bytes           BLOB NOT NULL CHECK (length(bytes) BETWEEN 1 AND 5242880)
) STRICT;
CREATE INDEX attachments_by_subject ON attachments (material_id, material_lot_id);

CREATE TRIGGER attachments_are_not_changed BEFORE UPDATE ON attachments
BEGIN
    SELECT RAISE(ABORT, 'An attachment is superseded by another');
END;
CREATE TRIGGER attachments_are_not_removed BEFORE DELETE ON attachments
BEGIN
    SELECT RAISE(ABORT, 'An attachment is superseded by another');
END;
-- REPLACE fires no trigger on DELETE.
CREATE TRIGGER attachments_are_not_replaced BEFORE INSERT ON attachments
WHEN EXISTS (SELECT 1 FROM attachments WHERE id = NEW.id)
BEGIN
    SELECT RAISE(ABORT, 'An attachment is superseded by another');
END;
