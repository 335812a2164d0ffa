package store

import (
	"context"
	"database/sql"
	"encoding/json"
	"fmt"
	"slices"
	"strings"

	"evenshelf/engine/audio"
	"evenshelf/engine/profile"
)

const runQuery = `SELECT r.id, r.shelf_id, s.name, r.folder, p.name, p.version, p.target, p.document, r.delivery,
		r.created_at, r.started_at, r.cancelled_at, r.finished_at,
		r.waiting, r.working, r.done, r.held, r.failed, r.cancelled, r.seconds_done, r.bytes_done, r.bytes_total
	FROM runs r JOIN shelves s ON s.id = r.shelf_id JOIN profiles p ON p.version = r.profile_version`

func scanRun(row scanner) (r Run, err error) {
	var created int64
	var started, cancelled, finished sql.NullInt64
	var document []byte
	err = row.Scan(&r.ID, &r.ShelfID, &r.ShelfName, &r.Folder, &r.Profile, &r.ProfileVersion, &r.Target, &document, &r.Delivery,
		&created, &started, &cancelled, &finished,
		&r.Waiting, &r.Working, &r.Done, &r.Held, &r.Failed, &r.Cancelled, &r.SecondsDone, &r.BytesDone, &r.BytesTotal)
	if err != nil {
		return r, err
	}
	r.Tolerance, r.Ceiling = audio.LU(audio.Undefined), audio.DBTP(audio.Undefined)
	if p, err := profile.UnmarshalStored(document); err == nil { // one that cannot be read hides no run
		r.Tolerance, r.Ceiling = p.Tolerance, p.Ceiling
		r.Format, r.BitRate, r.Group = p.Delivered.Format, p.Delivered.BitRate, p.Group
	}
	r.CreatedAt, r.StartedAt, r.FinishedAt = fromMillis(created), fromNullMillis(started), fromNullMillis(finished)
	r.Jobs = r.Waiting + r.Working + r.Done + r.Held + r.Failed + r.Cancelled
	switch {
	case r.Waiting+r.Working > 0 && r.StartedAt != nil:
		r.State = RunWorking
	case r.Waiting+r.Working > 0:
		r.State = RunWaiting
	case cancelled.Valid:
		r.State = RunCancelled
	default:
		r.State = RunFinished
	}
	return r, nil
}

func findRun(ctx context.Context, tx *sql.Tx, id int64) (Run, error) {
	return one(ctx, tx, scanRun, fmt.Sprintf("run %d", id), runQuery+` WHERE r.id = ?`, id)
}

// Run returns one run. A cancelled run is "working" until the jobs that were at work have ended.
func (s *Store) Run(ctx context.Context, id int64) (r Run, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		r, err = findRun(ctx, tx, id)
		return err
	})
	return r, err
}

// Runs returns up to limit runs, newest first, older than the run with the id before (0 = the newest).
func (s *Store) Runs(ctx context.Context, limit int, before int64) (list []Run, err error) {
	if limit, err = pageLimit(limit); err != nil {
		return nil, fmt.Errorf("runs: %w", err)
	}
	err = s.read(ctx, func(tx *sql.Tx) error {
		list, err = collect(ctx, tx, scanRun, runQuery+` WHERE ?1 = 0 OR r.id < ?1 ORDER BY r.id DESC LIMIT ?2`, before, limit)
		return err
	})
	if err != nil {
		return nil, fmt.Errorf("runs: %w", err)
	}
	return list, nil
}

