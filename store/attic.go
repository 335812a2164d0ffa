package store

import (
	"context"
	"database/sql"
	"fmt"
	"time"
)

// allOriginals are all that is in the attic, originalQuery those kept last of their recording.
const allOriginals = `SELECT a.recording_id, r.shelf_id, j.run_id, a.job_id, r.path, a.kept_at, a.sha256, a.stored, a.levelled, a.size
	FROM attic a JOIN recordings r ON r.id = a.recording_id JOIN jobs j ON j.id = a.job_id`

const originalQuery = allOriginals + ` WHERE NOT EXISTS (SELECT 1 FROM attic b WHERE b.recording_id = a.recording_id AND (b.kept_at, b.sha256) > (a.kept_at, a.sha256))`

func scanOriginal(row scanner) (o Original, err error) {
	var kept int64
	err = row.Scan(&o.RecordingID, &o.ShelfID, &o.RunID, &o.JobID, &o.Path, &kept, &o.SHA256, &o.Stored, &o.Levelled, &o.Size)
	o.KeptAt = fromMillis(kept)
	return o, err
}

// KeepOriginal records that a recording's original is in the attic, before its place is taken: whatever
// happens next, it can be found. It counts as the last one kept even if the clock was set back. Of o it takes RecordingID, JobID, SHA256, Stored, Levelled and Size.
func (s *Store) KeepOriginal(ctx context.Context, o Original) error {
	err := s.write(ctx, func(tx *sql.Tx) error {
		_, err := tx.ExecContext(ctx, `INSERT INTO attic (recording_id, sha256, job_id, stored, levelled, size, kept_at)
			VALUES (?1, ?2, ?3, ?4, ?5, ?6, max(?7, (SELECT coalesce(max(kept_at), 0) + 1 FROM attic WHERE recording_id = ?1))) ON CONFLICT (recording_id, sha256)
			DO UPDATE SET job_id = excluded.job_id, stored = excluded.stored, levelled = excluded.levelled, size = excluded.size, kept_at = excluded.kept_at`,
			o.RecordingID, o.SHA256, o.JobID, o.Stored, o.Levelled, o.Size, now())
		if err != nil {
			return err
		}
		// The new file keeps the time of the old one; with its size known, the next scan sees no change.
		_, err = tx.ExecContext(ctx, `UPDATE recordings SET size = ?, inode = 0 WHERE id = ?`, o.Size, o.RecordingID)
		return err
	})
	if err != nil {
		return fmt.Errorf("keep the original of recording %d: %w", o.RecordingID, err)
	}
	return nil
}

// Original returns what the attic holds of a recording, the last one kept. ErrNotFound if it holds nothing.
func (s *Store) Original(ctx context.Context, recordingID int64) (o Original, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		o, err = one(ctx, tx, scanOriginal, fmt.Sprintf("original of recording %d", recordingID), originalQuery+` AND a.recording_id = ?`, recordingID)
		return err
	})
	return o, err
}

// Originals returns a page of the attic.
func (s *Store) Originals(ctx context.Context, q OriginalQuery) (list []Original, err error) {
	if q.Limit, err = pageLimit(q.Limit); err != nil {
		return nil, fmt.Errorf("attic: %w", err)
	}
	err = s.read(ctx, func(tx *sql.Tx) error {
		list, err = collect(ctx, tx, scanOriginal, originalQuery+` AND a.recording_id > ?1 AND (?2 = 0 OR r.shelf_id = ?2)
			AND (?3 = 0 OR j.run_id = ?3) ORDER BY a.recording_id LIMIT ?4`, q.After, q.ShelfID, q.RunID, q.Limit)
		return err
	})
	if err != nil {
		return nil, fmt.Errorf("attic: %w", err)
	}
	return list, nil
}

// Restored records that an original is back in its place, with its length in bytes and its time. The recording is
// then as if it had never been levelled; its history tells the rest.
func (s *Store) Restored(ctx context.Context, o Original, size int64, modified time.Time) error {
	err := s.write(ctx, func(tx *sql.Tx) error {
		if _, err := tx.ExecContext(ctx, `DELETE FROM attic WHERE recording_id = ? AND sha256 = ?`, o.RecordingID, o.SHA256); err != nil {
			return err
		}
		_, err := tx.ExecContext(ctx, `UPDATE recordings SET size = ?, modified_at = ?, inode = 0, album = NULL, missing = 0, state = '', reason = '', levelled = '', levelled_reason = '', profile = '',
			after_id = NULL, after_integrated = NULL, after_range = NULL, after_peak = NULL, after_p10 = NULL, after_p95 = NULL
			WHERE id = ?`, size, modified.UnixMilli(), o.RecordingID)
		if err != nil {
			return err
		}
		return tell(ctx, tx, Event{At: fromMillis(now()), RecordingID: o.RecordingID, What: "restored", Words: "the original is back, bit for bit"})
	})
	if err != nil {
		return fmt.Errorf("restored recording %d: %w", o.RecordingID, err)
	}
	return nil
}
