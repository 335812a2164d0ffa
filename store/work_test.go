package store

import (
	"context"
	"errors"
	"reflect"
	"slices"
	"testing"

	"evenshelf/engine/level"
)

func TestJobFromStartToEnd(t *testing.T) {
	f := open(t)
	rec := f.found("a.wav", "b.wav", "c.wav")
	run, jobs := f.run(Copy)
	if run.State != RunWaiting || run.Jobs != 3 || run.Waiting != 3 || run.StartedAt != nil || run.BytesTotal != 1000+1001+1002 || run.Target != -18 {
		t.Errorf("new run: %+v", run)
	}
	if r := f.byPath()["a.wav"]; r.State != Waiting || r.JobID != jobs[0] {
		t.Errorf("waiting recording: %+v", r)
	}
	w := f.start(jobs[0])
	if w.Job.State != Working || w.Job.Attempts != 1 || w.Job.StartedAt == nil || w.Recording.Path != "a.wav" || w.Recording.State != Working ||
		w.Shelf != f.shelf || w.Delivery != Copy || w.Profile != someProfile(t) {
		t.Errorf("work: %+v", w)
	}
	if r := f.getRun(run.ID); r.State != RunWorking || r.StartedAt == nil || r.Working != 1 || r.Waiting != 2 {
		t.Errorf("run at work: %+v", r)
	}

	f.finish(jobs[0], done(-30, -18), "a.wav")
	job, err := f.Job(f.ctx, jobs[0])
	if err != nil {
		t.Fatal(err)
	}
	if job.State != Done || job.Output != "a.wav" || job.Renders != 2 || job.FinishedAt == nil || job.Duration == nil || *job.Duration != 90 ||
		job.Plan == nil || !reflect.DeepEqual(*job.Plan, *done(0, 0).Plan) || job.ProfileVersion != someProfile(t).Version() {
		t.Errorf("job: %+v", job)
	}
	near(t, "job before", job.Before.Integrated, -30)
	near(t, "job after", job.After.Integrated, -18)
	r := f.byPath()["a.wav"]
	if r.State != Done || r.Format != "wav" || r.Faults != 1 || r.Profile != "rotation" || r.Reason != "" {
		t.Errorf("recording: %+v", r)
	}
	near(t, "range", r.Before.Range, 7.25)
	near(t, "peak", r.After.TruePeak, -6)
	near(t, "p10", r.Before.ShortTerm10, -35)
	near(t, "p95", r.Before.ShortTerm95, -26)
	near(t, "duration", r.Duration, 90)

	f.start(jobs[1])
	f.finish(jobs[1], held("noise was lifted"), "_held/b.wav")
	f.start(jobs[2])
	f.finish(jobs[2], failed("no sound in it"), "")
	if r := f.byPath()["c.wav"]; r.State != Failed || r.Reason != "no sound in it" || r.Before != nil || r.After != nil {
		t.Errorf("failed recording: %+v", r)
	}
	end := f.getRun(run.ID)
	if end.State != RunFinished || end.FinishedAt == nil || end.Done != 1 || end.Held != 1 || end.Failed != 1 ||
		end.SecondsDone != 180 || end.BytesDone != end.BytesTotal {
		t.Errorf("finished run: %+v", end)
	}
	events := f.events(run.ID)
	want := []string{"run-started", "working", "done", "working", "held", "working", "failed", "run-finished"}
	if !slices.Equal(whats(events), want) || events[7].Words != "1 done, 1 held, 1 failed" || events[0].Words != "3 recordings, profile rotation, copy" {
		t.Errorf("events: %+v", events)
	}
	if e := events[6]; e.RecordingID != rec["c.wav"].ID || e.JobID != jobs[2] || e.Words != "no sound in it" {
		t.Errorf("event: %+v", e)
	}
	list, err := f.Jobs(f.ctx, JobQuery{RunID: run.ID, After: jobs[0], Limit: 1})
	if err != nil || len(list) != 1 || list[0].Path != "b.wav" {
		t.Errorf("second page of jobs: %+v %v", list, err)
	}
	list, err = f.Jobs(f.ctx, JobQuery{RunID: run.ID, State: Failed})
	if err != nil || len(list) != 1 || list[0].ID != jobs[2] {
		t.Errorf("failed jobs: %+v %v", list, err)
	}
}

