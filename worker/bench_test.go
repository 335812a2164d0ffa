package worker

import (
	"context"
	"fmt"
	"log/slog"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"evenshelf/engine/audio"
	"evenshelf/engine/faults"
	"evenshelf/engine/level"
	"evenshelf/engine/media"
	"evenshelf/engine/meter"
	"evenshelf/engine/profile"
	"evenshelf/store"
)

// engine is a small stand-in: it copies bytes and says it measured. Its hook runs first and may block,
// fail or panic. The real engine has its own tests; here it is the queue that is tried.
type engine struct {
	hook func(ctx context.Context, source string) error

	mu   sync.Mutex
	seen map[string]int
	how  level.Options            // of the last Analyse
	with map[string]*level.Shared // what each recording shared its gain with, by name
	sets [][]string               // paths of each Group
	busy atomic.Int32
	peak atomic.Int32
}

func (e *engine) begin(ctx context.Context, source string) error {
	e.mu.Lock()
	if e.seen == nil {
		e.seen = map[string]int{}
	}
	e.seen[filepath.Base(source)]++
	e.mu.Unlock()
	for n := e.busy.Add(1); ; {
		if old := e.peak.Load(); n <= old || e.peak.CompareAndSwap(old, n) {
			break
		}
	}
	defer e.busy.Add(-1)
	if e.hook != nil {
		return e.hook(ctx, source)
	}
	return nil
}

func (e *engine) times(name string) int {
	e.mu.Lock()
	defer e.mu.Unlock()
	return e.seen[name]
}

func (e *engine) Analyse(ctx context.Context, path string, o level.Options) (*level.Analysis, error) {
	e.mu.Lock()
	e.how = o
	e.mu.Unlock()
	if err := e.begin(ctx, path); err != nil {
		return nil, err
	}
	return heard(path, -30), nil
}

// tagMark begins what stands for tags in a file; what is before it stands for the sound.
const tagMark = "|"

// heard is the reading of a file with the hash of its sound.
func heard(path string, lufs audio.LUFS) *level.Analysis {
	a := reading(lufs)
	if b, err := os.ReadFile(path); err == nil {
		sound, _, _ := strings.Cut(string(b), tagMark)
		a.AudioHash = fmt.Sprintf("%x", sound)
	}
	return a
}

func (e *engine) Tag(ctx context.Context, source string, t level.Task, scratch string) (level.Outcome, error) {
	if err := e.begin(ctx, source); err != nil {
		return level.Outcome{}, err
	}
	o := level.Outcome{Before: heard(source, -30), Verdict: level.Verdict{State: level.Done}}
	if t.Known != nil {
		if err := t.Known(o.Before); err != nil {
			return level.Outcome{}, err
		}
	}
	b, err := os.ReadFile(source)
	gain := tagMark + "gain"
	if t.Shared != nil {
		gain += fmt.Sprint(t.Shared.Integrated)
	}
	if err != nil || strings.HasSuffix(string(b), gain) {
		return o, err
	}
	sound, other, _ := strings.Cut(string(b), tagMark)
	if !strings.HasPrefix(other, "gain") && other != "" {
		sound += tagMark + other
	}
	if err := os.WriteFile(scratch, []byte(sound+gain), 0o600); err != nil {
		return o, err
	}
	o.After, o.Extension = heard(scratch, -30), filepath.Ext(source)
	return o, nil
}

// Album says that a file is of the album its name begins with: "one-1.wav" is of "one".
func (e *engine) Album(_ context.Context, path string) (media.Album, error) {
	title, _, ok := strings.Cut(filepath.Base(path), "-")
	if !ok {
		return media.Album{}, nil
	}
	return media.Album{Title: title}, nil
}

// Group says that a folder's loudness is minus the number of its recordings.
func (e *engine) Group(ctx context.Context, paths []string, _ level.Options) (level.Shared, error) {
	e.mu.Lock()
	e.sets = append(e.sets, paths)
	e.mu.Unlock()
	return level.Shared{Integrated: audio.LUFS(-len(paths)), TruePeak: -1}, e.begin(ctx, "group")
}

