package store

import (
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

func TestAddShelfRefuses(t *testing.T) {
	f := open(t)
	dir := t.TempDir()
	root := filepath.Join(dir, "root")
	mustWrite(t, filepath.Join(root, "sub", "x.wav"), "x")
	file := filepath.Join(dir, "file")
	mustWrite(t, file, "x")
	intoRoot := filepath.Join(dir, "into-root")
	if err := os.Symlink(root, intoRoot); err != nil {
		t.Fatal(err)
	}
	nowhere := filepath.Join(dir, "nowhere")
	if err := os.Symlink(filepath.Join(dir, "gone"), nowhere); err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		why                string
		name, root, copies string
		want               error
	}{
		{"empty name", "", root, dir + "/c", ErrInvalid},
		{"capital", "Radio", root, dir + "/c", ErrInvalid},
		{"space", "my radio", root, dir + "/c", ErrInvalid},
		{"slash", "a/b", root, dir + "/c", ErrInvalid},
		{"leading hyphen, looks like an option", "-a", root, dir + "/c", ErrInvalid},
		{"line feed after a good name", "radio\n", root, dir + "/c", ErrInvalid},
		{"too long", strings.Repeat("a", 41), root, dir + "/c", ErrInvalid},
		{"relative root", "radio", "root", dir + "/c", ErrInvalid},
		{"missing root", "radio", dir + "/gone", dir + "/c", ErrInvalid},
		{"root is a file", "radio", file, dir + "/c", ErrInvalid},
		{"no copies", "radio", root, "", ErrInvalid},
		{"relative copies", "radio", root, "copies", ErrInvalid},
		{"copies is root", "radio", root, root, ErrInvalid},
		{"copies is root, unclean", "radio", root, root + "/sub/..", ErrInvalid},
		{"copies in root", "radio", root, root + "/copies", ErrInvalid},
		{"copies in root through a link", "radio", root, intoRoot + "/not/yet/there", ErrInvalid},
		{"root in copies", "radio", root, dir, ErrInvalid},
		{"copies at /", "radio", root, "/", ErrInvalid},
		{"copies is a file", "radio", root, file, ErrInvalid},
		{"copies below a file", "radio", root, file + "/c", ErrInvalid},
		{"copies is a link to nowhere", "radio", root, nowhere, ErrInvalid},
		{"name taken", "music", root, dir + "/c", ErrExists},
		{"root taken", "radio", f.shelf.Root, dir + "/c", ErrExists},
		{"copies taken", "radio", root, f.shelf.Copies, ErrExists},
		{"copies below another shelf's copies", "radio", root, f.shelf.Copies + "/x", ErrExists},
		{"copies among another shelf's recordings", "radio", root, f.shelf.Root + "/x", ErrInvalid},
	} {
		_, err := f.AddShelf(f.ctx, Shelf{Name: c.name, Root: c.root, Copies: c.copies})
		if !errors.Is(err, c.want) {
			t.Errorf("%s: got %v, want %v", c.why, err, c.want)
		}
	}
	list, err := f.Shelves(f.ctx)
	if err != nil || len(list) != 1 {
		t.Errorf("a refused shelf was kept: %v %v", list, err)
	}
}

func TestAddShelfResolvesLinks(t *testing.T) {
	f := open(t)
	dir, err := filepath.EvalSymlinks(t.TempDir())
	if err != nil {
		t.Fatal(err)
	}
	mustWrite(t, filepath.Join(dir, "root", "x.wav"), "x")
	mustWrite(t, filepath.Join(dir, "target", "x"), "x")
	for _, name := range []string{"root", "target"} {
		if err := os.Symlink(filepath.Join(dir, name), filepath.Join(dir, "link-"+name)); err != nil {
			t.Fatal(err)
		}
	}
	// A sibling whose name begins like the root is not inside it.
	sh, err := f.AddShelf(f.ctx, Shelf{Name: "radio", Root: dir + "/link-root", Copies: dir + "/link-target/deep/er"})
	if err != nil {
		t.Fatal(err)
	}
	if sh.Root != dir+"/root" || sh.Copies != dir+"/target/deep/er" {
		t.Errorf("root %s, copies %s", sh.Root, sh.Copies)
	}
	if _, err := f.AddShelf(f.ctx, Shelf{Name: "beside", Root: dir + "/target", Copies: dir + "/target-copies"}); !errors.Is(err, ErrInvalid) {
		t.Errorf("recordings around another shelf's copies: %v", err)
	}
	got, err := f.ShelfNamed(f.ctx, "radio")
	if err != nil || got != sh {
		t.Errorf("stored as %+v, %v; want %+v", got, err, sh)
	}
}

