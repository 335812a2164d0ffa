package store

import (
	"cmp"
	"context"
	"database/sql"
	"fmt"

	"evenshelf/engine/level"
)

// A job's way through its states; every arrow is one method here or in runs.go and reclaim.go:
//
//	             StartJob            FinishJob
//	waiting ───────────────▶ working ─────────▶ done, held, failed
//	   │  ▲                     │
//	   │  └── RetryJob, Reclaim ┘ (cancelled instead, if the run was cancelled meanwhile;
//	   ▼ CancelRun                 failed, if it took the program down MaxAttempts times)
//	cancelled

// StartJob marks a job as working and returns what is needed to do it. A job that is working already is
// started again: the queue hands out a job twice if its first end could not be stored. ErrState if it was
// cancelled or has ended.
func (s *Store) StartJob(ctx context.Context, jobID int64) (work Work, err error) {
	err = s.write(ctx, func(tx *sql.Tx) error {
		job, err := findJob(ctx, tx, jobID)
		if err != nil {
			return err
		}
		if job.State != Waiting && job.State != Working {
			return fmt.Errorf("it is %s: %w", job.State, ErrState)
		}
		at := now()
		if _, err := tx.ExecContext(ctx, `UPDATE jobs SET state = 'working', reason = '', attempts = attempts + 1, started_at = ? WHERE id = ?`, at, jobID); err != nil {
			return err
		}
		if _, err := tx.ExecContext(ctx, `UPDATE runs SET started_at = coalesce(started_at, ?) WHERE id = ?`, at, job.RunID); err != nil {
			return err
		}
		if err := showState(ctx, tx, job, Working, ""); err != nil {
			return err
		}
		if err := tell(ctx, tx, job.event(at, Working, "")); err != nil {
			return err
		}
		work, err = findWork(ctx, tx, jobID)
		return err
	})
	if err != nil {
		return Work{}, fmt.Errorf("start job %d: %w", jobID, err)
	}
	return work, nil
}

func findWork(ctx context.Context, tx *sql.Tx, jobID int64) (w Work, err error) {
	if w.Job, err = findJob(ctx, tx, jobID); err != nil {
		return w, err
	}
	if w.Recording, err = findRecording(ctx, tx, w.Job.RecordingID); err != nil {
		return w, err
	}
	if w.Shelf, err = findShelf(ctx, tx, w.Recording.ShelfID); err != nil {
		return w, err
	}
	if w.Profile, err = findProfile(ctx, tx, w.Job.ProfileVersion); err != nil {
		return w, err
	}
	run, err := findRun(ctx, tx, w.Job.RunID)
	w.Delivery = run.Delivery
	return w, err
}

// FinishJob stores readings, verdict and history; complete runs in the same transaction (it may be nil).
// ErrState if the job is not working: a job ends once.
func (s *Store) FinishJob(ctx context.Context, jobID int64, o level.Outcome, output string, complete func(ctx context.Context, tx *Tx) error) error {
	return s.finish(ctx, jobID, o.Verdict, complete, func(tx *sql.Tx, w Work, at int64) error {
		if err := storeReadings(ctx, tx, w, o, at); err != nil {
			return err
		}
		if err := storeDocuments(ctx, tx, jobID, o); err != nil {
			return err
		}
		seconds := 0.0
		if o.Before != nil {
			seconds = o.Before.Duration
		}
		_, err := tx.ExecContext(ctx, `UPDATE jobs SET output = ?, renders = ?, duration = ? WHERE id = ?`, output, o.Renders, seconds, jobID)
		return err
	})
}

// FinishSame ends a job for which nothing was done, as the result of an earlier job of the same recording still
// stands: it is done, with the plan and the readings of that one. Otherwise it is as FinishJob.
func (s *Store) FinishSame(ctx context.Context, jobID, earlier int64, reason string, complete func(ctx context.Context, tx *Tx) error) error {
	return s.finish(ctx, jobID, level.Verdict{State: level.Done, Reason: reason}, complete, func(tx *sql.Tx, w Work, at int64) error {
		same, err := tx.ExecContext(ctx, `UPDATE jobs SET same_as = did.id, output = did.output, duration = did.duration
			FROM (SELECT id, recording_id, output, duration FROM jobs WHERE id = (SELECT coalesce(same_as, id) FROM jobs WHERE id = ?)) AS did
			WHERE jobs.id = ? AND did.recording_id = jobs.recording_id`, earlier, jobID)
		if err != nil {
			return err
		}
		if n, err := same.RowsAffected(); err != nil || n == 0 {
			return cmp.Or(err, fmt.Errorf("job %d of the same recording: %w", earlier, ErrNotFound))
		}
		return showSame(ctx, tx, w)
	})
}

