-- What the attic keeps beside originals: what somebody had put in a recording's place, with tags of their own.

-- +goose Up

ALTER TABLE attic ADD COLUMN kind TEXT NOT NULL DEFAULT 'original' CHECK (kind IN ('original', 'version'));
-- Bytes of what is kept; 0 in rows of before, whose column size (of what took its place) is about that.
ALTER TABLE attic ADD COLUMN length INTEGER NOT NULL DEFAULT 0 CHECK (length >= 0);

-- +goose Down

-- Their files stay in the attic, without a row as before.
DELETE FROM attic WHERE kind = 'version';
ALTER TABLE attic DROP COLUMN length;
ALTER TABLE attic DROP COLUMN kind;
