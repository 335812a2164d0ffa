package store

import (
	"context"
	"database/sql"
	"fmt"
)

const eventColumns = `id, at, run_id, recording_id, job_id, what, words`

func scanEvent(row scanner) (e Event, err error) {
	var at int64
	err = row.Scan(&e.ID, &at, &e.RunID, &e.RecordingID, &e.JobID, &e.What, &e.Words)
	e.At = fromMillis(at)
	return e, err
}

// tell writes a line of history in the transaction that makes it true.
func tell(ctx context.Context, tx *sql.Tx, e Event) error {
	_, err := tx.ExecContext(ctx, `INSERT INTO history (at, run_id, recording_id, job_id, what, words) VALUES (?, ?, ?, ?, ?, ?)`,
		e.At.UnixMilli(), e.RunID, e.RecordingID, e.JobID, e.What, e.Words)
	if err != nil {
		return fmt.Errorf("history: %w", err)
	}
	return nil
}

// RunEvents returns up to limit events of a run after the event with the given id, oldest first. The first
// event of a run is run-started, the last one is run-finished, also for a run that was cancelled.
func (s *Store) RunEvents(ctx context.Context, runID, after int64, limit int) (list []Event, err error) {
	if limit, err = pageLimit(limit); err != nil {
		return nil, fmt.Errorf("events of run %d: %w", runID, err)
	}
	err = s.read(ctx, func(tx *sql.Tx) error {
		list, err = collect(ctx, tx, scanEvent, `SELECT `+eventColumns+` FROM history
			WHERE run_id = ? AND run_id <> 0 AND id > ? ORDER BY id LIMIT ?`, runID, after, limit)
		return err
	})
	if err != nil {
		return nil, fmt.Errorf("events of run %d: %w", runID, err)
	}
	return list, nil
}

// RecordingHistory returns all that happened to a recording, oldest first.
func (s *Store) RecordingHistory(ctx context.Context, recordingID int64) (list []Event, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		if _, err := findRecording(ctx, tx, recordingID); err != nil {
			return err
		}
		list, err = collect(ctx, tx, scanEvent, `SELECT `+eventColumns+` FROM history
			WHERE recording_id = ? AND recording_id <> 0 ORDER BY id`, recordingID)
		return err
	})
	if err != nil {
		return nil, fmt.Errorf("history: %w", err)
	}
	return list, nil
}
