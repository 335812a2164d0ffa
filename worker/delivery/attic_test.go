package delivery

import (
	"context"
	"errors"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"testing"
	"time"

	"evenshelf/engine/level"
	"evenshelf/engine/profile"
)

// atticBench is a shelf, its copies and its attic, and what was recorded.
type atticBench struct {
	*bench
	place    Place
	kept     []Original
	versions []*Original // likewise, nil where there was none
}

func newAtticBench(t *testing.T) *atticBench {
	b := &atticBench{bench: newBench(t)}
	here := b.source("m/a.wav")
	b.place = Place{Root: b.src, Rel: "m/a.wav", Attic: b.out + ".attic", Copies: b.out, Source: here}
	return b
}

var errCut = errors.New("the power went")

// replace runs Replace; cut ends it right after the original was recorded.
func (b *atticBench) replace(l *leveller, cut bool) (level.Outcome, string, error) {
	b.t.Helper()
	return Replace(b.t.Context(), l, &b.place, level.Task{}, "job-7", func(_ context.Context, o Original, v *Original) error {
		b.versions = append(b.versions, v)
		b.kept = append(b.kept, o)
		if cut {
			return errCut
		}
		return nil
	})
}

// again has the next levelling start from an original that was kept.
func (b *atticBench) again(n int) {
	b.place.Source, b.place.Ours = filepath.Join(b.place.Attic, b.kept[n].Stored), &b.kept[n]
}

func (b *atticBench) check(shelf, attic []string) {
	b.t.Helper()
	if got := files(b.t, b.src); !slices.Equal(got, shelf) {
		b.t.Errorf("shelf has %q, want %q", got, shelf)
	}
	got := files(b.t, b.place.Attic)
	for i := range got {
		name, text, _ := strings.Cut(got[i], "=")
		got[i] = name[:4] + "*=" + text // without the hash
	}
	if !slices.Equal(got, attic) {
		b.t.Errorf("attic has %q, want %q", got, attic)
	}
}

func TestReplaceAndRestore(t *testing.T) {
	b := newAtticBench(t)
	must(t, os.Chmod(b.place.Source, 0o640))
	if _, output, err := b.replace(&leveller{text: " one"}, false); output != "m/a.wav" || err != nil {
		t.Fatalf("%q %v", output, err)
	}
	b.check([]string{"m/a.wav=levelled one"}, []string{"m/a.*=source"})
	info, err := os.Stat(filepath.Join(b.src, "m/a.wav"))
	if err != nil || info.Mode().Perm() != 0o640 || !info.ModTime().Equal(sourceTime) || info.Size() != b.kept[0].Size {
		t.Errorf("mode %v, time %v, %v", info.Mode(), info.ModTime(), err)
	}
	// Levelled again, from the original.
	b.again(0)
	if _, _, err := b.replace(&leveller{text: " two"}, false); err != nil {
		t.Fatal(err)
	}
	b.check([]string{"m/a.wav=levelled two"}, []string{"m/a.*=source"})
	if b.kept[1].Stored != b.kept[0].Stored || b.kept[1].SHA256 != b.kept[0].SHA256 || b.kept[1].Levelled == b.kept[0].Levelled {
		t.Errorf("kept: %+v", b.kept)
	}

	if err := Restore(b.src, "m/a.wav", b.place.Attic, b.kept[0], "restore-1"); !errors.Is(err, ErrChanged) {
		t.Errorf("a file we do not know was written over: %v", err)
	}
	for range 2 { // again, as after a crash in between
		if err := Restore(b.src, "m/a.wav", b.place.Attic, b.kept[1], "restore-1"); err != nil {
			t.Fatal(err)
		}
		b.check([]string{"m/a.wav=source"}, nil)
	}
	info, err = os.Stat(filepath.Join(b.src, "m/a.wav"))
	if err != nil || info.Mode().Perm() != 0o640 || !info.ModTime().Equal(sourceTime) {
		t.Errorf("restored with mode %v, time %v, %v", info.Mode(), info.ModTime(), err)
	}
}

