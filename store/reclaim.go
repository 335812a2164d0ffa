package store

import (
	"context"
	"database/sql"
	"fmt"
)

// Reclaim puts jobs that a killed process left behind back in the queue and returns how many it found.
// Nobody else can be working on them: one process owns the file. A job that was at work each of the
// MaxAttempts times the program died is failed, or it would take the program down for ever.
//
// Call it before the queue starts.
func (s *Store) Reclaim(ctx context.Context) (jobs int, err error) {
	err = s.write(ctx, func(tx *sql.Tx) error {
		left, err := collect(ctx, tx, scanJob, jobQuery+` WHERE j.state = 'working' ORDER BY j.id`)
		if err != nil {
			return err
		}
		jobs = len(left)
		at := now()
		for _, job := range left {
			if err := reclaim(ctx, tx, job, at); err != nil {
				return fmt.Errorf("job %d: %w", job.ID, err)
			}
		}
		return freeQueue(ctx, tx)
	})
	if err != nil {
		return 0, fmt.Errorf("reclaim: %w", err)
	}
	return jobs, nil
}

func reclaim(ctx context.Context, tx *sql.Tx, job Job, at int64) error {
	var stops int
	if err := tx.QueryRowContext(ctx, `UPDATE jobs SET stops = stops + 1 WHERE id = ? RETURNING stops`, job.ID).Scan(&stops); err != nil {
		return err
	}
	if stops >= MaxAttempts {
		return closeJob(ctx, tx, job, Failed, fmt.Sprintf("stopped the program %d times", stops), at)
	}
	return backToQueue(ctx, tx, job, "the program stopped while this was at work", at)
}
