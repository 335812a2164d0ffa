package store

import (
	"context"
	"database/sql"
	"fmt"
	"slices"
)

// jobQuery reads what was done from the job that did it, which may be an earlier one whose result still stood.
const jobQuery = `SELECT j.id, j.run_id, j.recording_id, rec.path, j.state, j.reason, j.output, coalesce(j.same_as, 0), j.renders, j.attempts,
		j.started_at, j.finished_at, p.name, p.version, did.plan, did.doubts, did.treatment, did.foreseen,
		b.id, b.integrated, b."range", b.peak, b.p10, b.p95, b.duration,
		a.id, a.integrated, a."range", a.peak, a.p10, a.p95, b.detail ->> 'speech_lufs', a.detail ->> 'speech_lufs'
	FROM jobs j
	JOIN jobs did ON did.id = coalesce(j.same_as, j.id)
	JOIN recordings rec ON rec.id = j.recording_id
	JOIN runs r ON r.id = j.run_id
	JOIN profiles p ON p.version = r.profile_version
	LEFT JOIN readings b ON b.job_id = did.id AND b.kind = 'before'
	LEFT JOIN readings a ON a.job_id = did.id AND a.kind = 'after'`

func scanJob(row scanner) (j Job, err error) {
	var started, finished sql.NullInt64
	var d documents
	var before, after storedFigures
	dest := []any{&j.ID, &j.RunID, &j.RecordingID, &j.Path, &j.State, &j.Reason, &j.Output, &j.SameAs, &j.Renders, &j.Attempts,
		&started, &finished, &j.Profile, &j.ProfileVersion, &d.plan, &d.doubts, &d.treatment, &d.foreseen}
	dest = append(append(append(dest, before.dest()...), &j.Duration), after.dest()...)
	dest = append(dest, &j.SpeechBefore, &j.SpeechAfter)
	if err := row.Scan(dest...); err != nil {
		return j, err
	}
	j.StartedAt, j.FinishedAt = fromNullMillis(started), fromNullMillis(finished)
	j.Before, j.After = before.figures(), after.figures()
	if err := d.into(&j); err != nil {
		return j, fmt.Errorf("job %d: %w", j.ID, err)
	}
	return j, nil
}

func findJob(ctx context.Context, tx *sql.Tx, id int64) (Job, error) {
	return one(ctx, tx, scanJob, fmt.Sprintf("job %d", id), jobQuery+` WHERE j.id = ?`, id)
}

// Job returns one job.
func (s *Store) Job(ctx context.Context, id int64) (j Job, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		j, err = findJob(ctx, tx, id)
		return err
	})
	return j, err
}

// Jobs returns a page of a run's jobs in id order, which is path order.
func (s *Store) Jobs(ctx context.Context, q JobQuery) (list []Job, err error) {
	fail := func(err error) ([]Job, error) { return nil, fmt.Errorf("jobs of run %d: %w", q.RunID, err) }
	limit, err := pageLimit(q.Limit)
	if err != nil {
		return fail(err)
	}
	w := conditions{}
	w.add("j.run_id = ?", q.RunID)
	w.add("j.id > ?", q.After)
	if q.State != "" {
		if !slices.Contains(jobStates, q.State) {
			return fail(fmt.Errorf("state %q: %w", q.State, ErrInvalid))
		}
		w.add("j.state = ?", string(q.State))
	}
	err = s.read(ctx, func(tx *sql.Tx) error {
		if _, err := findRun(ctx, tx, q.RunID); err != nil {
			return err
		}
		list, err = collect(ctx, tx, scanJob, jobQuery+w.where()+` ORDER BY j.id LIMIT ?`, append(w.args, limit)...)
		return err
	})
	if err != nil {
		return fail(err)
	}
	return list, nil
}

// RecordingJobs returns a recording's jobs, newest first.
func (s *Store) RecordingJobs(ctx context.Context, recordingID int64) (list []Job, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		if _, err := findRecording(ctx, tx, recordingID); err != nil {
			return err
		}
		list, err = collect(ctx, tx, scanJob, jobQuery+` WHERE j.recording_id = ? ORDER BY j.id DESC`, recordingID)
		return err
	})
	if err != nil {
		return nil, fmt.Errorf("jobs: %w", err)
	}
	return list, nil
}
