-- Conventions: STRICT tables, so that a value of the wrong type is refused; times are unix milliseconds
-- (columns …_at); durations are seconds; a figure that is not defined is NULL, never 0.

-- +goose Up

CREATE TABLE shelves (
    id         INTEGER PRIMARY KEY AUTOINCREMENT,
    name       TEXT    NOT NULL UNIQUE CHECK (name <> '' AND name NOT GLOB '*[^a-z0-9-]*'),
    root       TEXT    NOT NULL UNIQUE CHECK (root LIKE '/%'),
    copies     TEXT    NOT NULL UNIQUE CHECK (copies LIKE '/%'),
    created_at INTEGER NOT NULL
) STRICT;

-- Every version of every profile that was ever used. A version is a hash of the document, so a row never changes.
CREATE TABLE profiles (
    version  TEXT    PRIMARY KEY,
    name     TEXT    NOT NULL,
    target   REAL    NOT NULL, -- LUFS
    document TEXT    NOT NULL CHECK (json_valid(document)),
    saved_at INTEGER NOT NULL
) STRICT, WITHOUT ROWID;

-- A recording carries the figures that lists and charts show, so that a page of 100,000 needs no join.
-- state, reason and job_id tell of the latest job; levelled and levelled_reason keep the verdict of the
-- latest levelling, which a later measuring must not wipe out.
CREATE TABLE recordings (
    id                INTEGER PRIMARY KEY AUTOINCREMENT,
    shelf_id          INTEGER NOT NULL REFERENCES shelves (id) ON DELETE CASCADE,
    path              TEXT    NOT NULL CHECK (path <> '' AND path NOT LIKE '/%'),
    folded            TEXT    NOT NULL, -- path without case, for searching
    size              INTEGER NOT NULL CHECK (size >= 0),
    modified_at       INTEGER NOT NULL,
    added_at          INTEGER NOT NULL,
    missing           INTEGER NOT NULL DEFAULT 0 CHECK (missing IN (0, 1)),
    format            TEXT    NOT NULL DEFAULT '',
    duration          REAL,
    state             TEXT    NOT NULL DEFAULT ''
        CHECK (state IN ('', 'waiting', 'working', 'done', 'held', 'failed', 'cancelled')),
    reason            TEXT    NOT NULL DEFAULT '',
    job_id            INTEGER NOT NULL DEFAULT 0,
    levelled          TEXT    NOT NULL DEFAULT '' CHECK (levelled IN ('', 'done', 'held', 'failed')),
    levelled_reason   TEXT    NOT NULL DEFAULT '',
    profile           TEXT    NOT NULL DEFAULT '',
    faults            INTEGER NOT NULL DEFAULT 0,
    before_id         INTEGER REFERENCES readings (id) ON DELETE SET NULL,
    before_integrated REAL,
    before_range      REAL,
    before_peak       REAL,
    before_p10        REAL,
    before_p95        REAL,
    after_id          INTEGER REFERENCES readings (id) ON DELETE SET NULL,
    after_integrated  REAL,
    after_range       REAL,
    after_peak        REAL,
    after_p10         REAL,
    after_p95         REAL,
    UNIQUE (shelf_id, path)
) STRICT;

-- One index for each order a list of a shelf can have (a list over all shelves is merged from these). Rows
-- without the figure sit together at one end in id order, which is what the second half of paging walks.
-- The order by path has the UNIQUE above.
CREATE INDEX recordings_by_added    ON recordings (shelf_id, added_at, id);
CREATE INDEX recordings_by_state    ON recordings (shelf_id, state, id);
CREATE INDEX recordings_by_duration ON recordings (shelf_id, duration, id);
CREATE INDEX recordings_by_before   ON recordings (shelf_id, before_integrated, id);
CREATE INDEX recordings_by_after    ON recordings (shelf_id, after_integrated, id);
CREATE INDEX recordings_by_range    ON recordings (shelf_id, before_range, id);
CREATE INDEX recordings_by_peak     ON recordings (shelf_id, before_peak, id);
-- One state's recordings in path order: the lists people look at most.
CREATE INDEX recordings_state_path  ON recordings (shelf_id, state, path, id);
-- A search reads all names of a shelf; it reads them here, a tenth of the table.
CREATE INDEX recordings_search      ON recordings (shelf_id, folded);
-- Foreign keys that a deletion has to look up.
CREATE INDEX recordings_before_id ON recordings (before_id) WHERE before_id IS NOT NULL;
CREATE INDEX recordings_after_id  ON recordings (after_id)  WHERE after_id IS NOT NULL;