func TestJobEndsOnce(t *testing.T) {
	f := open(t)
	f.found("a.wav")
	run, jobs := f.run(Copy)
	id := jobs[0]
	if err := f.FinishJob(f.ctx, id, done(-30, -18), "", nil); !errors.Is(err, ErrState) {
		t.Errorf("finishing a job that never started: %v", err)
	}
	if err := f.RetryJob(f.ctx, id, ""); !errors.Is(err, ErrState) {
		t.Errorf("retrying a job that never started: %v", err)
	}
	f.start(id)
	broken := errors.New("the queue said no")
	if err := f.FinishJob(f.ctx, id, done(-30, -18), "a.wav", func(context.Context, *Tx) error { return broken }); !errors.Is(err, broken) {
		t.Fatal(err)
	}
	if r := f.byPath()["a.wav"]; r.State != Working || r.Before != nil {
		t.Errorf("a rolled-back end left traces: %+v", r)
	}
	if w := f.start(id); w.Job.Attempts != 2 { // the queue hands it out again
		t.Errorf("started again: %+v", w.Job)
	}
	if err := f.FinishJob(f.ctx, id, level.Outcome{}, "", nil); !errors.Is(err, ErrInvalid) {
		t.Errorf("an outcome without a verdict: %v", err)
	}
	torn := done(-30, -18)
	torn.After.Timeline.Peak = nil
	if err := f.FinishJob(f.ctx, id, torn, "", nil); !errors.Is(err, ErrInvalid) {
		t.Errorf("a torn timeline: %v", err)
	}
	f.finish(id, done(-30, -18), "a.wav")
	count := len(f.events(run.ID))
	if err := f.FinishJob(f.ctx, id, failed("late"), "", nil); !errors.Is(err, ErrState) {
		t.Errorf("finishing twice: %v", err)
	}
	if _, err := f.StartJob(f.ctx, id); !errors.Is(err, ErrState) {
		t.Errorf("starting an ended job: %v", err)
	}
	if err := f.RetryJob(f.ctx, id, ""); !errors.Is(err, ErrState) {
		t.Errorf("retrying an ended job: %v", err)
	}
	if got := f.events(run.ID); len(got) != count || f.byPath()["a.wav"].State != Done {
		t.Error("a refused change changed something")
	}
}

func TestRetry(t *testing.T) {
	f := open(t)
	f.found("a.wav")
	run, jobs := f.run(Copy)
	f.start(jobs[0])
	if err := f.RetryJob(f.ctx, jobs[0], "the disk is full"); err != nil {
		t.Fatal(err)
	}
	if r := f.byPath()["a.wav"]; r.State != Waiting || r.Reason != "the disk is full" {
		t.Errorf("%+v", r)
	}
	f.start(jobs[0])
	if r := f.byPath()["a.wav"]; r.State != Working || r.Reason != "" {
		t.Errorf("%+v", r)
	}
	if r, err := f.CancelRun(f.ctx, run.ID); err != nil || r.State != RunWorking || r.Working != 1 {
		t.Errorf("cancelled with a job at work: %+v %v", r, err)
	}
	if _, err := f.CancelRun(f.ctx, run.ID); !errors.Is(err, ErrState) {
		t.Errorf("cancelled twice: %v", err)
	}
	if err := f.RetryJob(f.ctx, jobs[0], "still full"); err != nil { // its run is cancelled: no further turn
		t.Fatal(err)
	}
	if r := f.getRun(run.ID); r.State != RunCancelled || r.Cancelled != 1 || r.FinishedAt == nil || r.BytesDone != 0 {
		t.Errorf("%+v", r)
	}
	want := []string{"run-started", "working", "waiting", "working", "run-cancelled", "cancelled", "run-finished"}
	if got := whats(f.events(run.ID)); !slices.Equal(got, want) {
		t.Errorf("events %q, want %q", got, want)
	}
}

