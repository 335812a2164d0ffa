package worker

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"sync/atomic"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/level"
	"evenshelf/engine/profile"
	"evenshelf/store"
	"evenshelf/worker/delivery"
	"evenshelf/worker/discover"
)

func TestFiftyJobs(t *testing.T) {
	b := newBench(t, numbered(50)...)
	both := make(chan struct{})
	var arrived atomic.Int32
	e := &engine{hook: func(ctx context.Context, _ string) error {
		if arrived.Add(1) == 2 {
			close(both)
		}
		select {
		case <-both: // the first waits for a second beside it
			return nil
		case <-ctx.Done():
			return ctx.Err()
		}
	}}
	s := b.startService(e, 2)
	run := b.wait(b.begin(s, store.Copy).ID, ended)
	if run.State != store.RunFinished || run.Done != 50 || run.SecondsDone != 50*60 {
		t.Errorf("%+v", run)
	}
	if got := b.copies(); len(got) != 50 {
		t.Errorf("copies: %q", got)
	}
	for name, job := range b.jobs(run.ID) {
		if job.Output != name || job.Attempts != 1 || b.content(name) != "levelled sound of "+name {
			t.Errorf("%s: %+v", name, job)
		}
	}
	if e.peak.Load() != 2 {
		t.Errorf("at most %d jobs at once, want 2", e.peak.Load())
	}
}

func TestMeasure(t *testing.T) {
	b := newBench(t, "a.wav", "broken.wav")
	e := &engine{hook: func(_ context.Context, source string) error {
		if strings.Contains(source, "broken") {
			return errors.New("broken.wav: no sound in it")
		}
		return nil
	}}
	s := b.startService(e, 1)
	run := b.wait(b.begin(s, store.Measure).ID, ended)
	jobs := b.jobs(run.ID)
	if j := jobs["a.wav"]; j.State != store.Done || j.Before == nil || j.After != nil || j.Output != "" {
		t.Errorf("%+v", j)
	}
	if j := jobs["broken.wav"]; j.State != store.Failed || j.Reason != "broken.wav: no sound in it" || j.Attempts != 1 {
		t.Errorf("%+v", j)
	}
	if got := b.copies(); len(got) != 0 {
		t.Errorf("measuring wrote %q", got)
	}
}

// A run that only measures counts a single channel as its profile says, and looks for everything. A recording that
// was measured before, perhaps by another rule, is measured again: no reading is ever taken from an earlier run.
func TestMeasureGoesByTheProfile(t *testing.T) {
	b := newBench(t, "a.wav")
	e := &engine{}
	s := b.startService(e, 1)
	b.wait(b.begin(s, store.Measure).ID, ended)
	if want := (level.Options{Mono: audio.OneChannel}); e.how != want {
		t.Errorf("measured with %+v, want %+v", e.how, want)
	}
	p, err := profile.Named("rotation")
	if err != nil {
		t.Fatal(err)
	}
	p.Mono = audio.TwoLoudspeakers
	run, err := s.StartRun(b.ctx, store.NewRun{ShelfID: b.shelf.ID, Profile: p, Delivery: store.Measure})
	if err != nil {
		t.Fatal(err)
	}
	b.wait(run.ID, ended)
	if want := (level.Options{Mono: audio.TwoLoudspeakers}); e.how != want || e.times("a.wav") != 2 {
		t.Errorf("measured %d times, last with %+v, want twice and %+v", e.times("a.wav"), e.how, want)
	}
}

func TestHeldGoesToItsOwnTree(t *testing.T) {
	if delivery.Held != discover.Held {
		t.Errorf("delivery writes to %s, discover passes over %s", delivery.Held, discover.Held)
	}
	b := newBench(t, "a.wav", "x/doubtful.wav")
	s := b.startService(&engine{}, 1)
	run := b.wait(b.begin(s, store.Copy).ID, ended)
	if j := b.jobs(run.ID)["x/doubtful.wav"]; j.State != store.Held || j.Output != "_held/x/doubtful.wav" {
		t.Errorf("%+v", j)
	}
	if got := fmt.Sprint(b.copies()); got != "[_held/x/doubtful.wav a.wav]" {
		t.Error(got)
	}
}

