-- Tablets that several people share, the PINs that open them, and invitations.

-- Only the SHA-256 of the secret in a tablet's cookie is kept. A revoked tablet stays:
-- the record book speaks of it.
CREATE TABLE tablets (
    id           TEXT PRIMARY KEY,
    name         TEXT NOT NULL CHECK (length(name) BETWEEN 1 AND 80),
    secret_hash  TEXT NOT NULL UNIQUE,
    enrolled_by  TEXT NOT NULL REFERENCES members (id),
    enrolled_at  TEXT NOT NULL,
    last_seen_at TEXT NOT NULL,
    revoked_at   TEXT
) STRICT;
CREATE UNIQUE INDEX tablets_by_name ON tablets (name) WHERE revoked_at IS NULL;

CREATE TABLE pins (
    member_id TEXT PRIMARY KEY REFERENCES members (id),
    pin_hash  TEXT NOT NULL,
    set_at    TEXT NOT NULL
) STRICT;

-- A session knows the tablet it was begun on and whether a PIN began it: both narrow
-- what it is good for. `device` is the browser in a few words.
ALTER TABLE sessions ADD COLUMN tablet_id TEXT REFERENCES tablets (id);
ALTER TABLE sessions ADD COLUMN by_pin INTEGER NOT NULL DEFAULT 0 CHECK (by_pin IN (0, 1));
ALTER TABLE sessions ADD COLUMN device TEXT NOT NULL DEFAULT '';
CREATE INDEX sessions_by_tablet ON sessions (tablet_id);

-- An account that its owner has yet to make, by a link that is good once.
CREATE TABLE invitations (
    id          TEXT PRIMARY KEY,
    name        TEXT NOT NULL CHECK (length(name) BETWEEN 1 AND 80),
    role        TEXT NOT NULL CHECK (role IN ('brewer', 'qa', 'manager')),
    secret_hash TEXT NOT NULL UNIQUE,
    invited_by  TEXT NOT NULL REFERENCES members (id),
    created_at  TEXT NOT NULL,
    expires_at  TEXT NOT NULL,
    revoked_at  TEXT,
    member_id   TEXT REFERENCES members (id)
) STRICT;