// Cut short between any two steps, the original is on the shelf or in the attic, and a repetition ends well.
func TestReplaceCutShort(t *testing.T) {
	b := newAtticBench(t)
	if _, _, err := b.replace(&leveller{err: errCut}, false); !errors.Is(err, errCut) {
		t.Error(err)
	}
	b.check([]string{"m/a.wav=source"}, nil)
	if _, _, err := b.replace(&leveller{}, true); !errors.Is(err, errCut) {
		t.Error(err)
	}
	b.check([]string{"m/a.wav=source"}, []string{"m/a.*=source"})
	if _, output, err := b.replace(&leveller{}, false); output != "m/a.wav" || err != nil {
		t.Errorf("%q %v", output, err)
	}
	b.check([]string{"m/a.wav=levelled"}, []string{"m/a.*=source"})
	// After the rename, before the result was stored: the caller finds the copy in place and levels the original.
	if !b.kept[1].IsLevelled(filepath.Join(b.src, "m/a.wav")) {
		t.Error("the copy is not known again")
	}
	b.again(1)
	if _, output, err := b.replace(&leveller{}, false); output != "m/a.wav" || err != nil {
		t.Errorf("%q %v", output, err)
	}
	b.check([]string{"m/a.wav=levelled"}, []string{"m/a.*=source"})
}

func TestReplaceLeavesTheRecordingWhereItHasTo(t *testing.T) {
	for why, c := range map[string]struct {
		l      leveller
		output string
		state  level.State
		copies []string
	}{
		"held":               {leveller{state: level.Held}, "_held/m/a.wav", level.Held, []string{"_held/m/a.wav=levelled"}},
		"held, other format": {leveller{state: level.Held, extension: ".flac"}, "_held/m/a.wav.flac", level.Held, []string{"_held/m/a.wav.flac=levelled"}},
		"failed":             {leveller{state: level.Failed, nothing: true}, "", level.Failed, nil},
		"another format":     {leveller{extension: ".flac"}, "", level.Failed, nil},
		"within the profile": {leveller{untouched: true}, "m/a.wav", level.Done, nil},
	} {
		t.Run(why, func(t *testing.T) {
			b := newAtticBench(t)
			o, output, err := b.replace(&c.l, false)
			if output != c.output || err != nil || o.Verdict.State != c.state {
				t.Errorf("%q %v %+v", output, err, o.Verdict)
			}
			b.check([]string{"m/a.wav=source"}, nil)
			b.want(c.copies...)
			if len(b.kept) > 0 {
				t.Errorf("recorded: %+v", b.kept)
			}
		})
	}
}

func TestDamagedAtticIsNotRestored(t *testing.T) {
	b := newAtticBench(t)
	if _, _, err := b.replace(&leveller{}, false); err != nil {
		t.Fatal(err)
	}
	b.write(filepath.Join(b.place.Attic, b.kept[0].Stored), "rotten")
	if err := Restore(b.src, "m/a.wav", b.place.Attic, b.kept[0], "restore-1"); err == nil || !strings.Contains(err.Error(), "damaged") {
		t.Errorf("got %v", err)
	}
	b.check([]string{"m/a.wav=levelled"}, []string{"m/a.*=rotten"})
}

// Where no link can be made, the copy is read back and has to be the same.
func TestCopyInsteadOfLink(t *testing.T) {
	b := newBench(t)
	from, to := b.source("a.wav"), filepath.Join(b.src, "b.wav")
	must(t, copyFile(from, to))
	info, err := os.Stat(to)
	if err != nil || !info.ModTime().Equal(sourceTime) {
		t.Errorf("time %v, %v", info.ModTime(), err)
	}
	if got := files(t, b.src); !slices.Equal(got, []string{"a.wav=source", "b.wav=source"}) {
		t.Errorf("%q", got)
	}
}