-- The counters are kept by the triggers below, so they cannot drift from the jobs.
CREATE TABLE runs (
    id              INTEGER PRIMARY KEY AUTOINCREMENT,
    shelf_id        INTEGER NOT NULL REFERENCES shelves (id) ON DELETE CASCADE,
    folder          TEXT    NOT NULL,
    profile_version TEXT    NOT NULL REFERENCES profiles (version),
    delivery        TEXT    NOT NULL CHECK (delivery IN ('measure', 'copy', 'replace')),
    created_at      INTEGER NOT NULL,
    started_at      INTEGER,
    cancelled_at    INTEGER,
    finished_at     INTEGER,
    waiting         INTEGER NOT NULL DEFAULT 0 CHECK (waiting >= 0),
    working         INTEGER NOT NULL DEFAULT 0 CHECK (working >= 0),
    done            INTEGER NOT NULL DEFAULT 0 CHECK (done >= 0),
    held            INTEGER NOT NULL DEFAULT 0 CHECK (held >= 0),
    failed          INTEGER NOT NULL DEFAULT 0 CHECK (failed >= 0),
    cancelled       INTEGER NOT NULL DEFAULT 0 CHECK (cancelled >= 0),
    seconds_done    REAL    NOT NULL DEFAULT 0,
    bytes_done      INTEGER NOT NULL DEFAULT 0,
    bytes_total     INTEGER NOT NULL DEFAULT 0
) STRICT;

CREATE INDEX runs_shelf ON runs (shelf_id, id);

CREATE TABLE jobs (
    id           INTEGER PRIMARY KEY AUTOINCREMENT,
    run_id       INTEGER NOT NULL REFERENCES runs (id) ON DELETE CASCADE,
    recording_id INTEGER NOT NULL REFERENCES recordings (id) ON DELETE CASCADE,
    state        TEXT    NOT NULL DEFAULT 'waiting'
        CHECK (state IN ('waiting', 'working', 'done', 'held', 'failed', 'cancelled')),
    reason       TEXT    NOT NULL DEFAULT '',
    output       TEXT    NOT NULL DEFAULT '',
    plan         TEXT    CHECK (plan IS NULL OR json_valid(plan)),
    renders      INTEGER NOT NULL DEFAULT 0,
    attempts     INTEGER NOT NULL DEFAULT 0,
    stops        INTEGER NOT NULL DEFAULT 0, -- how often the program died while this job was at work
    bytes        INTEGER NOT NULL DEFAULT 0, -- of the recording when the run was made
    duration     REAL    NOT NULL DEFAULT 0, -- of the sound, known once measured
    started_at   INTEGER,
    finished_at  INTEGER,
    UNIQUE (run_id, recording_id)
) STRICT;

CREATE INDEX jobs_run_state ON jobs (run_id, state, id);
CREATE INDEX jobs_recording ON jobs (recording_id, id);
CREATE INDEX jobs_active    ON jobs (state, id) WHERE state IN ('waiting', 'working');

-- +goose StatementBegin
CREATE TRIGGER jobs_counted_new AFTER INSERT ON jobs
BEGIN
    UPDATE runs SET waiting = waiting + 1, bytes_total = bytes_total + new.bytes WHERE id = new.run_id;
END;
-- +goose StatementEnd