// finish ends a job; result stores what it came to.
func (s *Store) finish(ctx context.Context, jobID int64, v level.Verdict, complete func(ctx context.Context, tx *Tx) error,
	result func(tx *sql.Tx, w Work, at int64) error) error {
	end := JobState(v.State)
	if end != Done && end != Held && end != Failed {
		return fmt.Errorf("finish job %d: a job cannot end as %q: %w", jobID, end, ErrInvalid)
	}
	err := s.write(ctx, func(tx *sql.Tx) error {
		w, err := findWork(ctx, tx, jobID)
		if err != nil {
			return err
		}
		if w.Job.State != Working {
			return fmt.Errorf("it is %s: %w", w.Job.State, ErrState)
		}
		at := now()
		if err := result(tx, w, at); err != nil {
			return err
		}
		if _, err := tx.ExecContext(ctx, `UPDATE jobs SET state = ?, reason = ?, finished_at = ? WHERE id = ?`, string(end), v.Reason, at, jobID); err != nil {
			return err
		}
		if err := showVerdict(ctx, tx, w, end, v.Reason); err != nil {
			return err
		}
		if err := tell(ctx, tx, w.Job.event(at, end, v.Reason)); err != nil {
			return err
		}
		if err := endRun(ctx, tx, w.Job.RunID, at); err != nil {
			return err
		}
		if complete != nil {
			return complete(ctx, tx)
		}
		return nil
	})
	if err != nil {
		return fmt.Errorf("finish job %d: %w", jobID, err)
	}
	return nil
}

// newestEnded is the condition that no newer job of the recording has ended, so that this one's result is the
// latest there is. A newer job that waits has the say over the state only: it may yet be cancelled.
const newestEnded = `NOT EXISTS (SELECT 1 FROM jobs WHERE recording_id = recordings.id AND id > ? AND state IN ('done', 'held', 'failed'))`

// storeReadings stores what was measured and shows it on the recording if it is the latest. A levelling that
// delivered nothing clears the after figures; measuring and tagging leave them alone.
func storeReadings(ctx context.Context, tx *sql.Tx, w Work, o level.Outcome, at int64) error {
	show := func(query string, args ...any) error {
		_, err := tx.ExecContext(ctx, `UPDATE recordings SET `+query+` WHERE id = ? AND `+newestEnded, append(args, w.Recording.ID, w.Job.ID)...)
		return err
	}
	if a := o.Before; a != nil {
		id, err := insertReading(ctx, tx, w.Recording.ID, w.Job.ID, kindBefore, at, a)
		if err != nil {
			return err
		}
		args := append([]any{a.FormatName, a.Duration, len(a.Faults), id}, figuresOf(a)...)
		if err := show(`format = ?, duration = ?, faults = ?, before_id = ?, before_integrated = ?, before_range = ?,
			before_peak = ?, before_p10 = ?, before_p95 = ?`, args...); err != nil {
			return err
		}
	}
	if !w.Delivery.Levels() {
		if a := o.After; a != nil {
			_, err := insertReading(ctx, tx, w.Recording.ID, w.Job.ID, kindAfter, at, a)
			return err
		}
		return nil
	}
	args := []any{nil, nil, nil, nil, nil, nil}
	if a := o.After; a != nil {
		id, err := insertReading(ctx, tx, w.Recording.ID, w.Job.ID, kindAfter, at, a)
		if err != nil {
			return err
		}
		args = append([]any{id}, figuresOf(a)...)
	}
	return show(`after_id = ?, after_integrated = ?, after_range = ?, after_peak = ?, after_p10 = ?, after_p95 = ?`, args...)
}

