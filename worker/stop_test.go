package worker

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"evenshelf/store"
)

func mkfifo(path string) error { return syscall.Mkfifo(path, 0o644) }

func TestStopWaitsForJobsAtWork(t *testing.T) {
	b := newBench(t, "a.wav", "b.wav")
	working, release := make(chan struct{}, 2), make(chan struct{})
	s := b.startService(&engine{hook: func(context.Context, string) error {
		working <- struct{}{}
		<-release
		return nil
	}}, 1)
	run := b.begin(s, store.Copy)
	<-working
	stopped := make(chan error)
	go func() { stopped <- s.Stop(b.ctx) }()
	close(release)
	if err := <-stopped; err != nil {
		t.Fatal(err)
	}
	if err := s.Stop(b.ctx); err != nil {
		t.Errorf("second Stop: %v", err)
	}
	r, err := b.store.Run(b.ctx, run.ID)
	if err != nil || r.Working != 0 || r.Done < 1 {
		t.Errorf("after Stop: %+v %v", r, err)
	}
	if err := s.Start(b.ctx); !errors.Is(err, store.ErrState) {
		t.Errorf("Start after Start: %v", err)
	}
}

func TestStopCancelsWhatDoesNotEnd(t *testing.T) {
	b := newBench(t, "a.wav")
	working := make(chan struct{}, 1)
	s := b.startService(&engine{hook: func(ctx context.Context, _ string) error {
		working <- struct{}{}
		<-ctx.Done()
		return fmt.Errorf("read: %w", ctx.Err())
	}}, 1)
	run := b.begin(s, store.Copy)
	<-working
	soon, cancel := context.WithTimeout(b.ctx, 10*time.Millisecond)
	defer cancel()
	if err := s.Stop(soon); err != nil {
		t.Fatal(err)
	}
	if j := b.jobs(run.ID)["a.wav"]; j.State != store.Waiting || j.Reason != "the program was stopped" {
		t.Errorf("%+v", j)
	}
	if got := b.copies(); len(got) != 0 {
		t.Errorf("left behind: %q", got)
	}
	// Being stopped is not an attempt: the job goes on where it was, however often.
	next := b.startService(&engine{}, 1)
	if r := b.wait(run.ID, ended); r.Done != 1 {
		t.Errorf("%+v", r)
	}
	if err := next.Stop(b.ctx); err != nil {
		t.Error(err)
	}
}

func TestStopBeforeStart(t *testing.T) {
	b := newBench(t)
	if err := b.service(&engine{}, 1).Stop(b.ctx); err != nil {
		t.Error(err)
	}
}

// The program that TestKilled kills: it runs what is waiting in the database and gets stuck on the
// recording named poison.
func TestMain(m *testing.M) {
	if db := os.Getenv("EVENSHELF_TEST_VICTIM"); db != "" {
		if err := victim(db); err != nil {
			fmt.Println("victim:", err)
		}
		os.Exit(1)
	}
	os.Exit(m.Run())
}

func victim(db string) error {
	ctx := context.Background()
	st, err := store.Open(ctx, store.Options{Path: db})
	if err != nil {
		return err
	}
	s, err := New(Options{Store: st, Workers: 1, Engine: &engine{hook: func(_ context.Context, source string) error {
		if filepath.Base(source) == "poison.wav" {
			fmt.Println("swallowed")
			select {} // until killed
		}
		return nil
	}}})
	if err != nil {
		return err
	}
	if err := s.Start(ctx); err != nil {
		return err
	}
	select {}
}

// kill starts the victim on the database, waits until it is at work on the poison, and kills it.
func (b *bench) kill() {
	b.t.Helper()
	exe, err := os.Executable()
	if err != nil {
		b.t.Fatal(err)
	}
	cmd := exec.CommandContext(b.ctx, exe)
	cmd.Env = append(os.Environ(), "EVENSHELF_TEST_VICTIM="+b.dbPath)
	out, err := cmd.StdoutPipe()
	if err != nil {
		b.t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		b.t.Fatal(err)
	}
	line, err := bufio.NewReader(out).ReadString('\n')
	if err != nil || line != "swallowed\n" {
		b.t.Errorf("victim said %q, %v", line, err)
	}
	if err := cmd.Process.Kill(); err != nil { // SIGKILL: no deferred function runs
		b.t.Fatal(err)
	}
	cmd.Wait()
}

// A process that is really killed leaves a job "working", a queue entry "running" and a scratch file.
func TestKilled(t *testing.T) {
	b := newBench(t, "a.wav", "poison.wav", "z.wav")
	run := b.begin(b.service(&engine{}, 1), store.Copy)
	b.store.Close()
	b.kill()
	b.open()
	if j := b.jobs(run.ID)["poison.wav"]; j.State != store.Working {
		t.Errorf("after the kill: %+v", j)
	}
	if got := fmt.Sprint(b.copies()); !strings.Contains(got, ".part") {
		t.Errorf("the kill left no scratch file to sweep: %s", got)
	}
	start := time.Now()
	e := &engine{}
	s := b.startService(e, 1)
	r := b.wait(run.ID, ended)
	if r.Done != 3 {
		t.Errorf("%+v", r)
	}
	if took := time.Since(start); took > 20*time.Second { // River alone would take over an hour
		t.Errorf("taking up the work again took %s", took)
	}
	if got := fmt.Sprint(b.copies()); got != "[a.wav poison.wav z.wav]" {
		t.Error(got)
	}
	if e.times("a.wav") != 0 {
		t.Error("a job that had ended was done again")
	}
	if err := s.Stop(b.ctx); err != nil {
		t.Error(err)
	}
}

func TestPoison(t *testing.T) {
	b := newBench(t, "poison.wav", "z.wav")
	run := b.begin(b.service(&engine{}, 1), store.Copy)
	b.store.Close()
	for range store.MaxAttempts {
		b.kill()
	}
	b.open()
	e := &engine{}
	b.startService(e, 1)
	r := b.wait(run.ID, ended)
	if j := b.jobs(run.ID)["poison.wav"]; j.State != store.Failed || j.Reason != "stopped the program 3 times" {
		t.Errorf("%+v", j)
	}
	if r.Done != 1 || r.Failed != 1 || e.times("poison.wav") != 0 {
		t.Errorf("%+v", r)
	}
	if got := fmt.Sprint(b.copies()); got != "[z.wav]" {
		t.Error(got)
	}
}

// Inserting a run of 10,000 must be quick, or the page that starts it feels broken.
func TestTenThousandJobs(t *testing.T) {
	b := newBench(t)
	const n = 10_000
	var files []store.FoundFile
	for _, name := range numbered(n) {
		files = append(files, store.FoundFile{Path: name, Size: 1, ModifiedAt: time.UnixMilli(0)})
	}
	if _, err := b.store.Found(b.ctx, b.shelf.ID, "", files); err != nil {
		t.Fatal(err)
	}
	s := b.service(&engine{}, 1)
	run, took := b.startRun(s)
	t.Logf("%d jobs entered in %s", n, took)
	if run.Jobs != n || run.Waiting != n {
		t.Errorf("%+v", run)
	}
	if limit := 2 * time.Second; took > limit && !raceDetector {
		// Wall time on a busy machine says little: the best of three counts.
		for range 2 {
			if _, again := b.startRun(s); again < took {
				took = again
			}
		}
		if took > limit {
			t.Errorf("%s is over the limit of %s", took, limit)
		}
	}
	if r, err := s.CancelRun(b.ctx, run.ID); err != nil || r.Cancelled != n {
		t.Errorf("%+v %v", r, err)
	}
}