func TestCancelRun(t *testing.T) {
	f := open(t)
	f.found("a.wav", "b.wav", "c.wav")
	first, jobs := f.run(Copy)
	f.start(jobs[0])
	f.finish(jobs[0], held("noise"), "_held/a.wav")
	f.start(jobs[1])
	r, err := f.CancelRun(f.ctx, first.ID)
	if err != nil || r.State != RunWorking || r.Cancelled != 1 {
		t.Errorf("%+v %v", r, err)
	}
	if _, err := f.StartJob(f.ctx, jobs[2]); !errors.Is(err, ErrState) {
		t.Errorf("a cancelled job was started: %v", err)
	}
	f.finish(jobs[1], done(-30, -18), "b.wav")
	if r := f.getRun(first.ID); r.State != RunCancelled || r.Done != 1 || r.Held != 1 || r.Cancelled != 1 {
		t.Errorf("%+v", r)
	}
	// A second run that never gets anywhere must not hide that a is held.
	second, _ := f.run(Copy)
	if r, err := f.CancelRun(f.ctx, second.ID); err != nil || r.State != RunCancelled {
		t.Errorf("%+v %v", r, err)
	}
	m := f.byPath()
	if m["a.wav"].State != Held || m["a.wav"].Reason != "noise" || m["b.wav"].State != Done || m["c.wav"].State != Cancelled {
		t.Errorf("%+v", m)
	}
	if _, err := f.CancelRun(f.ctx, second.ID); !errors.Is(err, ErrState) {
		t.Errorf("cancelling what has ended: %v", err)
	}
	if got := whats(f.events(second.ID)); !slices.Equal(got, []string{"run-started", "run-cancelled", "cancelled", "cancelled", "cancelled", "run-finished"}) {
		t.Errorf("events %q", got)
	}
}

func TestMeasuringKeepsTheVerdict(t *testing.T) {
	f := open(t)
	f.found("a.wav", "b.wav")
	_, jobs := f.run(Copy)
	f.start(jobs[0])
	f.finish(jobs[0], held("noise"), "_held/a.wav")
	f.start(jobs[1])
	f.finish(jobs[1], done(-30, -18), "b.wav")

	_, jobs = f.run(Measure)
	for _, id := range jobs {
		f.start(id)
		f.finish(id, level.Outcome{Before: analysis(-29), Verdict: level.Verdict{State: level.Done}}, "")
	}
	a, b := f.byPath()["a.wav"], f.byPath()["b.wav"]
	if a.State != Held || a.Reason != "noise" || b.State != Done || a.JobID != jobs[0] {
		t.Errorf("after measuring: %+v, %+v", a, b)
	}
	near(t, "measured again", b.Before.Integrated, -29)
	near(t, "after is kept", b.After.Integrated, -18)

	_, jobs = f.run(Copy) // a levelling that delivers nothing has no after
	f.start(jobs[1])
	f.finish(jobs[1], failed("damaged"), "")
	if b := f.byPath()["b.wav"]; b.After != nil || b.State != Failed || b.Before == nil {
		t.Errorf("%+v", b)
	}
	list, err := f.RecordingJobs(f.ctx, b.ID)
	if err != nil || len(list) != 3 || list[0].ID != jobs[1] {
		t.Errorf("jobs of b: %+v %v", list, err)
	}
}

// Two runs over one recording: the newer job has the say, whichever ends last.
func TestOlderJobEndsLater(t *testing.T) {
	f := open(t)
	f.found("a.wav")
	_, old := f.run(Copy)
	f.start(old[0])
	_, young := f.run(Copy)
	f.start(young[0])
	f.finish(young[0], done(-30, -18), "a.wav")
	f.finish(old[0], held("late"), "_held/a.wav")
	r := f.byPath()["a.wav"]
	if r.State != Done || r.JobID != young[0] {
		t.Errorf("%+v", r)
	}
	near(t, "before", r.Before.Integrated, -30)
}