// Somebody puts a file of their own in a recording's place while it is being levelled, for the first time or
// again from its original: theirs stays, and nothing is recorded.
func TestReplaceLeavesWhatWasPutThereMeanwhile(t *testing.T) {
	for _, again := range []bool{false, true} {
		b := newAtticBench(t)
		if again {
			if _, _, err := b.replace(&leveller{}, false); err != nil {
				t.Fatal(err)
			}
			b.again(0)
			b.kept = nil
		}
		putThere := func() { b.write(filepath.Join(b.src, "m/a.wav"), "somebody's own") }
		if _, output, err := b.replace(&leveller{text: " again", during: putThere}, false); err == nil || output != "" || len(b.kept) > 0 {
			t.Errorf("again %v: %q, %v, recorded %+v", again, output, err, b.kept)
		}
		if got := files(t, b.src); !slices.Equal(got, []string{"m/a.wav=somebody's own"}) {
			t.Errorf("again %v: the shelf has %q", again, got)
		}
	}
}

// A folder was renamed after the scan and a link left under its old name: nothing is replaced through it, or
// the file it leads to would be taken for the original in the attic, and removed on restoring.
func TestReplaceNothingThroughALink(t *testing.T) {
	b := newAtticBench(t)
	must(t, os.Rename(filepath.Join(b.src, "m"), filepath.Join(b.src, "n")))
	must(t, os.Symlink("n", filepath.Join(b.src, "m")))
	b.place.Source = filepath.Join(b.src, "n", "a.wav") // where links lead, as discover.Resolve returns it
	o, output, err := b.replace(&leveller{}, false)
	if err != nil || output != "" || o.Verdict.State != level.Failed || !strings.Contains(o.Verdict.Reason, "link") || len(b.kept) > 0 {
		t.Errorf("%q, %v, %+v, recorded %+v", output, err, o.Verdict, b.kept)
	}
	if got := files(t, filepath.Join(b.src, "n")); !slices.Equal(got, []string{"a.wav=source"}) {
		t.Errorf("the shelf has %q", got)
	}
}

// Who could read the original has to be able to read what takes its place.
func TestReplaceKeepsOwnerAndGroup(t *testing.T) {
	b := newAtticBench(t)
	uid, gid := os.Getuid(), os.Getgid()
	if uid == 0 { // only root can make a file that is somebody else's
		uid, gid = 1, 2
	} else if groups, err := os.Getgroups(); err == nil && len(groups) > 0 {
		gid = groups[len(groups)-1]
	}
	must(t, os.Chown(b.place.Source, uid, gid))
	if _, _, err := b.replace(&leveller{}, false); err != nil {
		t.Fatal(err)
	}
	info, err := os.Stat(filepath.Join(b.src, "m/a.wav"))
	must(t, err)
	if s := info.Sys().(*syscall.Stat_t); int(s.Uid) != uid || int(s.Gid) != gid {
		t.Errorf("owner %d:%d, want %d:%d", s.Uid, s.Gid, uid, gid)
	}
}

// A held copy is for people to listen to: readable, and of its recording's time, like one that is delivered.
func TestReplaceDressesWhatIsHeld(t *testing.T) {
	b := newAtticBench(t)
	_, output, err := b.replace(&leveller{state: level.Held}, false)
	must(t, err)
	info, err := os.Stat(filepath.Join(b.out, output))
	if err != nil || info.Mode().Perm() != 0o644 || !info.ModTime().Equal(sourceTime) {
		t.Errorf("mode %v, time %v, %v", info.Mode(), info.ModTime(), err)
	}
}

// A shelf whose disk is not mounted is an empty folder, and takes files. An original put there would be hidden
// behind the disk later, and be gone from the attic.
func TestRestoreNothingOntoAnEmptyShelf(t *testing.T) {
	b := newAtticBench(t)
	if _, _, err := b.replace(&leveller{}, false); err != nil {
		t.Fatal(err)
	}
	must(t, os.Rename(b.src, b.src+"-away"))
	must(t, os.Mkdir(b.src, 0o755))
	if err := Restore(b.src, "m/a.wav", b.place.Attic, b.kept[0], "restore-1"); err == nil || !strings.Contains(err.Error(), "mounted") {
		t.Errorf("got %v", err)
	}
	b.check(nil, []string{"m/a.*=source"})
}