func TestLookUpsFindNothing(t *testing.T) {
	f := open(t)
	ctx := f.ctx
	for name, look := range map[string]func() error{
		"Shelf":            func() error { _, err := f.Shelf(ctx, 9); return err },
		"ShelfNamed":       func() error { _, err := f.ShelfNamed(ctx, "no"); return err },
		"Recording":        func() error { _, err := f.Recording(ctx, 9); return err },
		"Readings":         func() error { _, _, err := f.Readings(ctx, 9); return err },
		"Timeline":         func() error { _, err := f.Timeline(ctx, 9); return err },
		"RecordingHistory": func() error { _, err := f.RecordingHistory(ctx, 9); return err },
		"RecordingJobs":    func() error { _, err := f.RecordingJobs(ctx, 9); return err },
		"Spines":           func() error { _, err := f.Spines(ctx, 9); return err },
		"Run":              func() error { _, err := f.Run(ctx, 9); return err },
		"CancelRun":        func() error { _, err := f.CancelRun(ctx, 9); return err },
		"Jobs":             func() error { _, err := f.Jobs(ctx, JobQuery{RunID: 9}); return err },
		"Job":              func() error { _, err := f.Job(ctx, 9); return err },
		"StartJob":         func() error { _, err := f.StartJob(ctx, 9); return err },
		"FinishJob":        func() error { return f.FinishJob(ctx, 9, done(-30, -18), "", nil) },
		"RetryJob":         func() error { return f.RetryJob(ctx, 9, "") },
		"Found":            func() error { _, err := f.Found(ctx, 9, "", nil); return err },
		"CreateRun": func() error {
			_, err := f.CreateRun(ctx, NewRun{ShelfID: 9, Profile: someProfile(t), Delivery: Measure}, nil)
			return err
		},
	} {
		if err := look(); !errors.Is(err, ErrNotFound) {
			t.Errorf("%s: %v, want ErrNotFound", name, err)
		}
	}
}

func TestShelfSummary(t *testing.T) {
	f := open(t)
	f.found("a.wav", "b.wav", "c.wav", "d.wav", "e.wav")
	sum, err := f.Shelf(f.ctx, f.shelf.ID)
	if err != nil {
		t.Fatal(err)
	}
	if sum.Recordings != 5 || sum.Measured != 0 || sum.Quietest != nil || sum.HighestPeak != nil || sum.LastRun != nil {
		t.Errorf("before any work: %+v", sum)
	}
	run, jobs := f.run(Copy)
	for i, o := range []struct {
		job    int64
		before float64
	}{{jobs[0], -30}, {jobs[1], -11.5}} {
		f.start(o.job)
		f.finish(o.job, done(o.before, -18-float64(i)), "x")
	}
	f.start(jobs[2])
	f.finish(jobs[2], held("noise"), "_held/c.wav")
	f.start(jobs[3])
	f.finish(jobs[3], failed("no sound"), "")
	sum, err = f.Shelf(f.ctx, f.shelf.ID)
	if err != nil {
		t.Fatal(err)
	}
	if sum.Recordings != 5 || sum.Measured != 3 || sum.Done != 2 || sum.Held != 1 || sum.Failed != 1 || sum.Duration != 3*90 {
		t.Errorf("counts: %+v", sum)
	}
	near(t, "quietest", sum.Quietest, -40) // the held one
	near(t, "loudest", sum.Loudest, -11.5)
	near(t, "quietest after", sum.QuietestAfter, -19) // done ones only
	near(t, "loudest after", sum.LoudestAfter, -18)
	near(t, "highest peak after", sum.HighestPeak, -18+12)
	if sum.LastRun == nil || sum.LastRun.ID != run.ID || sum.LastRun.Waiting != 1 {
		t.Errorf("last run: %+v", sum.LastRun)
	}
	f.found("a.wav") // the others are missing now
	if sum, err = f.Shelf(f.ctx, f.shelf.ID); err != nil || sum.Recordings != 1 || sum.Held != 0 {
		t.Errorf("with four missing: %+v %v", sum, err)
	}
	if n, err := f.HeldCount(f.ctx); err != nil || n != 1 {
		t.Errorf("held: %d %v", n, err)
	}
}
