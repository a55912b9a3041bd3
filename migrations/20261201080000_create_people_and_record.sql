-- Accounts, sessions, API tokens; the record book; keys of repeated requests.

CREATE TABLE members (
    id            TEXT PRIMARY KEY,
    login         TEXT NOT NULL UNIQUE CHECK (login = lower(login) AND length(login) BETWEEN 1 AND 60),
    name          TEXT NOT NULL CHECK (length(name) BETWEEN 1 AND 80),
    role          TEXT NOT NULL CHECK (role IN ('brewer', 'qa', 'manager')),
    password_hash TEXT NOT NULL,
    created_at    TEXT NOT NULL,
    disabled_at   TEXT
) STRICT;

-- Only the SHA-256 of a session's or token's secret is kept.
CREATE TABLE sessions (
    token_hash   TEXT PRIMARY KEY,
    member_id    TEXT NOT NULL REFERENCES members (id),
    created_at   TEXT NOT NULL,
    last_seen_at TEXT NOT NULL,
    expires_at   TEXT NOT NULL
) STRICT;
CREATE INDEX sessions_by_member ON sessions (member_id);

CREATE TABLE api_tokens (
    id           TEXT PRIMARY KEY,
    member_id    TEXT NOT NULL REFERENCES members (id),
    name         TEXT NOT NULL CHECK (length(name) BETWEEN 1 AND 80),
    scopes       TEXT NOT NULL,
    token_hash   TEXT NOT NULL UNIQUE,
    created_at   TEXT NOT NULL,
    expires_at   TEXT NOT NULL,
    last_used_at TEXT,
    revoked_at   TEXT
) STRICT;

-- The record book. Nothing rewrites it: not the program, not a slip at a console.
CREATE TABLE record_entries (
    seq          INTEGER PRIMARY KEY AUTOINCREMENT,
    at           TEXT NOT NULL,
    member_id    TEXT REFERENCES members (id),
    member_name  TEXT NOT NULL,
    action       TEXT NOT NULL,
    subject_kind TEXT NOT NULL,
    subject_id   TEXT NOT NULL,
    subject_name TEXT NOT NULL,
    before       TEXT CHECK (before IS NULL OR json_valid(before)),
    after        TEXT CHECK (after IS NULL OR json_valid(after)),
    reason       TEXT
) STRICT;
CREATE INDEX record_by_subject ON record_entries (subject_kind, subject_id, seq);

CREATE TRIGGER record_entries_are_not_changed BEFORE UPDATE ON record_entries
BEGIN
    SELECT RAISE(ABORT, 'The record book is append-only');
END;
CREATE TRIGGER record_entries_are_not_removed BEFORE DELETE ON record_entries
BEGIN
    SELECT RAISE(ABORT, 'The record book is append-only');
END;

-- A request that carries a key is applied once. The key is claimed in the same
-- transaction as the change; the answer is added after it, to be replayed.
CREATE TABLE request_keys (
    actor       TEXT NOT NULL,
    key         TEXT NOT NULL,
    fingerprint TEXT NOT NULL,
    at          TEXT NOT NULL,
    status      INTEGER,
    headers     TEXT,
    body        BLOB,
    PRIMARY KEY (actor, key)
) STRICT;

-- The brewery's own choices: one row.
CREATE TABLE brewery (
    one                INTEGER PRIMARY KEY CHECK (one = 1),
    name               TEXT NOT NULL,
    units              TEXT NOT NULL CHECK (units IN ('metric', 'us')),
    time_zone          TEXT NOT NULL,
    currency           TEXT NOT NULL,
    potable_limits     TEXT NOT NULL CHECK (potable_limits IN ('eu', 'us', 'who')),
    calcium_share      REAL NOT NULL,
    calcium_share_sd   REAL NOT NULL,
    co2_lost_share     REAL NOT NULL,
    co2_lost_share_sd  REAL NOT NULL,
    demo               INTEGER NOT NULL CHECK (demo IN (0, 1)),
    version            INTEGER NOT NULL
) STRICT;