func (e *engine) Level(ctx context.Context, source string, t level.Task, scratch string) (level.Outcome, error) {
	e.mu.Lock()
	if e.with == nil {
		e.with = map[string]*level.Shared{}
	}
	e.with[filepath.Base(source)] = t.Shared
	e.mu.Unlock()
	if err := os.WriteFile(scratch, []byte("half a file"), 0o600); err != nil {
		return level.Outcome{}, err
	}
	if err := e.begin(ctx, source); err != nil {
		return level.Outcome{}, err
	}
	before := heard(source, -30)
	if t.Known != nil {
		if err := t.Known(before); err != nil {
			return level.Outcome{}, err
		}
	}
	b, err := os.ReadFile(source)
	if err != nil {
		return level.Outcome{}, err
	}
	sound, other, _ := strings.Cut(string(b), tagMark)
	if t.TagsFrom != "" {
		b, err := os.ReadFile(t.TagsFrom)
		if err != nil {
			return level.Outcome{}, err
		}
		_, other, _ = strings.Cut(string(b), tagMark)
	}
	if t.Profile.Target == -30 { // as it is already
		if err := os.WriteFile(scratch, b, 0o600); err != nil {
			return level.Outcome{}, err
		}
		return level.Outcome{Before: before, After: heard(scratch, -30), Plan: &level.Plan{Untouched: true},
			Verdict: level.Verdict{State: level.Done}, Extension: filepath.Ext(source)}, nil
	}
	levelled := "levelled " + sound
	if t.Profile.Target != -18 { // as another target makes another sound
		levelled = fmt.Sprintf("levelled%g %s", float64(t.Profile.Target), sound)
	}
	if other != "" {
		levelled += tagMark + other
	}
	if err := os.WriteFile(scratch, []byte(levelled), 0o600); err != nil {
		return level.Outcome{}, err
	}
	state := level.Done
	if strings.Contains(source, "doubtful") {
		state = level.Held
	}
	return level.Outcome{Before: before, After: heard(scratch, -18), Plan: &level.Plan{Gain: 12}, Renders: 1,
		Verdict: level.Verdict{State: state}, Extension: extension(t, source)}, nil
}

// extension is the source's own unless the profile names a format that is called as its extension is.
func extension(t level.Task, source string) string {
	if f := t.Profile.Delivered.Format; f != profile.OwnFormat {
		return "." + string(f)
	}
	return filepath.Ext(source)
}

func reading(lufs audio.LUFS) *level.Analysis {
	return &level.Analysis{FormatName: "wav", Decoder: "invented", Engine: level.Version, Faults: []faults.Fault{},
		Reading:  meter.Reading{Duration: 60, Integrated: lufs},
		Timeline: level.Timeline{Timeline: meter.Timeline{Step: 0.1, Momentary: []float32{-20}, ShortTerm: []float32{-20}, Peak: []float32{-3}}}}
}

// bench is a store with a shelf on disk.
type bench struct {
	t      testing.TB
	ctx    context.Context
	dbPath string
	store  *store.Store
	shelf  store.Shelf
}

// deadline is far beyond what anything here takes; it ends a test that would hang.
const deadline = 60 * time.Second