-- +goose StatementBegin
CREATE TRIGGER jobs_counted AFTER UPDATE OF state ON jobs WHEN old.state <> new.state
BEGIN
    UPDATE runs SET
        waiting   = waiting   + (new.state = 'waiting')   - (old.state = 'waiting'),
        working   = working   + (new.state = 'working')   - (old.state = 'working'),
        done      = done      + (new.state = 'done')      - (old.state = 'done'),
        held      = held      + (new.state = 'held')      - (old.state = 'held'),
        failed    = failed    + (new.state = 'failed')    - (old.state = 'failed'),
        cancelled = cancelled + (new.state = 'cancelled') - (old.state = 'cancelled'),
        seconds_done = seconds_done + CASE WHEN new.state IN ('done', 'held', 'failed') THEN new.duration ELSE 0 END,
        bytes_done   = bytes_done   + CASE WHEN new.state IN ('done', 'held', 'failed') THEN new.bytes ELSE 0 END
    WHERE id = new.run_id;
END;
-- +goose StatementEnd

-- detail is the reading as the API shows it; the columns are what lists of jobs join.
CREATE TABLE readings (
    id           INTEGER PRIMARY KEY AUTOINCREMENT,
    recording_id INTEGER NOT NULL REFERENCES recordings (id) ON DELETE CASCADE,
    job_id       INTEGER NOT NULL REFERENCES jobs (id) ON DELETE CASCADE,
    kind         TEXT    NOT NULL CHECK (kind IN ('before', 'after')),
    measured_at  INTEGER NOT NULL,
    engine       TEXT    NOT NULL,
    decoder      TEXT    NOT NULL,
    duration     REAL,
    integrated   REAL, -- LUFS
    "range"      REAL, -- LU
    peak         REAL, -- dBTP
    p10          REAL, -- LUFS
    p95          REAL, -- LUFS
    detail       TEXT    NOT NULL CHECK (json_valid(detail)),
    UNIQUE (job_id, kind)
) STRICT;

CREATE INDEX readings_recording ON readings (recording_id, kind, id);

-- Apart from the readings, so that walking readings does not drag the curves through memory.
CREATE TABLE timelines (
    reading_id INTEGER PRIMARY KEY REFERENCES readings (id) ON DELETE CASCADE,
    step       REAL    NOT NULL, -- seconds
    curves     BLOB    NOT NULL  -- see store/timeline.go
) STRICT;

-- Originals in the attic. A recording can have several, of different content: the last one kept is the one
-- that the file on the shelf was made from.
CREATE TABLE attic (
    recording_id INTEGER NOT NULL REFERENCES recordings (id) ON DELETE RESTRICT,
    sha256       TEXT    NOT NULL CHECK (length(sha256) = 64),
    job_id       INTEGER NOT NULL REFERENCES jobs (id) ON DELETE RESTRICT,
    stored       TEXT    NOT NULL CHECK (stored <> '' AND stored NOT LIKE '/%'),
    levelled     TEXT    NOT NULL CHECK (length(levelled) = 64),
    size         INTEGER NOT NULL,
    kept_at      INTEGER NOT NULL,
    PRIMARY KEY (recording_id, sha256)
) STRICT, WITHOUT ROWID;

CREATE INDEX attic_job ON attic (job_id);

CREATE TABLE history (
    id           INTEGER PRIMARY KEY AUTOINCREMENT, -- never used twice, grows with time
    at           INTEGER NOT NULL,
    run_id       INTEGER NOT NULL DEFAULT 0,
    recording_id INTEGER NOT NULL DEFAULT 0,
    job_id       INTEGER NOT NULL DEFAULT 0,
    what         TEXT    NOT NULL CHECK (what IN ('waiting', 'working', 'done', 'held', 'failed', 'cancelled',
        'found', 'changed', 'missing', 'restored', 'run-started', 'run-finished', 'run-cancelled')),
    words        TEXT    NOT NULL
) STRICT;

CREATE INDEX history_run       ON history (run_id, id)       WHERE run_id <> 0;
CREATE INDEX history_recording ON history (recording_id, id) WHERE recording_id <> 0;

-- +goose Down

DROP TABLE history;
DROP TABLE attic;
DROP TABLE timelines;
UPDATE recordings SET before_id = NULL, after_id = NULL;
DROP TABLE readings;
DROP TABLE jobs;
DROP TABLE runs;
DROP TABLE recordings;
DROP TABLE profiles;
DROP TABLE shelves;
