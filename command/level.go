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
	"evenshelf/engine/profile"
	"evenshelf/worker/delivery"
)

type levelCmd struct {
	Profile   string   `help:"Levelling profile, or a file with one: see 'evenshelf profiles'. Needed unless only tags are written." placeholder:"NAME|FILE.toml"`
	Delivery  string   `help:"copy makes levelled copies in --out; tags writes gain tags into the files themselves, which go to --attic first." enum:"copy,tags" default:"copy"`
	Out       string   `help:"Folder the copies go to; sub-folders are mirrored." placeholder:"DIR" type:"path"`
	Attic     string   `help:"Folder for the originals of files that get tags." placeholder:"DIR" type:"path"`
	Format    string   `help:"Format of the copies, instead of the profile's: wav, flac, mp3, m4a, ogg, opus or source." placeholder:"FORMAT"`
	BitRate   int      `help:"Bit rate of copies in a lossy format, instead of the profile's." placeholder:"KBIT/S"`
	Group     string   `help:"Recordings that share one gain, instead of the profile's: none, folder, or album by their tags." placeholder:"WHICH"`
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
	p, err := c.profile(a)
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

// profile is the profile with what the command line asks for beside it.
func (c *levelCmd) profile(a *app) (p profile.Profile, err error) {
	name := c.Profile
	switch {
	case c.Delivery == "tags" && (c.Format != "" || c.BitRate != 0):
		return p, usageError("--format and --bit-rate mean nothing with --delivery tags, which encodes no sound")
	case c.Delivery == "tags":
		name = cmp.Or(name, "untouched")
	case name == "":
		return p, usageError("--profile is needed: see 'evenshelf profiles'")
	}
	if p, err = a.profile(name); err != nil {
		return p, err
	}
	if c.Delivery == "tags" {
		p = p.ForTags()
	}
	if p, err = p.With(profile.Wishes{Format: profile.Format(c.Format), BitRate: c.BitRate, Group: profile.Group(c.Group)}); err != nil {
		return p, usageError(err.Error())
	}
	return p, nil
}

// prepare makes the output folder, unless nothing is to be written.
func (c *levelCmd) prepare(files []input) error {
	switch {
	case c.Delivery == "tags":
		return c.prepareAttic()
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

// prepareAttic makes the folder that originals go to.
func (c *levelCmd) prepareAttic() error {
	switch {
	case c.DryRun:
		return usageError("--delivery tags has no dry run: 'evenshelf measure' says what would be written")
	case c.Out != "":
		return usageError("--delivery tags writes into the files themselves: --attic says where their originals go, and there is no --out")
	case c.Attic == "":
		return usageError("--attic is needed: the folder that the originals go to before tags are written into their files")
	}
	if err := c.outsideOf(c.Attic, "--attic"); err != nil {
		return err
	}
	return os.MkdirAll(c.Attic, 0o755)
}

// outsideOf says no to a folder that is one of those given, or inside one.
func (c *levelCmd) outsideOf(dir, option string) error {
	folder, err := realPath(dir)
	if err != nil {
		return err
	}
	for _, path := range c.Paths {
		from, err := realPath(path)
		if err != nil {
			return err
		}
		if folder == from || strings.HasPrefix(folder, from+string(filepath.Separator)) {
			return usageError(fmt.Sprintf("%s %s is inside %s: choose a folder beside it", option, dir, path))
		}
	}
	return nil
}

// refuseUnsafe says no to command lines that could write over an original or mix two files up.
func (c *levelCmd) refuseUnsafe(files []input) error {
	if err := c.outsideOf(c.Out, "--out"); err != nil {
		return err
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
	switch {
	case c.Delivery == "tags":
		r.Outcome, err = c.tag(ctx, e, t, in.path)
	case c.DryRun:
		r.Outcome, err = e.Foresee(ctx, in.path, t)
	default:
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

// tag writes gain tags into a file, and keeps its original in the attic under the path it has on this machine.
func (c *levelCmd) tag(ctx context.Context, e *level.Engine, t level.Task, path string) (level.Outcome, error) {
	real, err := realPath(path)
	if err != nil {
		return level.Outcome{}, err
	}
	attic, err := filepath.Abs(c.Attic)
	if err != nil {
		return level.Outcome{}, err
	}
	dir, name := filepath.Split(real)
	at := delivery.Place{Root: dir, Rel: name, Attic: filepath.Join(attic, dir), Source: real}
	o, _, err := delivery.Tag(ctx, e, &at, t, fmt.Sprintf("%d", os.Getpid()), func(context.Context, delivery.Original, *delivery.Original) error { return nil })
	return o, err
}

func (c *levelCmd) print(a *app, r levelled) {
	if c.JSON {
		json.NewEncoder(a.stdout).Encode(r)
		return
	}
	line := fmt.Sprintf("%-6s", r.State)
	switch {
	case r.Before != nil && c.Delivery == "tags":
		line += "  " + summary(r.Before)
	case r.Before != nil && r.Foreseen != nil:
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
