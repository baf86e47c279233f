-- 002-live.sql: live sessions, what each of them has saved, the streams they took in, and fitted
-- clocks of recordings.

CREATE TABLE sessions (
    id                       INTEGER PRIMARY KEY,
    uid                      TEXT NOT NULL UNIQUE,  -- random
    host                     TEXT NOT NULL,  -- its name, for people
    machine                  TEXT NOT NULL,  -- which stays when the name changes
    boot_id                  TEXT NOT NULL,
    pid                      INTEGER NOT NULL,
    process_start            INTEGER NOT NULL,  -- clock ticks since boot: with pid, one process
    rater                    TEXT NOT NULL,
    begun_utc_ns             INTEGER NOT NULL,
    case_minus_boottime_ns   INTEGER NOT NULL,  -- case time = CLOCK_BOOTTIME + this
    tie_error_ns             INTEGER NOT NULL,  -- of that sum, where boots are tied by wall clock
    ended_utc_ns             INTEGER            -- NULL = runs, or ended without a word
) STRICT;

-- Every change a session asks for has a number; it is done once, however often it is tried.
CREATE TABLE session_changes (
    session TEXT NOT NULL REFERENCES sessions (uid),
    number  INTEGER NOT NULL,
    mark    INTEGER NOT NULL,
    PRIMARY KEY (session, number)
) STRICT, WITHOUT ROWID;

-- Files a session writes while it takes a stream in; they become recordings when they are whole.
CREATE TABLE streams (
    path      TEXT PRIMARY KEY,
    session   TEXT NOT NULL,
    source    TEXT NOT NULL,
    clock     TEXT NOT NULL,  -- as in clocks, so far
    recording INTEGER REFERENCES recordings (id)
) STRICT;

CREATE TABLE clocks (
    recording INTEGER PRIMARY KEY REFERENCES recordings (id),
    clock     TEXT NOT NULL  -- JSON: [[at_ns, span_ns, case_ns, case_span_ns, error_ns], ...]
) STRICT;
