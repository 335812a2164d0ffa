package discover

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"testing"

	"evenshelf/store"
)

// tree makes files; a name ending in "/" is a folder, "a -> b" a symbolic link.
func tree(t *testing.T, names ...string) string {
	t.Helper()
	root, err := filepath.EvalSymlinks(t.TempDir())
	if err != nil {
		t.Fatal(err)
	}
	for _, name := range names {
		link, to, isLink := strings.Cut(name, " -> ")
		path := filepath.Join(root, link)
		if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
			t.Fatal(err)
		}
		switch {
		case isLink:
			err = os.Symlink(strings.ReplaceAll(to, "ROOT", root), path)
		case strings.HasSuffix(name, "/"):
			err = os.MkdirAll(path, 0o755)
		default:
			err = os.WriteFile(path, []byte(name), 0o644)
		}
		if err != nil {
			t.Fatal(err)
		}
	}
	return root
}

func walked(t *testing.T, root, folder string) (paths []string, err error) {
	t.Helper()
	err = Walk(t.Context(), root, folder, func(f store.FoundFile) error {
		if f.Size == 0 || f.ModifiedAt.IsZero() {
			t.Errorf("%+v has no size or time", f)
		}
		paths = append(paths, f.Path)
		return nil
	})
	return paths, err
}

func TestWalk(t *testing.T) {
	outside := tree(t, "o.wav", "deep/p.wav")
	root := tree(t,
		"b.WAV", "a.mp3", "a/z.flac", "a/y/x.ogg", "ab/c.wav", "notes.txt", "cover.jpg", "noext",
		".hidden.wav", ".trash/t.wav", "a/.x/t.wav", ".a.wav.evenshelf-job-1.part",
		"_held/h.wav", "a/_held/h.wav", "_held.wav", "_heldover/i.wav", "wav/", "folder.wav/j.wav",
		"in.wav -> a/z.flac", "out.wav -> "+outside+"/o.wav", "outdir -> "+outside, "loop -> .", "dangling.wav -> gone",
		"latin-\xe9/k-\xe9.wav", "spaces and 'quotes'/l\n.wav")
	got, err := walked(t, root, "")
	want := []string{"_held.wav", "_heldover/i.wav", "a/y/x.ogg", "a/z.flac", "a.mp3", "ab/c.wav", "b.WAV", "folder.wav/j.wav",
		"latin-\xe9/k-\xe9.wav", "spaces and 'quotes'/l\n.wav"}
	if err != nil || !slices.Equal(got, want) {
		t.Errorf("got  %q %v\nwant %q", got, err, want)
	}
	if got, err := walked(t, root, "a"); err != nil || !slices.Equal(got, []string{"a/y/x.ogg", "a/z.flac"}) {
		t.Errorf("folder a: %q %v", got, err)
	}
	if got, err := walked(t, root+"/", "a/y/"); err != nil || !slices.Equal(got, []string{"a/y/x.ogg"}) {
		t.Errorf("folder a/y/: %q %v", got, err)
	}
	for _, folder := range []string{"gone", "..", "/etc", "a/../..", "outdir", "loop", "outdir/deep", "b.WAV", "b.WAV/x"} {
		if got, err := walked(t, root, folder); err == nil || len(got) > 0 {
			t.Errorf("folder %q: %q %v, want an error and nothing", folder, got, err)
		}
	}
	if _, err := walked(t, filepath.Join(root, "gone"), ""); err == nil {
		t.Error("no root: no error")
	}
}

func TestWalkStops(t *testing.T) {
	root := tree(t, "a.wav", "b/c.wav", "d.wav")
	enough := errors.New("enough")
	n := 0
	err := Walk(t.Context(), root, "", func(store.FoundFile) error { n++; return enough })
	if !errors.Is(err, enough) || n != 1 {
		t.Errorf("%v after %d files", err, n)
	}
	ctx, cancel := context.WithCancelCause(t.Context())
	n = 0
	err = Walk(ctx, root, "", func(store.FoundFile) error { n++; cancel(enough); return nil })
	if !errors.Is(err, enough) || n != 1 {
		t.Errorf("cancelled: %v after %d files", err, n)
	}
}

