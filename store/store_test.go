package store

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"testing"
	"time"

	"evenshelf/engine/audio"
	"evenshelf/engine/faults"
	"evenshelf/engine/level"
	"evenshelf/engine/meter"
	"evenshelf/engine/profile"
	"evenshelf/engine/speech"
)

// fixture is a fresh store with one shelf.
type fixture struct {
	*Store
	t     testing.TB
	ctx   context.Context
	path  string
	shelf Shelf
}

// open opens a store in a folder of its own. Each subtest takes its own; nothing is shared.
func open(t testing.TB) *fixture {
	t.Helper()
	f := &fixture{t: t, ctx: t.Context(), path: filepath.Join(t.TempDir(), "data", "evenshelf.db")}
	f.reopen()
	t.Cleanup(func() { f.Close() })
	f.shelf = f.addShelf("music")
	return f
}

func (f *fixture) reopen() {
	f.t.Helper()
	s, err := Open(f.ctx, Options{Path: f.path})
	if err != nil {
		f.t.Fatal(err)
	}
	f.Store = s
}

func (f *fixture) addShelf(name string) Shelf {
	f.t.Helper()
	sh, err := f.AddShelf(f.ctx, Shelf{Name: name, Root: f.t.TempDir(), Copies: filepath.Join(f.t.TempDir(), "copies")})
	if err != nil {
		f.t.Fatal(err)
	}
	return sh
}

var someTime = time.Date(2024, 5, 6, 7, 8, 9, 123e6, time.UTC)

func files(paths ...string) []FoundFile {
	var list []FoundFile
	for i, p := range paths {
		list = append(list, FoundFile{Path: p, Size: int64(1000 + i), ModifiedAt: someTime})
	}
	return list
}

// found scans the paths onto the fixture's shelf and returns the recordings by path.
func (f *fixture) found(paths ...string) map[string]Recording {
	f.t.Helper()
	if _, err := f.Found(f.ctx, f.shelf.ID, "", files(paths...)); err != nil {
		f.t.Fatal(err)
	}
	return f.byPath()
}

func (f *fixture) byPath() map[string]Recording {
	f.t.Helper()
	page, err := f.Recordings(f.ctx, RecordingQuery{ShelfID: f.shelf.ID, Limit: 1000})
	if err != nil {
		f.t.Fatal(err)
	}
	m := map[string]Recording{}
	for _, r := range page.Recordings {
		m[r.Path] = r
	}
	return m
}

func someProfile(t testing.TB) profile.Profile {
	t.Helper()
	p, err := profile.Named("rotation")
	if err != nil {
		t.Fatal(err)
	}
	return p
}

// run makes a run of everything on the shelf and returns its jobs.
func (f *fixture) run(d Delivery) (Run, []int64) {
	f.t.Helper()
	var jobs []int64
	run, err := f.CreateRun(f.ctx, NewRun{ShelfID: f.shelf.ID, Profile: someProfile(f.t), Delivery: d},
		func(_ context.Context, _ *Tx, ids []int64) error { jobs = ids; return nil })
	if err != nil {
		f.t.Fatal(err)
	}
	return run, jobs
}

func enqueueNothing(context.Context, *Tx, []int64) error { return nil }

func (f *fixture) start(jobID int64) Work {
	f.t.Helper()
	w, err := f.StartJob(f.ctx, jobID)
	if err != nil {
		f.t.Fatal(err)
	}
	return w
}

func (f *fixture) finish(jobID int64, o level.Outcome, output string) {
	f.t.Helper()
	if err := f.FinishJob(f.ctx, jobID, o, output, nil); err != nil {
		f.t.Fatal(err)
	}
}

func (f *fixture) getRun(id int64) Run {
	f.t.Helper()
	r, err := f.Run(f.ctx, id)
	if err != nil {
		f.t.Fatal(err)
	}
	return r
}

func (f *fixture) events(runID int64) []Event {
	f.t.Helper()
	list, err := f.RunEvents(f.ctx, runID, 0, 1000)
	if err != nil {
		f.t.Fatal(err)
	}
	return list
}