func TestCancelHalfWay(t *testing.T) {
	b := newBench(t, numbered(50)...)
	gate := make(chan struct{})
	reached := make(chan struct{}, 50)
	var count atomic.Int32
	e := &engine{hook: func(context.Context, string) error {
		if count.Add(1) > 25 {
			reached <- struct{}{}
			<-gate
		}
		return nil
	}}
	s := b.startService(e, 2)
	run := b.begin(s, store.Copy)
	<-reached
	<-reached // 25 have ended or end now, two are at work
	if _, err := s.CancelRun(b.ctx, run.ID); err != nil {
		t.Fatal(err)
	}
	close(gate)
	run = b.wait(run.ID, ended)
	if run.State != store.RunCancelled || run.Done != 27 || run.Cancelled != 23 {
		t.Errorf("%+v", run)
	}
	if n := count.Load(); n != 27 {
		t.Errorf("the engine was asked %d times", n)
	}
	next := b.wait(b.begin(s, store.Copy).ID, ended) // the queue is not blocked by what was cancelled
	if next.Done != 50 {
		t.Errorf("%+v", next)
	}
}

func TestRetryHeals(t *testing.T) {
	b := newBench(t, "a.wav")
	var tries atomic.Int32
	s := b.startService(&engine{hook: func(context.Context, string) error {
		if tries.Add(1) < 3 {
			return errors.New("the disk is full")
		}
		return nil
	}}, 1)
	run := b.wait(b.begin(s, store.Copy).ID, ended)
	j := b.jobs(run.ID)["a.wav"]
	if j.State != store.Done || j.Attempts != 3 || tries.Load() != 3 {
		t.Errorf("%+v after %d tries", j, tries.Load())
	}
	if got := fmt.Sprint(b.copies()); got != "[a.wav]" {
		t.Error(got)
	}
}

func TestLastAttemptFails(t *testing.T) {
	b := newBench(t, "a.wav", "b.wav")
	e := &engine{hook: func(_ context.Context, source string) error {
		if filepath.Base(source) == "a.wav" {
			return errors.New("the disk is full")
		}
		return nil
	}}
	s := b.startService(e, 2)
	run := b.wait(b.begin(s, store.Copy).ID, ended)
	j := b.jobs(run.ID)["a.wav"]
	if j.State != store.Failed || j.Reason != "level a.wav: the disk is full (tried 3 times)" || e.times("a.wav") != 3 {
		t.Errorf("%+v after %d times", j, e.times("a.wav"))
	}
	if got := fmt.Sprint(b.copies()); got != "[b.wav]" {
		t.Error(got)
	}
}

func TestPanicFailsTheJob(t *testing.T) {
	b := newBench(t, "a.wav", "b.wav")
	e := &engine{hook: func(_ context.Context, source string) error {
		if filepath.Base(source) == "a.wav" {
			panic("index out of range")
		}
		return nil
	}}
	s := b.startService(e, 1)
	run := b.wait(b.begin(s, store.Copy).ID, ended)
	jobs := b.jobs(run.ID)
	if j := jobs["a.wav"]; j.State != store.Failed || j.Reason != "a fault in the program: index out of range" || e.times("a.wav") != 1 {
		t.Errorf("%+v", j)
	}
	if jobs["b.wav"].State != store.Done {
		t.Errorf("%+v", jobs["b.wav"])
	}
	if got := fmt.Sprint(b.copies()); got != "[b.wav]" {
		t.Error(got)
	}
}

func TestUnstorableOutcomeFailsTheJob(t *testing.T) {
	b := newBench(t, "a.wav")
	s := b.startService(&tornEngine{}, 1)
	run := b.wait(b.begin(s, store.Measure).ID, ended)
	if j := b.jobs(run.ID)["a.wav"]; j.State != store.Failed || !strings.Contains(j.Reason, "curves of 1, 0 and 0 values") {
		t.Errorf("%+v", j)
	}
}

