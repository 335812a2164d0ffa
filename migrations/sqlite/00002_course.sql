-- Where programme is active and where it is speech, beside the curves of a timeline. Readings taken before this
-- was looked for have none.

-- +goose Up

ALTER TABLE timelines ADD COLUMN course BLOB; -- see store/timeline.go; NULL if it was not looked for

-- +goose Down

ALTER TABLE timelines DROP COLUMN course;
