package command

import (
	"context"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"evenshelf/engine/level"
	"evenshelf/engine/profile"
	"evenshelf/worker/delivery"
)

type levelCmd struct {
	Profile   string   `required:"" help:"Levelling profile: see 'evenshelf profiles'." placeholder:"NAME"`
	Out       string   `required:"" help:"Folder the copies go to; sub-folders are mirrored." placeholder:"DIR" type:"path"`
	Overwrite bool     `help:"Replace copies that are already in the output folder."`
	JSON      bool     `name:"json" help:"Print one JSON object a line instead."`
	Paths     []string `arg:"" name:"path" help:"Recordings, or folders of recordings."`
}

// levelled is one file's result as JSON.
type levelled struct {
	Path   string          `json:"path"`
	Output *string         `json:"output"`
	State  level.State     `json:"state"`
	Before *level.Analysis `json:"before"`
	After  *level.Analysis `json:"after"`
	Gain   *float64        `json:"gain_db"`
	Reason string          `json:"reason"`
}

func (c *levelCmd) Run(a *app) error {
	p, err := profile.Named(c.Profile)
	if err != nil {
		return usageError(err.Error() + "; see 'evenshelf profiles'")
	}
	e, files, err := a.recordings(c.Paths)
	if err != nil {
		return err
	}
	if err := c.refuseUnsafe(files); err != nil {
		return err
	}
	if err := os.MkdirAll(c.Out, 0o755); err != nil {
		return err
	}
	bar, t, notDone := newProgress(a.stderr), tally{files: len(files)}, 0
	for _, f := range files {
		t.bytes += f.size
	}
	bar.draw(t)
	err = inOrder(a.ctx, a.workers(), files, func(ctx context.Context, in input) levelled {
		return c.level(ctx, e, p, in)
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

func (c *levelCmd) level(ctx context.Context, e *level.Engine, p profile.Profile, in input) levelled {
	r := levelled{Path: in.path, State: level.Failed}
	if in.err != nil {
		r.Reason = level.Reason(in.err, in.path)
		return r
	}
	if _, err := os.Lstat(filepath.Join(c.Out, filepath.FromSlash(in.rel))); err == nil && !c.Overwrite {
		r.Reason = in.rel + " is already there" // delivery would find out after the work
		return r
	}
	key := fmt.Sprintf("%d", os.Getpid())
	o, output, err := delivery.Deliver(ctx, e, in.path, c.Out, in.rel, level.Task{Profile: p}, key, delivery.Options{Overwrite: c.Overwrite})
	if err != nil {
		r.Reason = err.Error()
		return r
	}
	r.State, r.Before, r.After, r.Reason = o.Verdict.State, o.Before, o.After, o.Verdict.Reason
	if output != "" {
		output = filepath.Join(c.Out, filepath.FromSlash(output))
		r.Output = &output
	}
	if o.Plan != nil {
		gain := float64(o.Plan.Gain)
		r.Gain = &gain
	}
	return r
}

func (c *levelCmd) print(a *app, r levelled) {
	if c.JSON {
		json.NewEncoder(a.stdout).Encode(r)
		return
	}
	line := fmt.Sprintf("%-6s", r.State)
	if r.Before != nil && r.After != nil {
		line += fmt.Sprintf("  %s → %s LUFS  %s dBTP", figure(float64(r.Before.Integrated), 6),
			figure(float64(r.After.Integrated), 5), figure(float64(r.After.TruePeak), 5))
	}
	line += "  " + printable(r.Path)
	if r.Reason != "" {
		line += ": " + printable(r.Reason)
	}
	fmt.Fprintln(a.stdout, line)
}