func newBench(t testing.TB, names ...string) *bench {
	t.Helper()
	ctx, cancel := context.WithTimeout(t.Context(), deadline)
	t.Cleanup(cancel)
	b := &bench{t: t, ctx: ctx, dbPath: filepath.Join(t.TempDir(), "evenshelf.db")}
	root := t.TempDir()
	for _, name := range names {
		path := filepath.Join(root, name)
		if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, []byte("sound of "+name), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	b.open()
	var err error
	b.shelf, err = b.store.AddShelf(ctx, store.Shelf{Name: "music", Root: root, Copies: filepath.Join(t.TempDir(), "copies")})
	if err != nil {
		t.Fatal(err)
	}
	return b
}

func (b *bench) open() {
	b.t.Helper()
	s, err := store.Open(b.ctx, store.Options{Path: b.dbPath})
	if err != nil {
		b.t.Fatal(err)
	}
	b.store = s
	b.t.Cleanup(func() { s.Close() })
}

// testLog sends the log to the test.
func testLog(t testing.TB) *slog.Logger {
	return slog.New(slog.NewTextHandler(t.Output(), &slog.HandlerOptions{Level: slog.LevelInfo}))
}

func (b *bench) service(e Engine, workers int) *Service {
	b.t.Helper()
	s, err := New(Options{Store: b.store, Engine: e, Log: testLog(b.t), Workers: workers})
	if err != nil {
		b.t.Fatal(err)
	}
	s.retryAfter = func(int) time.Duration { return 10 * time.Millisecond }
	return s
}

func (b *bench) startService(e Engine, workers int) *Service {
	b.t.Helper()
	s := b.service(e, workers)
	if err := s.Start(b.ctx); err != nil {
		b.t.Fatal(err)
	}
	b.t.Cleanup(func() { s.Stop(context.Background()) })
	return s
}

// begin scans the shelf and starts a run of all that is on it.
func (b *bench) begin(s *Service, d store.Delivery) store.Run {
	b.t.Helper()
	if _, err := s.Scan(b.ctx, b.shelf.ID, ""); err != nil {
		b.t.Fatal(err)
	}
	return b.beginWith(s, d, func(*profile.Profile) {})
}

// beginWith starts a run of all that is known of the shelf, with a profile that was changed.
func (b *bench) beginWith(s *Service, d store.Delivery, change func(*profile.Profile)) store.Run {
	b.t.Helper()
	p, err := profile.Named("rotation")
	if err != nil {
		b.t.Fatal(err)
	}
	change(&p)
	run, err := s.StartRun(b.ctx, store.NewRun{ShelfID: b.shelf.ID, Profile: p, Delivery: d})
	if err != nil {
		b.t.Fatal(err)
	}
	return run
}

// wait waits until the run satisfies ok, and returns it.
func (b *bench) wait(id int64, ok func(store.Run) bool) store.Run {
	b.t.Helper()
	for {
		changed := b.store.Changed()
		run, err := b.store.Run(b.ctx, id)
		if err != nil {
			b.t.Fatal(err)
		}
		if ok(run) {
			return run
		}
		select {
		case <-changed:
		case <-b.ctx.Done():
			b.t.Fatalf("the run never got there: %+v", run)
		}
	}
}

func ended(r store.Run) bool { return r.State == store.RunFinished || r.State == store.RunCancelled }

func (b *bench) jobs(run int64) map[string]store.Job {
	b.t.Helper()
	list, err := b.store.Jobs(b.ctx, store.JobQuery{RunID: run, Limit: 1000})
	if err != nil {
		b.t.Fatal(err)
	}
	m := map[string]store.Job{}
	for _, j := range list {
		m[j.Path] = j
	}
	return m
}

// copies lists the files below the copies folder, scratch files included.
func (b *bench) copies() (list []string) {
	b.t.Helper()
	filepath.WalkDir(b.shelf.Copies, func(p string, d os.DirEntry, err error) error {
		if err == nil && !d.IsDir() {
			rel, _ := filepath.Rel(b.shelf.Copies, p)
			list = append(list, rel)
		}
		return nil
	})
	return list
}

func (b *bench) content(name string) string {
	b.t.Helper()
	c, err := os.ReadFile(filepath.Join(b.shelf.Copies, name))
	if err != nil {
		b.t.Error(err)
	}
	return string(c)
}

func numbered(n int) (names []string) {
	for i := range n {
		names = append(names, fmt.Sprintf("disc-%d/track-%03d.wav", i%3, i))
	}
	return names
}

// startRun starts a run without scanning and says how long that took.
func (b *bench) startRun(s *Service) (store.Run, time.Duration) {
	b.t.Helper()
	p, err := profile.Named("rotation")
	if err != nil {
		b.t.Fatal(err)
	}
	start := time.Now()
	run, err := s.StartRun(b.ctx, store.NewRun{ShelfID: b.shelf.ID, Profile: p, Delivery: store.Copy})
	if err != nil {
		b.t.Fatal(err)
	}
	return run, time.Since(start)
}
