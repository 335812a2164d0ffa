package store

import (
	"context"
	"database/sql"
	"fmt"
	"time"
)

// inAttic is all that is in the attic; isOriginal are the originals among it, keptLast those kept last of their recording.
const (
	inAttic = `SELECT a.recording_id, r.shelf_id, j.run_id, a.job_id, r.path, a.kept_at, a.sha256, a.stored, a.levelled, a.size, a.length
	FROM attic a JOIN recordings r ON r.id = a.recording_id JOIN jobs j ON j.id = a.job_id`
	isOriginal = `a.kind = 'original'`
	keptLast   = isOriginal + ` AND NOT EXISTS (SELECT 1 FROM attic b WHERE b.recording_id = a.recording_id AND b.kind = 'original'
		AND (b.kept_at, b.sha256) > (a.kept_at, a.sha256))`
)

const originalQuery = inAttic + ` WHERE ` + keptLast

func scanOriginal(row scanner) (o Original, err error) {
	var kept int64
	err = row.Scan(&o.RecordingID, &o.ShelfID, &o.RunID, &o.JobID, &o.Path, &kept, &o.SHA256, &o.Stored, &o.Levelled, &o.Size, &o.Length)
	o.KeptAt = fromMillis(kept)
	return o, err
}

// KeepOriginal records that a recording's original is in the attic, before its place is taken: whatever
// happens next, it can be found. It counts as the last one kept even if the clock was set back. versions are other files that
// were in the recording's place and went to the attic with it; one that is there as an original stays that. Of each
// it takes RecordingID, JobID, SHA256, Stored, Levelled, Size, Length and Modified.
func (s *Store) KeepOriginal(ctx context.Context, o Original, versions ...Original) error {
	err := s.write(ctx, func(tx *sql.Tx) error {
		for _, v := range versions {
			kept, err := tx.ExecContext(ctx, `INSERT INTO attic (recording_id, sha256, job_id, stored, levelled, size, length, kept_at, kind)
				VALUES (?, ?, ?, ?, ?, ?, ?, ?, 'version') ON CONFLICT (recording_id, sha256) DO NOTHING`,
				v.RecordingID, v.SHA256, v.JobID, v.Stored, v.Levelled, v.Size, v.Length, now())
			if err != nil {
				return err
			}
			if n, err := kept.RowsAffected(); err != nil {
				return err
			} else if n == 0 { // by an attempt that was cut short
				continue
			}
			if err := tell(ctx, tx, Event{At: fromMillis(now()), RecordingID: v.RecordingID, JobID: v.JobID, What: "changed",
				Words: fmt.Sprintf("the file that was here, another version of the recording, went to the attic as %q", v.Stored)}); err != nil {
				return err
			}
		}
		_, err := tx.ExecContext(ctx, `INSERT INTO attic (recording_id, sha256, job_id, stored, levelled, size, length, kept_at)
			VALUES (?1, ?2, ?3, ?4, ?5, ?6, ?7, max(?8, (SELECT coalesce(max(kept_at), 0) + 1 FROM attic WHERE recording_id = ?1))) ON CONFLICT (recording_id, sha256)
			DO UPDATE SET job_id = excluded.job_id, stored = excluded.stored, levelled = excluded.levelled, size = excluded.size, length = excluded.length, kept_at = excluded.kept_at, kind = 'original'`,
			o.RecordingID, o.SHA256, o.JobID, o.Stored, o.Levelled, o.Size, o.Length, now())
		if err != nil {
			return err
		}
		// With the new file's size and time known, the next scan sees no change.
		var modified *int64
		if !o.Modified.IsZero() {
			modified = new(o.Modified.UnixMilli())
		}
		_, err = tx.ExecContext(ctx, `UPDATE recordings SET size = ?, modified_at = coalesce(?, modified_at), inode = 0 WHERE id = ?`, o.Size, modified, o.RecordingID)
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

// OriginalWithSound returns the original that the attic holds of a recording whose sound has a hash: what is on the shelf
// with that sound is the same recording with other tags. ErrNotFound if there is none.
func (s *Store) OriginalWithSound(ctx context.Context, recordingID int64, audioHash string) (o Original, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		o, err = one(ctx, tx, scanOriginal, fmt.Sprintf("original of recording %d with that sound", recordingID), inAttic+` WHERE `+isOriginal+` AND a.recording_id = ?
			AND EXISTS (SELECT 1 FROM readings WHERE job_id = coalesce(j.same_as, j.id) AND kind = 'before' AND audio_hash = ? AND audio_hash <> '')
			ORDER BY a.kept_at DESC LIMIT 1`, recordingID, audioHash)
		return err
	})
	return o, err
}

// Versions returns what the attic keeps beside the originals that are brought back: other versions of a recording, and
// originals of earlier files in its place. A page goes by recordings: it has all of up to q.Limit of them.
func (s *Store) Versions(ctx context.Context, q OriginalQuery) (list []Version, err error) {
	if q.Limit, err = pageLimit(q.Limit); err != nil {
		return nil, fmt.Errorf("versions in the attic: %w", err)
	}
	err = s.read(ctx, func(tx *sql.Tx) error {
		const beside = ` NOT (` + keptLast + `) AND (?2 = 0 OR r.shelf_id = ?2) AND (?3 = 0 OR j.run_id = ?3) AND (?5 = 0 OR a.recording_id = ?5)`
		list, err = collect(ctx, tx, func(row scanner) (v Version, err error) {
			var kept int64
			err = row.Scan(&v.RecordingID, &v.ShelfID, &v.RunID, &v.Path, &kept, &v.SHA256, &v.File, &v.Earlier)
			v.KeptAt = fromMillis(kept)
			return v, err
		}, `SELECT a.recording_id, r.shelf_id, j.run_id, r.path, a.kept_at, a.sha256, s.copies || '.attic/' || a.stored, a.kind = 'original'
			FROM attic a JOIN recordings r ON r.id = a.recording_id JOIN jobs j ON j.id = a.job_id JOIN shelves s ON s.id = r.shelf_id
			WHERE a.recording_id IN (SELECT DISTINCT a.recording_id FROM attic a JOIN recordings r ON r.id = a.recording_id JOIN jobs j ON j.id = a.job_id
				WHERE a.recording_id > ?1 AND`+beside+` ORDER BY a.recording_id LIMIT ?4)
			AND`+beside+` ORDER BY a.recording_id, a.kept_at`, q.After, q.ShelfID, q.RunID, q.Limit, q.RecordingID)
		return err
	})
	if err != nil {
		return nil, fmt.Errorf("versions in the attic: %w", err)
	}
	return list, nil
}

// KeptByOthers says of the recordings that a run wrote where the attic has their originals for other runs, which wrote
// them before or since.
func (s *Store) KeptByOthers(ctx context.Context, runID int64) (list []KeptBy, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		list, err = collect(ctx, tx, func(row scanner) (k KeptBy, err error) { return k, row.Scan(&k.RunID, &k.Originals) },
			`SELECT j.run_id, count(*) FROM jobs mine JOIN runs ON runs.id = mine.run_id JOIN attic a ON a.recording_id = mine.recording_id JOIN jobs j ON j.id = a.job_id
			WHERE mine.run_id = ?1 AND mine.state = 'done' AND runs.delivery IN ('replace', 'tags') AND j.run_id <> ?1 AND `+keptLast+`
			GROUP BY j.run_id ORDER BY j.run_id`, runID)
		return err
	})
	if err != nil {
		return nil, fmt.Errorf("originals of run %d: %w", runID, err)
	}
	return list, nil
}

// AtticOf counts what the attic has of a shelf.
func (s *Store) AtticOf(ctx context.Context, shelfID int64) (all AtticCount, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		return tx.QueryRowContext(ctx, `SELECT count(*) FILTER (WHERE `+keptLast+`), count(*) FILTER (WHERE NOT (`+keptLast+`)), coalesce(sum(CASE a.length WHEN 0 THEN a.size ELSE a.length END), 0)
			FROM attic a JOIN recordings r ON r.id = a.recording_id WHERE r.shelf_id = ?`, shelfID).Scan(&all.Originals, &all.Versions, &all.Bytes)
	})
	if err != nil {
		return all, fmt.Errorf("attic of shelf %d: %w", shelfID, err)
	}
	return all, nil
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