// CreateRun stores the run, its profile version and one waiting job a recording, in path order, and calls
// enqueue inside the same transaction. Recordings missing from the disk are left out unless they are
// listed by id; their jobs will fail and say so. A run without recordings is an error.
func (s *Store) CreateRun(ctx context.Context, n NewRun, enqueue func(ctx context.Context, tx *Tx, jobIDs []int64) error) (run Run, err error) {
	err = s.write(ctx, func(tx *sql.Tx) error {
		shelf, err := findShelf(ctx, tx, n.ShelfID)
		if err != nil {
			return err
		}
		pick, err := n.pick(ctx, tx)
		if err != nil {
			return err
		}
		if err := saveProfile(ctx, tx, n.Profile); err != nil {
			return err
		}
		at := now()
		id, err := one(ctx, tx, scanID, "run", `
			INSERT INTO runs (shelf_id, folder, profile_version, delivery, created_at) VALUES (?, ?, ?, ?, ?) RETURNING id`,
			n.ShelfID, n.Folder, n.Profile.Version(), string(n.Delivery), at)
		if err != nil {
			return err
		}
		jobs, err := insertJobs(ctx, tx, id, pick)
		if err != nil {
			return err
		}
		if len(jobs) == 0 {
			return fmt.Errorf("there are no recordings in %q on shelf %q: %w", n.Folder, shelf.Name, ErrInvalid)
		}
		if run, err = findRun(ctx, tx, id); err != nil {
			return err
		}
		words := fmt.Sprintf("%d recordings, profile %s, %s", len(jobs), run.Profile, run.Delivery)
		if err := tell(ctx, tx, Event{At: fromMillis(at), RunID: id, What: "run-started", Words: words}); err != nil {
			return err
		}
		return enqueue(ctx, tx, jobs)
	})
	if err != nil {
		return Run{}, fmt.Errorf("create run: %w", err)
	}
	return run, nil
}

// pick returns which recordings the run is about.
func (n NewRun) pick(ctx context.Context, tx *sql.Tx) (w conditions, err error) {
	if !slices.Contains(Deliveries, n.Delivery) {
		return w, fmt.Errorf("delivery %q: %w", n.Delivery, ErrInvalid)
	}
	if err := checkFolder(n.Folder); err != nil {
		return w, err
	}
	w.add("shelf_id = ?", n.ShelfID)
	w.folder("path", n.Folder)
	if n.Recordings == nil {
		w.add("missing = 0")
		return w, nil
	}
	ids, err := json.Marshal(n.Recordings)
	if err != nil {
		return w, err
	}
	strangers, err := collect(ctx, tx, scanID, `SELECT value FROM json_each(?) WHERE value NOT IN (SELECT id FROM recordings`+w.where()+`) LIMIT 1`,
		append([]any{string(ids)}, w.args...)...)
	if err != nil {
		return w, err
	}
	if len(strangers) > 0 {
		return w, fmt.Errorf("recording %d in folder %q of shelf %d: %w", strangers[0], n.Folder, n.ShelfID, ErrNotFound)
	}
	w.add("id IN (SELECT value FROM json_each(?))", string(ids))
	return w, nil
}

// Paths are those of the recordings that a run would be about, in no order. Errors as for CreateRun.
func (s *Store) Paths(ctx context.Context, n NewRun) (paths []string, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		pick, err := n.pick(ctx, tx)
		if err != nil {
			return err
		}
		paths, err = collect(ctx, tx, func(row scanner) (p string, err error) { return p, row.Scan(&p) }, `SELECT path FROM recordings`+pick.where(), pick.args...)
		return err
	})
	if err != nil {
		return nil, fmt.Errorf("recordings of a run: %w", err)
	}
	return paths, nil
}

// insertJobs makes a waiting job for each recording that matches and returns their ids in path order.
func insertJobs(ctx context.Context, tx *sql.Tx, runID int64, pick conditions) ([]int64, error) {
	if _, err := tx.ExecContext(ctx, `INSERT INTO jobs (run_id, recording_id, bytes)
		SELECT ?, id, size FROM recordings`+pick.where()+` ORDER BY path`, append([]any{runID}, pick.args...)...); err != nil {
		return nil, fmt.Errorf("jobs: %w", err)
	}
	if _, err := tx.ExecContext(ctx, `UPDATE recordings SET state = 'waiting', reason = '', job_id = jobs.id
		FROM jobs WHERE jobs.run_id = ? AND recordings.id = jobs.recording_id`, runID); err != nil {
		return nil, fmt.Errorf("jobs: %w", err)
	}
	return collect(ctx, tx, scanID, `SELECT id FROM jobs WHERE run_id = ? ORDER BY id`, runID)
}

