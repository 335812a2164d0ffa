package store

import (
	"context"
	"database/sql"
	"errors"
	"fmt"
)

// A file that was tagged, moved or copied has other bytes or another path, and the same sound. Here it is known again
// by the hash of its decoded samples.

// Levelling is a levelling whose result is known by its sound.
type Levelling struct {
	JobID, RunID, RecordingID int64
	Path                      string    // of its recording
	Original                  *Original // what it was levelled from, if the attic has it
}

// Levelled returns the done levellings on a shelf whose result has a sound: first those of a recording (0: of none), then
// those of others that sound the same, the newest of each first.
func (s *Store) Levelled(ctx context.Context, shelfID, recordingID int64, audioHash string) (list []Levelling, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		list, err = collect(ctx, tx, func(row scanner) (l Levelling, err error) {
			return l, row.Scan(&l.JobID, &l.RunID, &l.RecordingID, &l.Path)
		}, `SELECT j.id, j.run_id, rec.id, rec.path FROM readings a JOIN jobs j ON j.id = a.job_id
			JOIN runs r ON r.id = j.run_id JOIN recordings rec ON rec.id = j.recording_id
			WHERE a.audio_hash = ? AND a.audio_hash <> '' AND a.kind = 'after' AND j.state = 'done' AND r.delivery IN ('copy', 'replace')
				AND rec.shelf_id = ? ORDER BY rec.id = ? DESC, a.id DESC LIMIT 100`, audioHash, shelfID, recordingID)
		for i := range list {
			if err == nil {
				list[i].Original, err = originalOf(ctx, tx, list[i])
			}
		}
		return err
	})
	if err != nil {
		return nil, fmt.Errorf("recordings with a sound: %w", err)
	}
	return list, nil
}

// originalOf finds in the attic what a job levelled. Later jobs may have levelled it too, so that it is theirs now: it
// is known by its own sound. A job without an original to find has nil.
func originalOf(ctx context.Context, tx *sql.Tx, l Levelling) (*Original, error) {
	o, err := one(ctx, tx, scanOriginal, "original", inAttic+` WHERE `+isOriginal+` AND a.recording_id = ? AND EXISTS (
			SELECT 1 FROM readings mine JOIN readings its ON its.audio_hash = mine.audio_hash AND its.job_id = coalesce(j.same_as, j.id) AND its.kind = 'before'
			WHERE mine.job_id = ? AND mine.kind = 'before' AND mine.audio_hash <> '')
		ORDER BY a.kept_at DESC LIMIT 1`, l.RecordingID, l.JobID)
	if errors.Is(err, ErrNotFound) {
		return nil, nil
	}
	return &o, err
}

// MovedFrom returns the recording that a job's file was before it was moved and perhaps tagged: the only one of the
// shelf that is missing and whose file had this sound. 0 if there is none, or if the job's recording has a story of its
// own, which is not to be mixed with another, or a job in a run that the other is in too.
func (s *Store) MovedFrom(ctx context.Context, jobID int64, audioHash string) (recordingID int64, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		job, err := findJob(ctx, tx, jobID)
		if err != nil {
			return err
		}
		// CROSS JOIN keeps SQLite to this order: the few readings with the sound first, not all recordings of the shelf.
		ids, err := collect(ctx, tx, scanID, `SELECT DISTINCT rec.id FROM readings a CROSS JOIN recordings rec CROSS JOIN recordings here
			WHERE a.audio_hash = ? AND a.audio_hash <> '' AND rec.id = a.recording_id AND rec.shelf_id = here.shelf_id
				AND here.id = ? AND here.missing = 0 AND rec.missing = 1
				AND a.id = CASE WHEN EXISTS (SELECT 1 FROM attic WHERE recording_id = rec.id) THEN coalesce(rec.after_id, rec.before_id) ELSE rec.before_id END
				AND NOT EXISTS (SELECT 1 FROM attic WHERE recording_id = here.id)
				AND NOT EXISTS (SELECT 1 FROM jobs WHERE recording_id = here.id AND state IN ('done', 'held', 'failed'))
			LIMIT 2`, audioHash, job.RecordingID)
		if err != nil || len(ids) != 1 {
			return err
		}
		return tx.QueryRowContext(ctx, `SELECT CASE WHEN EXISTS (SELECT 1 FROM jobs x JOIN jobs y ON y.run_id = x.run_id
			WHERE x.recording_id = ?1 AND y.recording_id = ?2) THEN 0 ELSE ?2 END`, job.RecordingID, ids[0]).Scan(&recordingID)
	})
	if err != nil {
		return 0, fmt.Errorf("what job %d was before: %w", jobID, err)
	}
	return recordingID, nil
}

// Follow has a missing recording follow its file to where a job found it: it takes the path, the jobs and the history of
// the job's recording, which was thought to be a new one and is no more. It returns what the job's work is then.
// ErrState if that does not fit any more.
func (s *Store) Follow(ctx context.Context, recordingID, jobID int64) (w Work, err error) {
	err = s.write(ctx, func(tx *sql.Tx) error {
		job, err := findJob(ctx, tx, jobID)
		if err != nil {
			return err
		}
		from, err := findRecording(ctx, tx, recordingID)
		if err != nil {
			return err
		}
		here, err := findRecording(ctx, tx, job.RecordingID)
		if err != nil {
			return err
		}
		if !from.Missing || here.Missing || from.ID == here.ID || from.ShelfID != here.ShelfID {
			return fmt.Errorf("recording %d is not what was moved: %w", recordingID, ErrState)
		}
		for _, step := range []struct {
			query string
			args  []any
		}{
			{`UPDATE jobs SET recording_id = ? WHERE recording_id = ?`, []any{from.ID, here.ID}},
			{`UPDATE readings SET recording_id = ? WHERE recording_id = ?`, []any{from.ID, here.ID}},
			{`UPDATE history SET recording_id = ? WHERE recording_id = ?`, []any{from.ID, here.ID}},
			{`UPDATE recordings SET (size, modified_at, inode, album, state, reason, job_id) =
				(SELECT size, modified_at, inode, album, state, reason, job_id FROM recordings WHERE id = ?), missing = 0 WHERE id = ?`, []any{here.ID, from.ID}},
			{`DELETE FROM recordings WHERE id = ?`, []any{here.ID}},
			{`UPDATE recordings SET path = ?, folded = ? WHERE id = ?`, []any{here.Path, fold(here.Path), from.ID}},
		} {
			if _, err := tx.ExecContext(ctx, step.query, step.args...); err != nil {
				return err
			}
		}
		if err := tell(ctx, tx, Event{At: fromMillis(now()), RecordingID: from.ID, What: "moved", Words: movedFrom(from.Path)}); err != nil {
			return err
		}
		w, err = findWork(ctx, tx, jobID)
		return err
	})
	if err != nil {
		return Work{}, fmt.Errorf("follow recording %d: %w", recordingID, err)
	}
	return w, nil
}

func movedFrom(path string) string { return fmt.Sprintf("moved here from %q", path) }