type tornEngine struct{ engine }

func (*tornEngine) Analyse(context.Context, string, level.Options) (*level.Analysis, error) {
	a := reading(-30)
	a.Timeline.Peak, a.Timeline.ShortTerm = nil, nil
	return a, nil
}

func TestSourceProblems(t *testing.T) {
	b := newBench(t, "gone.wav", "away.wav", "pipe.wav", "grows.wav", "fine.wav")
	secret := filepath.Join(t.TempDir(), "secret.wav")
	if err := os.WriteFile(secret, []byte("not on the shelf"), 0o644); err != nil {
		t.Fatal(err)
	}
	on := func(name string) string { return filepath.Join(b.shelf.Root, name) }
	e := &engine{hook: func(_ context.Context, source string) error {
		if strings.HasSuffix(source, "grows.wav") {
			f, err := os.OpenFile(source, os.O_APPEND|os.O_WRONLY, 0)
			if err != nil {
				return err
			}
			defer f.Close()
			_, err = f.WriteString("more")
			return err
		}
		return nil
	}}
	s := b.service(e, 1)
	run := b.begin(s, store.Copy) // found and queued; now the shelf changes
	for _, name := range []string{"gone.wav", "away.wav", "pipe.wav"} {
		if err := os.Remove(on(name)); err != nil {
			t.Fatal(err)
		}
	}
	if err := os.Symlink(secret, on("away.wav")); err != nil {
		t.Fatal(err)
	}
	if err := mkfifo(on("pipe.wav")); err != nil {
		t.Fatal(err)
	}
	if err := s.Start(b.ctx); err != nil {
		t.Fatal(err)
	}
	defer s.Stop(context.Background())
	run = b.wait(run.ID, ended)
	jobs := b.jobs(run.ID)
	for name, want := range map[string]string{
		"gone.wav": "gone.wav: is not there", "away.wav": "away.wav: leads outside the folder " + b.shelf.Root,
		"pipe.wav": "pipe.wav: is not a regular file", "grows.wav": on("grows.wav") + " was changed while it was being read (tried 3 times)",
	} {
		if j := jobs[name]; j.State != store.Failed || j.Reason != want {
			t.Errorf("%s: %s %q, want %q", name, j.State, j.Reason, want)
		}
	}
	if jobs["fine.wav"].State != store.Done || e.times("secret.wav") != 0 {
		t.Errorf("%+v", jobs)
	}
	if got := fmt.Sprint(b.copies()); got != "[fine.wav]" {
		t.Error(got)
	}
}

func TestScanReportsWhatItCouldNotRead(t *testing.T) {
	b := newBench(t, "a.wav", "locked/b.wav", "notes.txt", ".hidden/c.wav")
	s := b.service(&engine{}, 1)
	res, err := s.Scan(b.ctx, b.shelf.ID, "")
	if err != nil || res.Found != 2 || res.Added != 2 || res.Unread != nil {
		t.Errorf("%+v %v", res, err)
	}
	if _, err := s.Scan(b.ctx, b.shelf.ID, "gone"); err == nil || !strings.Contains(err.Error(), "gone") {
		t.Errorf("scan of a folder that is not there: %v", err)
	}
	if _, err := s.Scan(b.ctx, 99, ""); !errors.Is(err, store.ErrNotFound) {
		t.Errorf("scan of no shelf: %v", err)
	}
	// The shelf's disk is away: an error, and nothing is taken for missing.
	if err := os.Rename(b.shelf.Root, b.shelf.Root+"-away"); err != nil {
		t.Fatal(err)
	}
	if _, err := s.Scan(b.ctx, b.shelf.ID, ""); err == nil {
		t.Error("scan of a shelf that is away: no error")
	}
	page, err := b.store.Recordings(b.ctx, store.RecordingQuery{})
	if err != nil || len(page.Recordings) != 2 || page.Recordings[0].Missing {
		t.Errorf("%+v %v", page, err)
	}
}
