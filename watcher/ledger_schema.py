"""The tables of the ledger, version 4, and the steps from every earlier version.

Times are texts, ISO 8601 in UTC with microseconds. Nothing is ever deleted from `entries`, `exports`, `mails` or
`settings`; `alerts` loses a key only together with a mail that was withdrawn before anyone had it. `pages` holds what
is still to be drawn. `seal` chains the entries by hash.
"""

from __future__ import annotations

VERSION = 4

#: Version to the statements that make the next one of it.
STEPS = {
    1: """
ALTER TABLE exports ADD COLUMN last_revision INTEGER;
ALTER TABLE exports ADD COLUMN lent TEXT;
ALTER TABLE exports ADD COLUMN wants INTEGER NOT NULL DEFAULT 0;
UPDATE exports SET last_revision = revision, lent = '[]' WHERE state = 'done';
""",
    # The entries of earlier ledgers are chained as well, by `watcher.ledger_entries.seal_all`.
    2: """
ALTER TABLE exports ADD COLUMN family TEXT NOT NULL DEFAULT '';
ALTER TABLE mails ADD COLUMN entry INTEGER REFERENCES entries (number);
CREATE TABLE failures (
    id INTEGER PRIMARY KEY,
    export_id INTEGER NOT NULL REFERENCES exports (id),
    name TEXT NOT NULL,
    sample TEXT NOT NULL,
    analyte TEXT NOT NULL,
    channel TEXT NOT NULL,
    attempt INTEGER NOT NULL,
    verdict TEXT NOT NULL,
    opened_at TEXT NOT NULL,
    closed_at TEXT,
    closed_by TEXT
) STRICT;
CREATE INDEX failures_open ON failures (sample, analyte, channel) WHERE closed_at IS NULL;
CREATE INDEX failures_by_name ON failures (name);
CREATE INDEX exports_by_content ON exports (sha256, id);
CREATE TABLE requests (
    id TEXT PRIMARY KEY,
    done_at TEXT NOT NULL
) STRICT;
""",
    3: """
ALTER TABLE mails ADD COLUMN pictures TEXT NOT NULL DEFAULT '[]';
CREATE TABLE pages (
    file_id INTEGER PRIMARY KEY REFERENCES files (id)
) STRICT;
""",
}

