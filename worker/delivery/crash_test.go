//go:build !race

package delivery

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"testing"

	"evenshelf/engine/level"
)

// The power goes between any two steps of a replacing and of a restoring: a process of its own ends there, with nothing
// put away. Whatever the step, the original is somewhere, bit for bit; a replacing that is repeated ends well; and a
// restoring that is repeated brings the original back and leaves nothing behind.
func TestThePowerGoesBetweenAnyTwoSteps(t *testing.T) {
	for _, linked := range []bool{true, false} {
		for _, what := range []string{"replace", "restore"} {
			steps := 0
			for done := false; !done; steps++ {
				name := fmt.Sprintf("%s, links %v, step %d", what, linked, steps)
				b := newAtticBench(t)
				c := crash{Place: b.place, Linked: linked, Records: filepath.Join(filepath.Dir(b.src), "records")}
				if what == "restore" {
					c.run(t, "replace", -1)
				}
				done = c.run(t, what, steps)
				if !c.original(t) {
					t.Errorf("%s: the original is gone", name)
				}
				c.run(t, what, -1)
				if what == "replace" {
					if got := files(t, b.src); len(got) != 1 || got[0] != "m/a.wav=levelled" {
						t.Errorf("%s, and again: %q", name, got)
					}
					c.run(t, "restore", -1)
				}
				if got := files(t, b.src); len(got) != 1 || got[0] != "m/a.wav=source" {
					t.Errorf("%s, and restored: %q", name, got)
				}
				if got := files(t, b.place.Attic); len(got) != 0 {
					t.Errorf("%s, and restored: the attic still has %q", name, got)
				}
			}
			if steps < 4 {
				t.Errorf("%s has only %d steps", what, steps)
			}
		}
	}
}

// crash is what the process that is ended needs to know.
type crash struct {
	Place   Place
	Linked  bool
	Records string // file with the originals that were recorded, a line each
}

// original reports whether the original's bytes are on the shelf or in the attic.
func (c crash) original(t *testing.T) bool {
	for _, dir := range []string{c.Place.Root, c.Place.Attic} {
		for _, file := range files(t, dir) {
			if _, text, _ := strings.Cut(file, "="); text == "source" {
				return true
			}
		}
	}
	return false
}

const crashVariable = "EVENSHELF_TEST_CRASH"

// run has a process of its own do it and end after so many steps; −1 is never. It reports whether it came to its end.
func (c crash) run(t *testing.T, what string, steps int) bool {
	t.Helper()
	told, err := json.Marshal(c)
	must(t, err)
	cmd := exec.Command(os.Args[0], "-test.run=^TestCrashingProcess$")
	cmd.Env = append(os.Environ(), crashVariable+"="+what+" "+strconv.Itoa(steps)+" "+string(told))
	out, err := cmd.CombinedOutput()
	var ended *exec.ExitError
	switch {
	case err == nil:
		return true
	case errors.As(err, &ended) && ended.Sys().(syscall.WaitStatus).Signal() == syscall.SIGKILL:
		return false
	}
	t.Fatalf("%s: %v\n%s", what, err, out)
	return false
}

// TestCrashingProcess is the process; as a test of its own it has nothing to do.
func TestCrashingProcess(t *testing.T) {
	what, rest, told := strings.Cut(os.Getenv(crashVariable), " ")
	if !told {
		return
	}
	count, document, _ := strings.Cut(rest, " ")
	left, err := strconv.Atoi(count)
	must(t, err)
	var c crash
	must(t, json.Unmarshal([]byte(document), &c))
	if !c.Linked {
		link = func(string, string) error { return syscall.EXDEV }
	}
	step = func(string) {
		if left--; left == -1 {
			must(t, syscall.Kill(os.Getpid(), syscall.SIGKILL))
		}
	}
	var last *Original
	if lines, err := os.ReadFile(c.Records); err == nil {
		for line := range strings.Lines(string(lines)) {
			last = new(Original)
			must(t, json.Unmarshal([]byte(line), last))
		}
	} else if !errors.Is(err, fs.ErrNotExist) {
		t.Fatal(err)
	}
	if what == "restore" {
		must(t, Restore(c.Place.Root, c.Place.Rel, c.Place.Attic, *last, "restore-1"))
		return
	}
	// As the worker finds its source.
	if last != nil && last.IsLevelled(filepath.Join(c.Place.Root, c.Place.Rel)) {
		c.Place.Source, c.Place.Ours = filepath.Join(c.Place.Attic, last.Stored), last
	}
	_, output, err := Replace(t.Context(), &leveller{}, &c.Place, level.Task{}, "job-7", func(_ context.Context, o Original, _ *Original) error {
		line, err := json.Marshal(o)
		must(t, err)
		f, err := os.OpenFile(c.Records, os.O_CREATE|os.O_APPEND|os.O_WRONLY, 0o600)
		must(t, err)
		_, err = fmt.Fprintf(f, "%s\n", line)
		return errors.Join(err, f.Close())
	})
	if err != nil || output != c.Place.Rel {
		t.Errorf("%q %v", output, err)
	}
}
