package store

import (
	"context"
	"database/sql"
	"fmt"
)

// The queue is River's, and so is the table river_job. The store reaches into it where one statement in
// the transaction at hand replaces many calls: taking a cancelled run's jobs out, and giving back what a
// killed process had taken. This file is all it knows of River's schema.

const (
	// QueueKind is the kind of all our jobs in River's table. It is stored: never rename it.
	QueueKind = "level"
	// MaxAttempts is how often a job is tried, and how often it may take the program down with it.
	MaxAttempts = 3
)

// dequeue cancels the queue's entries for a run's waiting jobs.
func dequeue(ctx context.Context, tx *sql.Tx, runID int64) error {
	_, err := tx.ExecContext(ctx, `UPDATE river_job SET state = 'cancelled', finalized_at = datetime('now', 'subsec')
		WHERE kind = ? AND state IN ('available', 'scheduled', 'retryable')
			AND json_extract(args, '$.job_id') IN (SELECT id FROM jobs WHERE run_id = ? AND state = 'waiting')`, QueueKind, runID)
	if err != nil {
		return fmt.Errorf("dequeue: %w", err)
	}
	return nil
}

// freeQueue makes available at once what a killed process left "running" or waiting for a retry. River
// itself would only rescue it hours later, since it cannot know that nobody is working on it; the lock
// beside the database tells us. An attempt that was cut short is not counted: jobs.stops counts those. The
// dead process's leadership goes too, or River's upkeep would stand still until it expires.
func freeQueue(ctx context.Context, tx *sql.Tx) error {
	for _, query := range []string{
		`UPDATE river_job SET state = 'available', scheduled_at = datetime('now', 'subsec'),
			attempt = CASE state WHEN 'running' THEN max(attempt - 1, 0) ELSE attempt END
			WHERE state IN ('running', 'retryable')`,
		`UPDATE river_job SET state = 'cancelled', finalized_at = datetime('now', 'subsec')
			WHERE kind = '` + QueueKind + `' AND state IN ('available', 'scheduled')
				AND json_extract(args, '$.job_id') NOT IN (SELECT id FROM jobs WHERE state IN ('waiting', 'working'))`,
		`DELETE FROM river_leader`,
	} {
		if _, err := tx.ExecContext(ctx, query); err != nil {
			return fmt.Errorf("free the queue: %w", err)
		}
	}
	return nil
}

// Requeue calls enqueue with the waiting jobs that the queue has no live entry for, and returns how many
// there were. There are none unless the queue gave up on a job whose end could not be stored (a full
// disk); without this they would wait for ever. Call it before the queue starts.
func (s *Store) Requeue(ctx context.Context, enqueue func(ctx context.Context, tx *Tx, jobIDs []int64) error) (n int, err error) {
	err = s.write(ctx, func(tx *sql.Tx) error {
		lost, err := collect(ctx, tx, scanID, `SELECT id FROM jobs WHERE state = 'waiting' AND id NOT IN
			(SELECT json_extract(args, '$.job_id') FROM river_job
			WHERE kind = ? AND state IN ('available', 'scheduled', 'retryable', 'running', 'pending')) ORDER BY id`, QueueKind)
		if n = len(lost); err != nil || n == 0 {
			return err
		}
		return enqueue(ctx, tx, lost)
	})
	if err != nil {
		return 0, fmt.Errorf("requeue: %w", err)
	}
	return n, nil
}
