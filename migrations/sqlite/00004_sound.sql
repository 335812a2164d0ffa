-- A sound is known by the hash of its samples, a file by its inode, and an album by its tags; runs can write gain tags.

-- +goose Up

-- Read out of the reading itself; '' in readings of engines that took none.
ALTER TABLE readings ADD COLUMN audio_hash TEXT NOT NULL GENERATED ALWAYS AS (coalesce(detail ->> 'audio_hash', '')) VIRTUAL;
CREATE INDEX readings_sound ON readings (audio_hash, id) WHERE audio_hash <> '';

ALTER TABLE recordings ADD COLUMN inode INTEGER NOT NULL DEFAULT 0; -- of the file as it was last scanned; 0 if not known
ALTER TABLE recordings ADD COLUMN album TEXT; -- what it shares with others of its album; '' if it names none, NULL until read
CREATE INDEX recordings_album ON recordings (shelf_id, album); -- also finds those still to be read, which each job asks for

-- A check on a column cannot be changed; a column can take another's place.
ALTER TABLE runs ADD COLUMN goes TEXT NOT NULL DEFAULT 'measure' CHECK (goes IN ('measure', 'copy', 'replace', 'tags'));
UPDATE runs SET goes = delivery;
ALTER TABLE runs DROP COLUMN delivery;
ALTER TABLE runs RENAME COLUMN goes TO delivery;

ALTER TABLE history ADD COLUMN did TEXT NOT NULL DEFAULT 'found' CHECK (did IN ('waiting', 'working', 'done', 'held', 'failed', 'cancelled',
    'found', 'changed', 'missing', 'moved', 'restored', 'run-started', 'run-finished', 'run-cancelled'));
UPDATE history SET did = what;
ALTER TABLE history DROP COLUMN what;
ALTER TABLE history RENAME COLUMN did TO what;

-- The recordings that share a gain in a run are those of a folder or of an album.
ALTER TABLE shared RENAME COLUMN folder TO name;

-- +goose Down

ALTER TABLE shared RENAME COLUMN name TO folder;

ALTER TABLE history ADD COLUMN did TEXT NOT NULL DEFAULT 'found' CHECK (did IN ('waiting', 'working', 'done', 'held', 'failed', 'cancelled',
    'found', 'changed', 'missing', 'restored', 'run-started', 'run-finished', 'run-cancelled'));
UPDATE history SET did = CASE what WHEN 'moved' THEN 'found' ELSE what END;
ALTER TABLE history DROP COLUMN what;
ALTER TABLE history RENAME COLUMN did TO what;

-- A file whose tags were written took its original's place.
ALTER TABLE runs ADD COLUMN goes TEXT NOT NULL DEFAULT 'measure' CHECK (goes IN ('measure', 'copy', 'replace'));
UPDATE runs SET goes = CASE delivery WHEN 'tags' THEN 'replace' ELSE delivery END;
ALTER TABLE runs DROP COLUMN delivery;
ALTER TABLE runs RENAME COLUMN goes TO delivery;

DROP INDEX recordings_album;
ALTER TABLE recordings DROP COLUMN album;
ALTER TABLE recordings DROP COLUMN inode;
DROP INDEX readings_sound;
ALTER TABLE readings DROP COLUMN audio_hash;
