package command

import (
	"cmp"
	"context"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"evenshelf/engine/level"
	"evenshelf/worker/delivery"
)

type levelCmd struct {
	Profile   string   `required:"" help:"Levelling profile, or a file with one: see 'evenshelf profiles'." placeholder:"NAME|FILE.toml"`
	Out       string   `help:"Folder the copies go to; sub-folders are mirrored." placeholder:"DIR" type:"path"`
	DryRun    bool     `help:"Say what would come out, and write nothing."`
	Overwrite bool     `help:"Replace copies that are already in the output folder."`
	JSON      bool     `name:"json" help:"Print one JSON object a line instead."`
	Paths     []string `arg:"" name:"path" help:"Recordings, or folders of recordings."`
}

// levelled is one file's result as JSON.
type levelled struct {
	Path   string      `json:"path"`
	Output *string     `json:"output"` // nil if nothing was written
	State  level.State `json:"state"`
	Reason string      `json:"reason"`
	level.Outcome
}

func (c *levelCmd) Run(a *app) error {
	p, err := a.profile(c.Profile)
	if err != nil {
		return err
	}
	e, files, err := a.recordings(c.Paths)
	if err != nil {
		return err
	}
	if err := c.prepare(files); err != nil {
		return err
	}
	groups := newGroups(e, p, files)
	bar, t, notDone := newProgress(a.stderr), tally{files: len(files)}, 0
	for _, f := range files {
		t.bytes += f.size
	}
	bar.draw(t)
	err = inOrder(a.ctx, a.workers(), files, func(ctx context.Context, in input) levelled {
		shared, err := groups.of(ctx, in)
		if err != nil {
			in.err = err
		}
		return c.level(ctx, e, level.Task{Profile: p, Shared: shared}, in)
	}, func(in input, r levelled) {
		if r.State != level.Done {
			notDone++
		}
		bar.clear()
		c.print(a, r)
		t.done++
		t.bytesDone += in.size
		if r.Before != nil {
			t.seconds += r.Before.Duration
		}
		bar.draw(t)
	})
	bar.clear()
	if err != nil {
		return err
	}
	if notDone > 0 {
		fmt.Fprintf(a.stderr, "evenshelf: %d of %d are held or failed; the reasons are above\n", notDone, len(files))
		return statusError(exitSome)
	}
	return nil
}

// prepare makes the output folder, unless nothing is to be written.
func (c *levelCmd) prepare(files []input) error {
	switch {
	case c.DryRun:
		return nil
	case c.Out == "":
		return usageError("--out is needed: the folder the copies go to")
	}
	if err := c.refuseUnsafe(files); err != nil {
		return err
	}
	return os.MkdirAll(c.Out, 0o755)
}

// refuseUnsafe says no to command lines that could write over an original or mix two files up.
func (c *levelCmd) refuseUnsafe(files []input) error {
	out, err := realPath(c.Out)
	if err != nil {
		return err
	}
	for _, path := range c.Paths {
		from, err := realPath(path)
		if err != nil {
			return err
		}
		if out == from || strings.HasPrefix(out, from+string(filepath.Separator)) {
			return usageError(fmt.Sprintf("--out %s is inside %s: choose a folder beside it", c.Out, path))
		}
	}
	taken := map[string]string{}
	for _, f := range files {
		if f.err != nil {
			continue // it will have no copy
		}
		if other, ok := taken[f.rel]; ok {
			return usageError(fmt.Sprintf("%s and %s would have the same copy, %s", other, f.path, f.rel))
		}
		taken[f.rel] = f.path
	}
	return nil
}

// realPath resolves symbolic links as far as the path exists.
func realPath(path string) (string, error) {
	abs, err := filepath.Abs(path)
	if err != nil {
		return "", err
	}
	rest := ""
	for dir := abs; ; dir = filepath.Dir(dir) {
		if real, err := filepath.EvalSymlinks(dir); err == nil {
			return filepath.Join(real, rest), nil
		} else if dir == filepath.Dir(dir) {
			return abs, nil
		}
		rest = filepath.Join(filepath.Base(dir), rest)
	}
}

func (c *levelCmd) level(ctx context.Context, e *level.Engine, t level.Task, in input) levelled {
	r := levelled{Path: in.path, State: level.Failed}
	if in.err != nil {
		r.Reason = level.Reason(in.err, in.path)
		return r
	}
	var output string
	var err error
	if c.DryRun {
		r.Outcome, err = e.Foresee(ctx, in.path, t)
	} else {
		if _, err := os.Lstat(filepath.Join(c.Out, filepath.FromSlash(in.rel))); err == nil && !c.Overwrite {
			r.Reason = in.rel + " is already there" // delivery would find out after the work
			return r
		}
		key := fmt.Sprintf("%d", os.Getpid())
		r.Outcome, output, err = delivery.Deliver(ctx, e, in.path, c.Out, in.rel, t, key, delivery.Options{Overwrite: c.Overwrite})
	}
	if err != nil {
		r.Outcome = level.Outcome{}
		r.Reason = err.Error()
		return r
	}
	r.State, r.Reason = r.Verdict.State, r.Verdict.Reason
	if output != "" {
		output = filepath.Join(c.Out, filepath.FromSlash(output))
		r.Output = &output
	}
	return r
}

func (c *levelCmd) print(a *app, r levelled) {
	if c.JSON {
		json.NewEncoder(a.stdout).Encode(r)
		return
	}
	line := fmt.Sprintf("%-6s", r.State)
	if r.Before != nil && r.Foreseen != nil {
		after := r.Foreseen
		if r.After != nil {
			after = &r.After.Reading
		}
		line += fmt.Sprintf("  %s → %s LUFS  %s → %s LU  %s dBTP", figure(float64(r.Before.Integrated), 6), figure(float64(after.Integrated), 5),
			figure(float64(r.Before.Range), 4), figure(float64(after.Range), 4), figure(float64(after.TruePeak), 5))
	}
	line += "  " + printable(r.Path)
	if reason := cmp.Or(r.Reason, r.planned()); reason != "" {
		line += ": " + printable(reason)
	}
	fmt.Fprintln(a.stdout, line)
}

// planned says what would be done, if nothing was.
func (r levelled) planned() string {
	if r.Plan == nil || r.After != nil {
		return ""
	}
	return r.Plan.Reason
}
