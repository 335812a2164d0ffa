package store

import (
	"context"
	"database/sql"
	"errors"
	"slices"
	"testing"

	"pgregory.net/rapid"

	"evenshelf/engine/level"
)

// river enters jobs the way River does, as far as the store cares.
func river(ctx context.Context, tx *sql.Tx, ids []int64) error {
	for _, id := range ids {
		if _, err := tx.ExecContext(ctx, `INSERT INTO river_job (args, kind, max_attempts) VALUES (jsonb_object('job_id', ?), ?, 3)`, id, QueueKind); err != nil {
			return err
		}
	}
	return nil
}

func (f *fixture) queued(jobID int64) (state string, attempt int) {
	f.t.Helper()
	err := f.writer.QueryRow(`SELECT state, attempt FROM river_job WHERE json_extract(args, '$.job_id') = ? ORDER BY id DESC LIMIT 1`, jobID).Scan(&state, &attempt)
	if err != nil && !errors.Is(err, sql.ErrNoRows) {
		f.t.Fatal(err)
	}
	return state, attempt
}

func (f *fixture) exec(query string, args ...any) {
	f.t.Helper()
	if _, err := f.writer.Exec(query, args...); err != nil {
		f.t.Fatal(err)
	}
}

func (f *fixture) queueRun() (run Run, jobs []int64) {
	f.t.Helper()
	run, err := f.CreateRun(f.ctx, NewRun{ShelfID: f.shelf.ID, Profile: someProfile(f.t), Delivery: Copy},
		func(ctx context.Context, tx *Tx, ids []int64) error { jobs = ids; return river(ctx, tx, ids) })
	if err != nil {
		f.t.Fatal(err)
	}
	return run, jobs
}

func TestCancelTakesJobsOutOfTheQueue(t *testing.T) {
	f := open(t)
	f.found("a.wav", "b.wav")
	first, jobs := f.queueRun()
	_, others := f.queueRun()
	f.start(jobs[0])
	f.exec(`UPDATE river_job SET state = 'running', attempt = 1 WHERE json_extract(args, '$.job_id') = ?`, jobs[0])
	if _, err := f.CancelRun(f.ctx, first.ID); err != nil {
		t.Fatal(err)
	}
	for id, want := range map[int64]string{jobs[0]: "running", jobs[1]: "cancelled", others[0]: "available", others[1]: "available"} {
		if got, _ := f.queued(id); got != want {
			t.Errorf("queue entry of job %d: %s, want %s", id, got, want)
		}
	}
}

func TestReclaim(t *testing.T) {
	f := open(t)
	f.found("a.wav", "b.wav", "c.wav")
	run, jobs := f.queueRun()
	for kill := 1; kill <= MaxAttempts; kill++ {
		f.start(jobs[0])
		f.exec(`UPDATE river_job SET state = 'running', attempt = attempt + 1 WHERE json_extract(args, '$.job_id') = ?`, jobs[0])
		f.exec(`INSERT INTO river_leader (elected_at, expires_at, leader_id, name) VALUES ('2024-01-01', '2024-01-02', 'the dead', 'default')`)
		f.exec(`UPDATE river_job SET state = 'retryable', scheduled_at = '2999-01-01' WHERE json_extract(args, '$.job_id') = ?`, jobs[1])
		f.Close() // as far as the file can tell, the program was killed here
		f.reopen()
		n, err := f.Reclaim(f.ctx)
		if err != nil || n != 1 {
			t.Fatal(n, err)
		}
		state, attempt := f.queued(jobs[0])
		job, err := f.Job(f.ctx, jobs[0])
		if err != nil {
			t.Fatal(err)
		}
		if kill < MaxAttempts {
			if state != "available" || attempt != 0 || job.State != Waiting {
				t.Errorf("kill %d: queue %s, attempt %d, job %+v", kill, state, attempt, job)
			}
		} else if state != "cancelled" || job.State != Failed || job.Reason != "stopped the program 3 times" || f.byPath()["a.wav"].Reason != job.Reason {
			t.Errorf("kill %d: queue %s, job %+v", kill, state, job)
		}
		if state, _ := f.queued(jobs[1]); state != "available" {
			t.Errorf("a retry is still put off: %s", state)
		}
		var leaders int
		if err := f.writer.QueryRow(`SELECT count(*) FROM river_leader`).Scan(&leaders); err != nil || leaders != 0 {
			t.Errorf("the dead still lead: %d %v", leaders, err)
		}
	}
	if n, err := f.Reclaim(f.ctx); n != 0 || err != nil {
		t.Errorf("nothing to reclaim: %d %v", n, err)
	}
	want := []string{"run-started", "working", "waiting", "working", "waiting", "working", "failed"}
	if got := whats(f.events(run.ID)); !slices.Equal(got, want) {
		t.Errorf("events %q, want %q", got, want)
	}

	// Of a run that was cancelled, a job that was at work is cancelled too, and the run ends.
	f.start(jobs[1])
	if _, err := f.CancelRun(f.ctx, run.ID); err != nil {
		t.Fatal(err)
	}
	if n, err := f.Reclaim(f.ctx); n != 1 || err != nil {
		t.Fatal(n, err)
	}
	if r := f.getRun(run.ID); r.State != RunCancelled || r.Cancelled != 2 || r.Failed != 1 {
		t.Errorf("%+v", r)
	}
}