// CancelRun turns waiting jobs into cancelled ones, here and in the queue; jobs at work finish. ErrState if
// the run has ended or was cancelled already.
func (s *Store) CancelRun(ctx context.Context, id int64) (run Run, err error) {
	err = s.write(ctx, func(tx *sql.Tx) error {
		run, err = findRun(ctx, tx, id)
		if err != nil {
			return err
		}
		if run.Waiting+run.Working == 0 {
			return fmt.Errorf("it has ended: %w", ErrState)
		}
		at := now()
		marked, err := tx.ExecContext(ctx, `UPDATE runs SET cancelled_at = ? WHERE id = ? AND cancelled_at IS NULL`, at, id)
		if err != nil {
			return err
		}
		if n, err := marked.RowsAffected(); err != nil {
			return err
		} else if n == 0 {
			return fmt.Errorf("it was cancelled already: %w", ErrState)
		}
		words := fmt.Sprintf("%d recordings not begun, %d still at work", run.Waiting, run.Working)
		if err := tell(ctx, tx, Event{At: fromMillis(at), RunID: id, What: "run-cancelled", Words: words}); err != nil {
			return err
		}
		if err := cancelWaiting(ctx, tx, id, at); err != nil {
			return err
		}
		if err := endRun(ctx, tx, id, at); err != nil {
			return err
		}
		run, err = findRun(ctx, tx, id)
		return err
	})
	if err != nil {
		return Run{}, fmt.Errorf("cancel run %d: %w", id, err)
	}
	return run, nil
}

// cancelWaiting takes a run's waiting jobs out of the queue. A recording that an earlier run is still to work on
// shows that run's job again, and later its end; one with an earlier verdict gets that back.
func cancelWaiting(ctx context.Context, tx *sql.Tx, runID, at int64) error {
	if err := dequeue(ctx, tx, runID); err != nil {
		return err
	}
	for _, step := range []struct {
		query string
		args  []any
	}{
		{`INSERT INTO history (at, run_id, recording_id, job_id, what, words)
			SELECT ?, run_id, recording_id, id, 'cancelled', 'the run was cancelled before its turn came'
			FROM jobs WHERE run_id = ? AND state = 'waiting' ORDER BY id`, []any{at, runID}},
		{`UPDATE recordings SET state = CASE levelled WHEN '' THEN 'cancelled' ELSE levelled END, reason = levelled_reason
			WHERE job_id IN (SELECT id FROM jobs WHERE run_id = ? AND state = 'waiting')`, []any{runID}},
		{`UPDATE jobs SET state = 'cancelled', finished_at = ? WHERE run_id = ? AND state = 'waiting'`, []any{at, runID}},
		{`UPDATE recordings SET state = still.state, reason = still.reason, job_id = still.id
			FROM (SELECT id, recording_id, state, reason FROM jobs AS j WHERE state IN ('waiting', 'working')
				AND NOT EXISTS (SELECT 1 FROM jobs WHERE recording_id = j.recording_id AND id > j.id AND state <> 'cancelled')) AS still
			WHERE recordings.id = still.recording_id AND recordings.job_id IN (SELECT id FROM jobs WHERE run_id = ? AND state = 'cancelled')`, []any{runID}},
	} {
		if _, err := tx.ExecContext(ctx, step.query, step.args...); err != nil {
			return err
		}
	}
	return nil
}

// endRun closes a run whose jobs have all ended; otherwise it does nothing.
func endRun(ctx context.Context, tx *sql.Tx, runID, at int64) error {
	ended, err := tx.ExecContext(ctx, `UPDATE runs SET finished_at = ?
		WHERE id = ? AND finished_at IS NULL AND waiting = 0 AND working = 0`, at, runID)
	if err != nil {
		return err
	}
	if n, err := ended.RowsAffected(); err != nil || n == 0 {
		return err
	}
	run, err := findRun(ctx, tx, runID)
	if err != nil {
		return err
	}
	return tell(ctx, tx, Event{At: fromMillis(at), RunID: runID, What: "run-finished", Words: run.tally()})
}

// tally counts how the jobs ended, in words: "41 done, 2 held, 1 failed".
func (r Run) tally() string {
	var parts []string
	for _, p := range []struct {
		n    int
		what JobState
	}{{r.Done, Done}, {r.Held, Held}, {r.Failed, Failed}, {r.Cancelled, Cancelled}} {
		if p.n > 0 {
			parts = append(parts, fmt.Sprintf("%d %s", p.n, p.what))
		}
	}
	return strings.Join(parts, ", ")
}