// A folder that nothing can be written to is told before the work, and is no reason to try again.
func TestFolderThatCannotBeWrittenTo(t *testing.T) {
	root, err := os.MkdirTemp("", "evenshelf") // not t.TempDir, whose parent lets nobody else in
	must(t, err)
	defer os.RemoveAll(root)
	must(t, os.Chmod(root, 0o755))
	for _, dir := range []string{"m", "out"} {
		must(t, os.Mkdir(filepath.Join(root, dir), 0o755))
	}
	source := filepath.Join(root, "m", "a.wav")
	must(t, os.WriteFile(source, []byte("source"), 0o644))
	must(t, os.Chmod(filepath.Join(root, "m"), 0o555))
	must(t, os.Chmod(filepath.Join(root, "out"), 0o555))
	at := Place{Root: root, Rel: "m/a.wav", Attic: filepath.Join(root, "attic"), Copies: filepath.Join(root, "out"), Source: source}
	worked := &leveller{during: func() { t.Error("the engine was asked to work") }}
	for what, do := range map[string]func() (level.Outcome, string, error){
		"replace": func() (level.Outcome, string, error) {
			return Replace(t.Context(), worked, &at, level.Task{}, "job-7", nil)
		},
		"copy": func() (level.Outcome, string, error) {
			return Deliver(t.Context(), worked, source, filepath.Join(root, "out"), "m/a.wav", level.Task{}, "job-7", Options{Overwrite: true})
		},
	} {
		var o level.Outcome
		var output string
		err := asNobody(func() (err error) {
			o, output, err = do()
			return err
		})
		if err != nil || output != "" || o.Verdict.State != level.Failed || !strings.HasPrefix(o.Verdict.Reason, "its folder cannot be written to") {
			t.Errorf("%s: %+v %q %v", what, o.Verdict, output, err)
		}
	}
	for err, want := range map[error]bool{syscall.EROFS: true, syscall.EACCES: true, syscall.ENOSPC: false, syscall.EIO: false} {
		if refusal, rest := noWay(&os.PathError{Op: "open", Path: "x", Err: err}); (refusal != "") != want || (rest == nil) != want {
			t.Errorf("%v: %q %v", err, refusal, rest)
		}
	}
}

// A file as long as the one whose place it takes is a second younger: else a backup would not see that it is another.
func TestReplaceIsSeenByBackups(t *testing.T) {
	b := newAtticBench(t)
	must(t, os.WriteFile(b.place.Source, []byte("as long "), 0o644))
	must(t, os.Chtimes(b.place.Source, sourceTime, sourceTime))
	for i, c := range []struct {
		text  string
		later time.Duration
	}{{"levelled", time.Second}, {"levelled more", time.Second}, {"levelled MORE", 2 * time.Second}} {
		if i > 0 {
			b.again(i - 1)
		}
		if _, _, err := b.replace(&leveller{text: strings.TrimPrefix(c.text, "levelled")}, false); err != nil {
			t.Fatal(err)
		}
		info, err := os.Stat(filepath.Join(b.src, "m/a.wav"))
		must(t, err)
		if want := sourceTime.Add(c.later); !info.ModTime().Equal(want) || !b.kept[i].Modified.Equal(want) {
			t.Errorf("%s: %v, recorded %v, want %v", c.text, info.ModTime(), b.kept[i].Modified, want)
		}
	}
}

func TestUnfit(t *testing.T) {
	for _, c := range []struct {
		format profile.Format
		rel    string
		unfit  bool
	}{
		{profile.MP3, "a/b.flac", true}, {profile.MP3, "a/b.MP3", false}, {profile.WAV, "b.wave", false}, {profile.FLAC, "b.aiff", true},
		{profile.OwnFormat, "b.flac", false}, {profile.MP3, "film.mkv", false}, {profile.M4A, "film.mp4", false}, {profile.Opus, "b.ogg", true},
	} {
		if why := Unfit(c.format, c.rel); (why != "") != c.unfit {
			t.Errorf("%s for %s: %q", c.format, c.rel, why)
		}
	}
}
