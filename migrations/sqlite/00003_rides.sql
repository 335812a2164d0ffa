-- What is known of a levelling beyond its verdict, and what a folder's recordings read as one programme.

-- +goose Up

-- Documents as the API shows them; NULL where there are none, and in jobs of engines that kept none.
ALTER TABLE jobs ADD COLUMN doubts    TEXT CHECK (doubts IS NULL OR json_valid(doubts));
ALTER TABLE jobs ADD COLUMN treatment TEXT CHECK (treatment IS NULL OR json_valid(treatment));
ALTER TABLE jobs ADD COLUMN foreseen  TEXT CHECK (foreseen IS NULL OR json_valid(foreseen)); -- a reading
-- The earlier job of the same recording whose result still stands, so that nothing was done; NULL: its own.
ALTER TABLE jobs ADD COLUMN same_as INTEGER;

-- The curve of the ride in jobs.plan. Apart from it, so that a list of jobs does not drag curves through memory.
CREATE TABLE rides (
    job_id INTEGER PRIMARY KEY REFERENCES jobs (id) ON DELETE CASCADE,
    curve  TEXT    NOT NULL CHECK (json_valid(curve))
) STRICT;

-- The recordings of a folder that one run takes share a gain; this is what they read together.
CREATE TABLE shared (
    run_id     INTEGER NOT NULL REFERENCES runs (id) ON DELETE CASCADE,
    folder     TEXT    NOT NULL, -- relative to the shelf's root, '' for the root itself
    integrated REAL, -- LUFS
    peak       REAL, -- dBTP
    PRIMARY KEY (run_id, folder)
) STRICT, WITHOUT ROWID;

-- +goose Down

DROP TABLE shared;
DROP TABLE rides;
ALTER TABLE jobs DROP COLUMN same_as;
ALTER TABLE jobs DROP COLUMN foreseen;
ALTER TABLE jobs DROP COLUMN treatment;
ALTER TABLE jobs DROP COLUMN doubts;