func TestRequeue(t *testing.T) {
	f := open(t)
	f.found("a.wav", "b.wav", "c.wav")
	_, jobs := f.queueRun()
	f.exec(`DELETE FROM river_job WHERE json_extract(args, '$.job_id') = ?`, jobs[1])
	f.exec(`UPDATE river_job SET state = 'discarded', finalized_at = '2024-01-01' WHERE json_extract(args, '$.job_id') = ?`, jobs[2])
	var lost []int64
	enqueue := func(ctx context.Context, tx *Tx, ids []int64) error { lost = ids; return river(ctx, tx, ids) }
	if n, err := f.Requeue(f.ctx, enqueue); n != 2 || err != nil || !slices.Equal(lost, jobs[1:]) {
		t.Errorf("%d %v %v", n, lost, err)
	}
	if n, err := f.Requeue(f.ctx, enqueue); n != 0 || err != nil {
		t.Errorf("again: %d %v", n, err)
	}
}

// Whatever happens in whatever order: counters agree with the jobs, event ids grow, a run ends when its
// last job does, and every change wakes those who wait, after it can be seen.
func TestRunsAddUp(t *testing.T) {
	f := open(t)
	f.found("a.wav", "b.wav", "c.wav", "d.wav")
	rapid.Check(t, func(t *rapid.T) {
		run, jobs := f.run(Delivery(rapid.SampledFrom([]string{"copy", "measure"}).Draw(t, "delivery")))
		for range rapid.IntRange(0, 25).Draw(t, "steps") {
			id := rapid.SampledFrom(jobs).Draw(t, "job")
			before, changed := len(f.events(run.ID)), f.Changed()
			var err error
			switch rapid.IntRange(0, 6).Draw(t, "step") {
			case 0, 1:
				_, err = f.StartJob(f.ctx, id)
			case 2, 3:
				err = f.FinishJob(f.ctx, id, rapid.SampledFrom(outcomes).Draw(t, "outcome"), "", nil)
			case 4:
				err = f.RetryJob(f.ctx, id, "why")
			case 5:
				_, err = f.CancelRun(f.ctx, run.ID)
			case 6:
				_, err = f.Reclaim(f.ctx)
			}
			if err != nil && !errors.Is(err, ErrState) {
				t.Fatal(err)
			}
			if len(f.events(run.ID)) > before {
				select {
				case <-changed:
				default:
					t.Fatal("something changed and nobody was told")
				}
			}
			f.checkRun(t, run.ID)
		}
		if _, err := f.CancelRun(f.ctx, run.ID); err != nil && !errors.Is(err, ErrState) {
			t.Fatal(err)
		}
	})
}

var outcomes = []level.Outcome{done(-30, -18), held("noise"), failed("no sound")}

func (f *fixture) checkRun(t *rapid.T, id int64) {
	r := f.getRun(id)
	jobs, err := f.Jobs(f.ctx, JobQuery{RunID: id})
	if err != nil {
		t.Fatal(err)
	}
	count := map[JobState]int{}
	var seconds float64
	for _, j := range jobs {
		count[j.State]++
		if j.Duration != nil && j.State != Cancelled {
			seconds += *j.Duration
		}
	}
	if r.Waiting != count[Waiting] || r.Working != count[Working] || r.Done != count[Done] || r.Held != count[Held] ||
		r.Failed != count[Failed] || r.Cancelled != count[Cancelled] || r.SecondsDone != seconds {
		t.Fatalf("run %+v, jobs %v, %g s", r, count, seconds)
	}
	ended := count[Waiting]+count[Working] == 0
	if ended != (r.State == RunFinished || r.State == RunCancelled) || ended != (r.FinishedAt != nil) {
		t.Fatalf("run %+v, jobs %v", r, count)
	}
	events := f.events(id)
	for i := 1; i < len(events); i++ {
		if events[i].ID <= events[i-1].ID {
			t.Fatalf("event ids: %+v", events)
		}
	}
	if ended != (events[len(events)-1].What == "run-finished") {
		t.Fatalf("last event %+v, run %+v", events[len(events)-1], r)
	}
	// A follower that reads in small steps sees the same.
	var pieces []Event
	for after := int64(0); ; {
		some, err := f.RunEvents(f.ctx, id, after, 2)
		if err != nil {
			t.Fatal(err)
		}
		if len(some) == 0 {
			break
		}
		pieces = append(pieces, some...)
		after = some[len(some)-1].ID
	}
	if !slices.Equal(pieces, events) {
		t.Fatalf("in pieces %v, at once %v", pieces, events)
	}
}

// Whoever is woken must find the change: the signal comes after the commit. A refused change wakes nobody.
func TestChangedComesAfterTheCommit(t *testing.T) {
	f := open(t)
	f.found("a.wav")
	_, jobs := f.run(Copy)
	changed := f.Changed()
	seen := make(chan JobState)
	go func() {
		<-changed
		job, err := f.Job(context.Background(), jobs[0])
		if err != nil {
			t.Error(err)
		}
		seen <- job.State
	}()
	f.start(jobs[0])
	if got := <-seen; got != Working {
		t.Errorf("woken and found %q", got)
	}
	changed = f.Changed()
	if err := f.FinishJob(f.ctx, jobs[0], done(-30, -18), "", func(context.Context, *Tx) error { return errors.New("no") }); err == nil {
		t.Fatal("no error")
	}
	select {
	case <-changed:
		t.Error("a change that was rolled back woke somebody")
	default:
	}
}
