-- SPDX-License-Identifier: MIT
-- The store, version 2 (store_upgrade.c brings older ones to it). docs/store.md tells every column. Times are UTC seconds since 1970; no value: there is none.
-- `entry` numbers rise for ever over reading, judgement, word, outbox and ledger together: the "known at" axis.

CREATE TABLE ledger (
    entry          INTEGER PRIMARY KEY,
    utc            INTEGER NOT NULL,
    kind           TEXT NOT NULL,
    payload_digest TEXT NOT NULL CHECK (length(payload_digest) = 64),
    link           TEXT NOT NULL UNIQUE CHECK (length(link) = 64),
    settings       TEXT NOT NULL
) STRICT;

CREATE TABLE ledger_payload (
    entry   INTEGER PRIMARY KEY REFERENCES ledger (entry),
    payload TEXT NOT NULL
) STRICT;

CREATE TABLE reading (
    entry    INTEGER PRIMARY KEY,
    gauge    TEXT NOT NULL,
    source   TEXT NOT NULL,
    observed INTEGER NOT NULL,
    value    REAL NOT NULL,
    unit     TEXT NOT NULL,
    received INTEGER NOT NULL,
    "by"     TEXT
) STRICT;
CREATE INDEX reading_by_gauge ON reading (gauge, observed);

CREATE TABLE judgement (
    entry   INTEGER PRIMARY KEY,
    reading INTEGER NOT NULL REFERENCES reading (entry),
    flag    INTEGER NOT NULL,
    use     TEXT NOT NULL CHECK (use IN ('use', 'hold', 'keep out')),
    reasons INTEGER NOT NULL,
    tests   TEXT CHECK (length(tests) = 11)
) STRICT;
CREATE INDEX judgement_by_reading ON judgement (reading);

CREATE TABLE word (
    entry    INTEGER PRIMARY KEY,
    id       TEXT NOT NULL UNIQUE,
    kind     TEXT NOT NULL CHECK (kind IN ('accept', 'reading', 'seen', 'road', 'note', 'rating')),
    subject  TEXT NOT NULL,
    value    REAL,
    unit     TEXT,
    is_wet   INTEGER CHECK (is_wet IN (0, 1)),
    road     TEXT,
    text     TEXT NOT NULL,
    "by"     TEXT NOT NULL,
    at       INTEGER NOT NULL,
    received INTEGER NOT NULL,
    rating   TEXT CHECK (rating IN ('void', 'in force')),
    CHECK ((kind = 'seen') = (is_wet IS NOT NULL)),
    CHECK ((kind = 'road') = (road IS NOT NULL)),
    CHECK ((kind = 'rating') = (rating IS NOT NULL))
) STRICT;

CREATE TABLE advice (
    point           TEXT NOT NULL,
    entry           INTEGER NOT NULL REFERENCES ledger (entry),
    level           TEXT NOT NULL,
    is_blind        INTEGER NOT NULL CHECK (is_blind IN (0, 1)),
    near_sides_only INTEGER NOT NULL CHECK (near_sides_only IN (0, 1)),
    reasons         INTEGER NOT NULL,
    act_by          INTEGER,
    since           INTEGER NOT NULL,
    onset           INTEGER,
    step_down_from  INTEGER,
    told_act_by     INTEGER,
    PRIMARY KEY (point, entry)
) STRICT, WITHOUT ROWID;

CREATE TABLE forecast (
    entry      INTEGER PRIMARY KEY REFERENCES ledger (entry),
    issued     INTEGER NOT NULL,
    start      INTEGER NOT NULL,
    step_s     INTEGER NOT NULL,
    step_count INTEGER NOT NULL
) STRICT;

CREATE TABLE forecast_curve (
    forecast  INTEGER NOT NULL REFERENCES forecast (entry),
    point     TEXT NOT NULL,
    step      INTEGER NOT NULL,
    low_mm    INTEGER,
    likely_mm INTEGER,
    high_mm   INTEGER,
    PRIMARY KEY (forecast, point, step)
) STRICT, WITHOUT ROWID;

CREATE TABLE outbox (
    entry      INTEGER PRIMARY KEY,
    id         TEXT NOT NULL,
    number     INTEGER NOT NULL,
    kind       TEXT NOT NULL CHECK (kind IN ('decision', 'notice')),
    point      TEXT,
    channel    TEXT NOT NULL,
    made       INTEGER NOT NULL,
    wakes      INTEGER NOT NULL CHECK (wakes IN (0, 1)),
    level      TEXT NOT NULL,
    act_by     INTEGER,
    deck_earliest INTEGER,
    deck_likely   INTEGER,
    deck_latest   INTEGER,
    short_text TEXT NOT NULL,
    bulletin   TEXT,
    state      TEXT NOT NULL CHECK (state IN ('waiting', 'under way', 'sent', 'given up')),
    tries      INTEGER NOT NULL,
    next_try   INTEGER NOT NULL,
    settled    INTEGER,
    note       TEXT NOT NULL,
    UNIQUE (id, channel)
) STRICT;

CREATE TABLE raw_payload (
    number   INTEGER PRIMARY KEY,
    entry    INTEGER NOT NULL REFERENCES ledger (entry),
    gauge    TEXT,
    source   TEXT NOT NULL,
    origin   TEXT NOT NULL,
    received INTEGER NOT NULL,
    bytes    BLOB NOT NULL
) STRICT;

CREATE TABLE settings (
    digest     TEXT PRIMARY KEY,
    text       TEXT NOT NULL,
    first_used INTEGER NOT NULL,
    turn       INTEGER NOT NULL UNIQUE
) STRICT;

CREATE TABLE counter (
    name  TEXT PRIMARY KEY,
    value INTEGER NOT NULL
) STRICT;