func TestCreateRunRefuses(t *testing.T) {
	f := open(t)
	m := f.found("a.wav", "b/c.wav")
	other := f.addShelf("other")
	if _, err := f.Found(f.ctx, other.ID, "", files("z.wav")); err != nil {
		t.Fatal(err)
	}
	good := NewRun{ShelfID: f.shelf.ID, Profile: someProfile(t), Delivery: Copy}
	broken := errors.New("the queue said no")
	for what, c := range map[string]struct {
		change func(*NewRun)
		want   error
	}{
		"no such folder":            {func(n *NewRun) { n.Folder = "gone" }, ErrInvalid},
		"folder outside":            {func(n *NewRun) { n.Folder = "../x" }, ErrInvalid},
		"empty list":                {func(n *NewRun) { n.Recordings = []int64{} }, ErrInvalid},
		"unknown recording":         {func(n *NewRun) { n.Recordings = []int64{m["a.wav"].ID, 99} }, ErrNotFound},
		"another shelf's recording": {func(n *NewRun) { n.Recordings = []int64{3} }, ErrNotFound},
		"recording out of folder":   {func(n *NewRun) { n.Folder, n.Recordings = "b", []int64{m["a.wav"].ID} }, ErrNotFound},
		"delivery":                  {func(n *NewRun) { n.Delivery = "shred" }, ErrInvalid},
		"no delivery":               {func(n *NewRun) { n.Delivery = "" }, ErrInvalid},
		"no profile":                {func(n *NewRun) { n.Profile.Name = "" }, ErrInvalid},
		"queue":                     {func(*NewRun) {}, broken},
	} {
		n := good
		c.change(&n)
		_, err := f.CreateRun(f.ctx, n, func(context.Context, *Tx, []int64) error { return broken })
		if !errors.Is(err, c.want) {
			t.Errorf("%s: %v, want %v", what, err, c.want)
		}
	}
	if runs, err := f.Runs(f.ctx, 0, 0); err != nil || len(runs) != 0 {
		t.Errorf("a refused run was kept: %v %v", runs, err)
	}
	if r := f.byPath()["a.wav"]; r.State != "" || r.JobID != 0 {
		t.Errorf("a refused run left traces: %+v", r)
	}
	var ids []int64
	good.Recordings = []int64{m["b/c.wav"].ID, m["a.wav"].ID, m["b/c.wav"].ID} // one twice
	if _, err := f.CreateRun(f.ctx, good, func(_ context.Context, _ *Tx, jobs []int64) error { ids = jobs; return nil }); err != nil || len(ids) != 2 {
		t.Errorf("%v %v", ids, err)
	}
}

func TestRunsPaging(t *testing.T) {
	f := open(t)
	f.found("a.wav")
	var want []int64
	for range 5 {
		run, _ := f.run(Measure)
		want = append([]int64{run.ID}, want...)
	}
	var got []int64
	for before := int64(0); ; {
		page, err := f.Runs(f.ctx, 2, before)
		if err != nil {
			t.Fatal(err)
		}
		if len(page) == 0 {
			break
		}
		for _, r := range page {
			got = append(got, r.ID)
			before = r.ID
		}
	}
	if !slices.Equal(got, want) {
		t.Errorf("%v, want %v", got, want)
	}
}

// Two runs have asked for the same recording and the newer is cancelled: what the older makes of it is shown,
// whether its job had ended, was at work, or still waited then.
func TestCancelledRunHidesNoOlderOne(t *testing.T) {
	for why, when := range map[string]int{"ended": 2, "at work": 1, "waiting": 0} {
		t.Run(why, func(t *testing.T) {
			f := open(t)
			f.found("a.wav")
			_, older := f.run(Copy)
			newer, _ := f.run(Replace)
			steps := []func(){
				func() { f.start(older[0]) },
				func() { f.finish(older[0], done(-30, -18), "a.wav") },
			}
			for _, step := range steps[:when] {
				step()
			}
			if _, err := f.CancelRun(f.ctx, newer.ID); err != nil {
				t.Fatal(err)
			}
			for i, step := range steps[when:] {
				if got, want := f.byPath()["a.wav"].State, []JobState{Waiting, Working}[when+i]; got != want {
					t.Errorf("shown as %q, want %q", got, want)
				}
				step()
			}
			if r := f.byPath()["a.wav"]; r.State != Done || r.Before == nil || r.After == nil || r.Profile != "rotation" {
				t.Errorf("%+v", r)
			}
		})
	}
}
