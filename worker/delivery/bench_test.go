package delivery

import (
	"context"
	"errors"
	"os"
	"path/filepath"
	"slices"
	"testing"
	"time"

	"evenshelf/engine/level"
)

// leveller is a stand-in that writes text; each field changes one thing about it.
type leveller struct {
	state     level.State
	extension string
	text      string
	err       error
	panics    bool
	nothing   bool   // no file, no After
	lies      bool   // After, but no file
	untouched bool   // within the profile already
	during    func() // while the engine is at work
	scratch   string // where it was told to write
}

func (l *leveller) Level(_ context.Context, source string, _ level.Task, scratch string) (level.Outcome, error) {
	l.scratch = scratch
	o := level.Outcome{Before: &level.Analysis{}, Verdict: level.Verdict{State: level.Done}, Extension: l.extension}
	if l.state != "" {
		o.Verdict.State = l.state
	}
	if l.nothing {
		return o, nil
	}
	if !l.lies {
		if err := os.WriteFile(scratch, []byte("levelled"+l.text), 0o600); err != nil {
			return o, err
		}
	}
	if l.during != nil {
		l.during()
	}
	if l.panics {
		panic("engine")
	}
	o.After = &level.Analysis{}
	o.Plan = &level.Plan{Untouched: l.untouched}
	if o.Extension == "" {
		o.Extension = filepath.Ext(source)
	}
	return o, l.err
}

// bench is a source folder and an output folder.
type bench struct {
	t        *testing.T
	src, out string
}

func newBench(t *testing.T) *bench {
	dir, err := filepath.EvalSymlinks(t.TempDir())
	if err != nil {
		t.Fatal(err)
	}
	return &bench{t, filepath.Join(dir, "src"), filepath.Join(dir, "out")}
}

var sourceTime = time.Date(2001, 2, 3, 4, 5, 6, 789, time.UTC)

func (b *bench) write(path, text string) string {
	b.t.Helper()
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		b.t.Fatal(err)
	}
	if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
		b.t.Fatal(err)
	}
	return path
}

func (b *bench) source(rel string) string {
	b.t.Helper()
	path := b.write(filepath.Join(b.src, rel), "source")
	if err := os.Chtimes(path, sourceTime, sourceTime); err != nil {
		b.t.Fatal(err)
	}
	return path
}

func (b *bench) deliver(l *leveller, rel string, opt Options) (level.Outcome, string, error) {
	b.t.Helper()
	return Deliver(b.t.Context(), l, filepath.Join(b.src, rel), b.out, rel, level.Task{}, "job-7", opt)
}

// files returns what is below dir as "path=text".
func files(t *testing.T, dir string) (list []string) {
	t.Helper()
	err := filepath.WalkDir(dir, func(p string, d os.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		text, err := os.ReadFile(p)
		rel, _ := filepath.Rel(dir, p)
		list = append(list, rel+"="+string(text))
		return err
	})
	if err != nil && !errors.Is(err, os.ErrNotExist) {
		t.Fatal(err)
	}
	return list
}

func (b *bench) want(want ...string) {
	b.t.Helper()
	if got := files(b.t, b.out); !slices.Equal(got, want) {
		b.t.Errorf("output folder has %q, want %q", got, want)
	}
}

var ours = Options{Overwrite: true}
