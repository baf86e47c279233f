-- 001-case.sql: a case, its recordings, its marks, and the history that explains them all.
-- Times are nanoseconds of case time unless the column says otherwise.

CREATE TABLE case_info (
    id             INTEGER PRIMARY KEY CHECK (id = 1),
    subject        TEXT NOT NULL,  -- the study's code, never a name
    procedure      TEXT NOT NULL,
    rater          TEXT NOT NULL,
    codebook       TEXT NOT NULL,  -- the CSV as given
    epoch_civil_ns INTEGER,        -- case time 0 on the theatre's wall clock; NULL = not fixed
    utc_offset_s   INTEGER NOT NULL
) STRICT;

CREATE TABLE recordings (
    id             INTEGER PRIMARY KEY,
    path           TEXT NOT NULL,
    size           INTEGER NOT NULL,
    modified_ns    INTEGER NOT NULL,  -- when its digest was last taken; not part of the history
    digest         TEXT NOT NULL UNIQUE,
    options        TEXT NOT NULL,
    start_civil_ns INTEGER
) STRICT;

CREATE TABLE marks (
    id           INTEGER PRIMARY KEY,
    code         TEXT NOT NULL,
    onset_ns     INTEGER NOT NULL,
    until_ns     INTEGER,
    value        REAL,
    unit         TEXT NOT NULL,
    route        TEXT NOT NULL,
    note         TEXT NOT NULL,
    state        TEXT NOT NULL CHECK (state IN ('incomplete', 'marked', 'confirmed', 'rejected')),
    source       TEXT NOT NULL CHECK (source IN ('live', 'review', 'command', 'import')),
    rater        TEXT NOT NULL,
    error_ns     INTEGER NOT NULL,
    stamp_clock  TEXT NOT NULL,
    stamp_ns     INTEGER,
    stamp_utc_ns INTEGER NOT NULL
) STRICT;

CREATE INDEX marks_by_onset ON marks (onset_ns, id);

-- What may never change about a mark once it is there.
CREATE TRIGGER marks_keep_stamp BEFORE UPDATE OF source, rater, stamp_clock, stamp_ns, stamp_utc_ns
ON marks BEGIN SELECT RAISE(ABORT, 'a stamp is never changed'); END;
CREATE TRIGGER marks_never_deleted BEFORE DELETE ON marks
BEGIN SELECT RAISE(ABORT, 'a mark is rejected, never deleted'); END;

CREATE TABLE history (
    seq     INTEGER PRIMARY KEY,
    utc_ns  INTEGER NOT NULL,
    rater   TEXT NOT NULL,
    program TEXT NOT NULL,
    action  TEXT NOT NULL,
    object  INTEGER NOT NULL,  -- id of the mark or recording; 0 = the case
    step    INTEGER NOT NULL,  -- rows of one undoable step share a number; 0 = not undoable
    before  TEXT NOT NULL,     -- JSON of the fields that changed
    after   TEXT NOT NULL,
    why     TEXT NOT NULL,
    digest  BLOB NOT NULL      -- BLAKE2b-256 of the previous digest and this row
) STRICT;

CREATE INDEX history_by_step ON history (step, seq) WHERE step > 0;

CREATE TRIGGER history_never_updated BEFORE UPDATE ON history
BEGIN SELECT RAISE(ABORT, 'history is append-only'); END;
CREATE TRIGGER history_never_deleted BEFORE DELETE ON history
BEGIN SELECT RAISE(ABORT, 'history is append-only'); END;