// analysis is an invented reading around a loudness.
func analysis(lufs float64) *level.Analysis {
	inf := float32(math.Inf(-1))
	return &level.Analysis{
		FormatName: "wav", Decoder: "invented 1", Engine: level.Version,
		Faults: []faults.Fault{{Code: "clipped", Severity: faults.Note, At: 1, Length: 2, Words: "clipped twice"}},
		Reading: meter.Reading{
			SampleRate: 48000, Channels: 2, Frames: 48000 * 90, Duration: 90,
			Integrated: audio.LUFS(lufs), Range: 7.25, TruePeak: audio.DBTP(lufs + 12), SamplePeak: audio.DBFS(lufs + 11.5),
			ShortTerm10: audio.LUFS(lufs - 5), ShortTerm50: audio.LUFS(lufs), ShortTerm95: audio.LUFS(lufs + 4), PLR: 12,
			MaxMomentary: audio.LUFS(lufs + 6), MaxShortTerm: audio.LUFS(lufs + 5), MinPSR: 8, RMS: audio.DBFS(lufs + 1),
			CrestFactor: 10.5, NoiseFloor: audio.LUFS(lufs - 30), MonoRule: audio.TwoLoudspeakers,
		},
		Condition: faults.Condition{HeadSilence: 0.1, TailSilence: 0, Correlation: 0.93, Balance: -0.4, Offset: 0.0002},
		Dialogue:  level.Dialogue{ActiveTime: 0.2, SpeechTime: 0.1, SpeechLoudness: audio.LUFS(lufs + 1)},
		Timeline: level.Timeline{
			Timeline: meter.Timeline{Step: 0.1, Momentary: []float32{inf, -23.456, -20}, ShortTerm: []float32{inf, -30, -25.004}, Peak: []float32{inf, -6.1, -0.004}},
			Course:   speech.Course{Active: []bool{false, true, true}, Speech: []float32{0, 0.499, 0.876}},
		},
	}
}

func done(beforeLUFS, afterLUFS float64) level.Outcome {
	return level.Outcome{Before: analysis(beforeLUFS), After: analysis(afterLUFS), Plan: &level.Plan{Gain: 4.5, Ceiling: -1, Limit: true, Reason: "lifted"},
		Verdict: level.Verdict{State: level.Done}, Renders: 2}
}

func held(reason string) level.Outcome {
	o := done(-40, -18)
	o.Verdict = level.Verdict{State: level.Held, Reason: reason}
	return o
}

func failed(reason string) level.Outcome {
	return level.Outcome{Verdict: level.Verdict{State: level.Failed, Reason: reason}}
}

func near(t testing.TB, what string, got *float64, want float64) {
	t.Helper()
	if got == nil || math.Abs(*got-want) > 1e-9 {
		t.Errorf("%s: got %v, want %v", what, deref(got), want)
	}
}

func deref(v *float64) any {
	if v == nil {
		return "nothing"
	}
	return *v
}

func whats(events []Event) (list []string) {
	for _, e := range events {
		list = append(list, e.What)
	}
	return list
}

func mustWrite(t testing.TB, path, content string) {
	t.Helper()
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(path, []byte(content), 0o644); err != nil {
		t.Fatal(err)
	}
}

func numbered(n int) (paths []string) {
	for i := range n {
		paths = append(paths, fmt.Sprintf("folder-%02d/recording-%06d.wav", i%50, i))
	}
	return paths
}

// texts returns a column of text.
func (f *fixture) texts(query string) []string {
	f.t.Helper()
	rows, err := f.writer.Query(query)
	if err != nil {
		f.t.Fatal(err)
	}
	defer rows.Close()
	var list []string
	for rows.Next() {
		var s string
		if err := rows.Scan(&s); err != nil {
			f.t.Fatal(err)
		}
		list = append(list, s)
	}
	if err := rows.Err(); err != nil {
		f.t.Fatal(err)
	}
	return list
}
