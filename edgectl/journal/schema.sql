-- One journal. Rows are only ever added; no index, so that a commit writes as few pages as it can.

-- Fixed when the journal is made. The first entry's previous_hash is the hash of these rows.
CREATE TABLE meta (
    key   TEXT PRIMARY KEY NOT NULL CHECK (typeof(key) = 'text'),
    value TEXT NOT NULL CHECK (typeof(value) = 'text')
) WITHOUT ROWID;

-- The body comes last: a scan by kind or time then never walks through its overflow pages.
CREATE TABLE entries (
    seq           INTEGER PRIMARY KEY CHECK (seq > 0),
    kind          TEXT NOT NULL CHECK (typeof(kind) = 'text'),
    cycle         INTEGER CHECK (typeof(cycle) IN ('integer', 'null')),
    at            REAL NOT NULL CHECK (typeof(at) = 'real'),
    previous_hash TEXT NOT NULL CHECK (typeof(previous_hash) = 'text'),
    entry_hash    TEXT NOT NULL CHECK (typeof(entry_hash) = 'text'),
    body          TEXT NOT NULL CHECK (typeof(body) = 'text')
);