TABLES = """
CREATE TABLE settings (
    number INTEGER PRIMARY KEY,
    sha256 TEXT NOT NULL,
    body TEXT NOT NULL,
    adopted_at TEXT NOT NULL,
    account TEXT NOT NULL,
    reason TEXT NOT NULL,
    difference TEXT NOT NULL
) STRICT;

CREATE TABLE exports (
    id INTEGER PRIMARY KEY,
    name TEXT NOT NULL,
    sha256 TEXT NOT NULL,
    bytes INTEGER NOT NULL,
    revision INTEGER,
    state TEXT NOT NULL
        CHECK (state IN ('accepted', 'done', 'refused', 'unclaimed', 'waiting', 'superseded')),
    settings_number INTEGER REFERENCES settings (number),
    layout TEXT,
    attempts INTEGER NOT NULL DEFAULT 0,
    accepted_at TEXT NOT NULL,
    finished_at TEXT,
    problem TEXT,
    counts TEXT NOT NULL DEFAULT '{}',
    last_revision INTEGER,
    lent TEXT,
    wants INTEGER NOT NULL DEFAULT 0,
    family TEXT NOT NULL DEFAULT '',
    UNIQUE (name, sha256)
) STRICT;
CREATE INDEX exports_by_state ON exports (state, settings_number, id);
CREATE INDEX exports_by_name ON exports (name, id);

CREATE TABLE series (
    export_id INTEGER NOT NULL REFERENCES exports (id),
    sample TEXT NOT NULL,
    analyte TEXT NOT NULL,
    channel TEXT NOT NULL,
    attempt INTEGER NOT NULL,
    verdict TEXT NOT NULL,
    result REAL,
    unit TEXT
) STRICT;
CREATE INDEX series_by_export ON series (export_id);
CREATE INDEX series_by_analyte ON series (analyte, export_id);

CREATE TABLE files (
    id INTEGER PRIMARY KEY,
    export_id INTEGER NOT NULL REFERENCES exports (id),
    target TEXT NOT NULL COLLATE NOCASE UNIQUE,
    staged TEXT NOT NULL,
    sha256 TEXT NOT NULL,
    state TEXT NOT NULL CHECK (state IN ('waiting', 'delivered')),
    attempts INTEGER NOT NULL DEFAULT 0,
    due_at TEXT NOT NULL,
    last_error TEXT
) STRICT;
CREATE INDEX files_due ON files (due_at) WHERE state = 'waiting';
CREATE INDEX files_by_export ON files (export_id);

CREATE TABLE mails (
    id INTEGER PRIMARY KEY,
    export_id INTEGER REFERENCES exports (id),
    kind TEXT NOT NULL,
    message_id TEXT NOT NULL UNIQUE,
    subject TEXT NOT NULL,
    body TEXT NOT NULL,
    created_at TEXT NOT NULL,
    due_at TEXT NOT NULL,
    entry INTEGER REFERENCES entries (number),
    pictures TEXT NOT NULL DEFAULT '[]'
) STRICT;
CREATE INDEX mails_by_export ON mails (export_id, kind);

CREATE TABLE recipients (
    mail_id INTEGER NOT NULL REFERENCES mails (id),
    address TEXT NOT NULL,
    state TEXT NOT NULL
        CHECK (state IN ('waiting', 'sending', 'delivered', 'refused', 'unknown', 'withdrawn')),
    attempts INTEGER NOT NULL DEFAULT 0,
    due_at TEXT NOT NULL,
    last_error TEXT,
    PRIMARY KEY (mail_id, address)
) STRICT;
CREATE INDEX recipients_due ON recipients (due_at) WHERE state IN ('waiting', 'unknown');
CREATE INDEX recipients_open ON recipients (state) WHERE state NOT IN ('delivered', 'withdrawn');

CREATE TABLE alerts (
    key TEXT PRIMARY KEY,
    export_id INTEGER REFERENCES exports (id),
    mail_id INTEGER REFERENCES mails (id),
    created_at TEXT NOT NULL
) STRICT;
CREATE INDEX alerts_by_export ON alerts (export_id);
CREATE INDEX alerts_by_mail ON alerts (mail_id);

CREATE TABLE entries (
    number INTEGER PRIMARY KEY AUTOINCREMENT,
    kind TEXT NOT NULL,
    export_id INTEGER REFERENCES exports (id),
    at TEXT NOT NULL,
    body TEXT NOT NULL,
    seal TEXT
) STRICT;
CREATE INDEX entries_by_export ON entries (export_id);

CREATE TABLE failures (
    id INTEGER PRIMARY KEY,
    export_id INTEGER NOT NULL REFERENCES exports (id),
    name TEXT NOT NULL,
    sample TEXT NOT NULL,
    analyte TEXT NOT NULL,
    channel TEXT NOT NULL,
    attempt INTEGER NOT NULL,
    verdict TEXT NOT NULL,
    opened_at TEXT NOT NULL,
    closed_at TEXT,
    closed_by TEXT
) STRICT;
CREATE INDEX failures_open ON failures (sample, analyte, channel) WHERE closed_at IS NULL;
CREATE INDEX failures_by_name ON failures (name);
CREATE INDEX exports_by_content ON exports (sha256, id);
CREATE TABLE requests (
    id TEXT PRIMARY KEY,
    done_at TEXT NOT NULL
) STRICT;

CREATE TABLE pages (
    file_id INTEGER PRIMARY KEY REFERENCES files (id)
) STRICT;
"""