// A folder that cannot be read is reported and the rest is walked.
func TestWalkReportsUnreadFolders(t *testing.T) {
	root := tree(t, "a/b.wav", "locked/c.wav", "z.wav")
	if err := os.Chmod(filepath.Join(root, "locked"), 0); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { os.Chmod(filepath.Join(root, "locked"), 0o755) })
	if err := os.Chmod(filepath.Dir(root), 0o755); err != nil { // a test's folder is the owner's alone
		t.Fatal(err)
	}
	var got []string
	err := asNobody(func() (err error) { got, err = walked(t, root, ""); return err })
	var unread *Unread
	if !errors.As(err, &unread) || !slices.Equal(unread.Folders, []string{"locked"}) || !errors.Is(err, syscall.EACCES) {
		t.Errorf("err %v", err)
	}
	if !slices.Equal(got, []string{"a/b.wav", "z.wav"}) {
		t.Errorf("walked %q", got)
	}
	if want := "could not look into locked: permission denied"; fmt.Sprint(err) != want {
		t.Errorf("%q, want %q", err, want)
	}
}

func TestResolve(t *testing.T) {
	outside := tree(t, "o.wav", "d/p.wav")
	root := tree(t, "a.wav", "f/b.wav", "in.wav -> f/b.wav", "indir -> f", "up.wav -> f/../a.wav", "twice.wav -> in.wav",
		"out.wav -> "+outside+"/o.wav", "outdir -> "+outside+"/d", "rel-out.wav -> ../"+filepath.Base(outside)+"/o.wav",
		"abs-in.wav -> ROOT/a.wav", "dangling.wav -> gone.wav", "loop.wav -> loop.wav", "latin-\xe9.wav", "..a.wav")
	if err := syscall.Mkfifo(filepath.Join(root, "pipe.wav"), 0o644); err != nil {
		t.Fatal(err)
	}
	// The other root lies beside this one, as tests' folders do not: make rel-out lead somewhere real.
	if err := os.Remove(filepath.Join(root, "rel-out.wav")); err != nil {
		t.Fatal(err)
	}
	rel, err := filepath.Rel(root, filepath.Join(outside, "o.wav"))
	if err != nil {
		t.Fatal(err)
	}
	if err := os.Symlink(rel, filepath.Join(root, "rel-out.wav")); err != nil {
		t.Fatal(err)
	}
	for name, want := range map[string]string{
		"a.wav": "a.wav", "f/b.wav": "f/b.wav", "in.wav": "f/b.wav", "indir/b.wav": "f/b.wav", "up.wav": "a.wav",
		"twice.wav": "f/b.wav", "latin-\xe9.wav": "latin-\xe9.wav", "..a.wav": "..a.wav",
	} {
		if got, err := Resolve(root, name); err != nil || got != filepath.Join(root, want) {
			t.Errorf("%s: %q %v, want %q", name, got, err, want)
		}
	}
	for name, want := range map[string]error{
		"": ErrOutside, "/etc/passwd": ErrOutside, "../x.wav": ErrOutside, "f/../../x.wav": ErrOutside, "f/../a.wav": ErrOutside,
		"out.wav": ErrOutside, "outdir/p.wav": ErrOutside, "rel-out.wav": ErrOutside, "abs-in.wav": ErrOutside,
		"gone.wav": ErrMissing, "f/gone.wav": ErrMissing, "gone/a.wav": ErrMissing, "dangling.wav": ErrMissing,
		"f": ErrNotFile, ".": ErrNotFile, "pipe.wav": ErrNotFile,
	} {
		got, err := Resolve(root, name)
		if !errors.Is(err, want) || got != "" {
			t.Errorf("%q: %q %v, want %v", name, got, err, want)
		} else if !strings.Contains(err.Error(), name) {
			t.Errorf("%q: %q does not name the file", name, err)
		}
	}
	for _, name := range []string{"loop.wav", "a.wav/x.wav"} {
		if _, err := Resolve(root, name); err == nil {
			t.Errorf("%s: no error", name)
		}
	}
	// A root that is away may come back: that is none of the lasting reasons.
	_, err = Resolve(filepath.Join(root, "away"), "a.wav")
	if err == nil || errors.Is(err, ErrMissing) || errors.Is(err, ErrOutside) || errors.Is(err, ErrNotFile) {
		t.Errorf("root away: %v", err)
	}
}