// showSame shows the readings of the job whose result still stands on its recording, which a copy made since may
// have covered up.
func showSame(ctx context.Context, tx *sql.Tx, w Work) error {
	for _, kind := range []string{kindBefore, kindAfter} {
		_, err := tx.ExecContext(ctx, fmt.Sprintf(`UPDATE recordings SET %[1]s_id = r.id, %[1]s_integrated = r.integrated, %[1]s_range = r."range",
			%[1]s_peak = r.peak, %[1]s_p10 = r.p10, %[1]s_p95 = r.p95
			FROM readings r JOIN jobs j ON j.same_as = r.job_id WHERE r.kind = ? AND j.id = ? AND recordings.id = ? AND `+newestEnded, kind),
			kind, w.Job.ID, w.Recording.ID, w.Job.ID)
		if err != nil {
			return err
		}
	}
	return nil
}

// showVerdict shows the end of a job on its recording. Measuring or tagging well does not hide the verdict of an
// earlier levelling: a recording that is held stays held until it is levelled again.
func showVerdict(ctx context.Context, tx *sql.Tx, w Work, end JobState, reason string) error {
	var err error
	switch {
	case w.Delivery.Levels():
		if err := showState(ctx, tx, w.Job, end, reason); err != nil {
			return err
		}
		_, err = tx.ExecContext(ctx, `UPDATE recordings SET levelled = ?, levelled_reason = ?, profile = ? WHERE id = ? AND `+newestEnded,
			string(end), reason, w.Profile.Name, w.Recording.ID, w.Job.ID)
	case end == Done:
		_, err = tx.ExecContext(ctx, `UPDATE recordings SET state = CASE levelled WHEN '' THEN ?1 ELSE levelled END,
			reason = CASE levelled WHEN '' THEN ?2 ELSE levelled_reason END
			WHERE id = ?3 AND job_id <= ?4`, string(end), reason, w.Recording.ID, w.Job.ID)
	default:
		err = showState(ctx, tx, w.Job, end, reason)
	}
	return err
}

// showState shows a job's state on its recording, unless a newer job has the say there.
func showState(ctx context.Context, tx *sql.Tx, job Job, state JobState, reason string) error {
	_, err := tx.ExecContext(ctx, `UPDATE recordings SET state = ?, reason = ? WHERE id = ? AND job_id <= ?`,
		string(state), reason, job.RecordingID, job.ID)
	return err
}

func (j Job) event(at int64, state JobState, words string) Event {
	return Event{At: fromMillis(at), RunID: j.RunID, RecordingID: j.RecordingID, JobID: j.ID, What: string(state), Words: words}
}

// RetryJob puts a working job back to waiting after an error that may heal; if its run was cancelled
// meanwhile, it is cancelled. ErrState if it is not working.
func (s *Store) RetryJob(ctx context.Context, jobID int64, why string) error {
	err := s.write(ctx, func(tx *sql.Tx) error {
		job, err := findJob(ctx, tx, jobID)
		if err != nil {
			return err
		}
		if job.State != Working {
			return fmt.Errorf("it is %s: %w", job.State, ErrState)
		}
		return backToQueue(ctx, tx, job, why, now())
	})
	if err != nil {
		return fmt.Errorf("retry job %d: %w", jobID, err)
	}
	return nil
}

func backToQueue(ctx context.Context, tx *sql.Tx, job Job, why string, at int64) error {
	var cancelled bool
	if err := tx.QueryRowContext(ctx, `SELECT cancelled_at IS NOT NULL FROM runs WHERE id = ?`, job.RunID).Scan(&cancelled); err != nil {
		return err
	}
	if cancelled {
		return closeJob(ctx, tx, job, Cancelled, why, at)
	}
	if _, err := tx.ExecContext(ctx, `UPDATE jobs SET state = 'waiting', reason = ? WHERE id = ?`, why, job.ID); err != nil {
		return err
	}
	if err := showState(ctx, tx, job, Waiting, why); err != nil {
		return err
	}
	return tell(ctx, tx, job.event(at, Waiting, why))
}

// closeJob ends a job that has nothing to store but its state.
func closeJob(ctx context.Context, tx *sql.Tx, job Job, state JobState, why string, at int64) error {
	if _, err := tx.ExecContext(ctx, `UPDATE jobs SET state = ?, reason = ?, finished_at = ? WHERE id = ?`, string(state), why, at, job.ID); err != nil {
		return err
	}
	if err := showState(ctx, tx, job, state, why); err != nil {
		return err
	}
	if err := tell(ctx, tx, job.event(at, state, why)); err != nil {
		return err
	}
	return endRun(ctx, tx, job.RunID, at)
}
