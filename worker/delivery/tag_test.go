package delivery

import (
	"context"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"golang.org/x/sys/unix"

	"evenshelf/engine/level"
)

// tagger is a stand-in that puts a word behind the file, as tags may lie; a file that has it is right already.
type tagger struct{ refuses bool }

func (g tagger) Tag(_ context.Context, source string, _ level.Task, scratch string) (level.Outcome, error) {
	o := level.Outcome{Before: &level.Analysis{}, Verdict: level.Verdict{State: level.Done}}
	text, err := os.ReadFile(source)
	if err != nil || strings.HasSuffix(string(text), " tagged") {
		return o, err
	}
	if g.refuses {
		o.Verdict = level.Verdict{State: level.Failed, Reason: "no tags in it"}
		return o, nil
	}
	o.After, o.Extension = &level.Analysis{}, filepath.Ext(source)
	return o, os.WriteFile(scratch, append(text, " tagged"...), 0o600)
}

func (b *atticBench) tag(g tagger) (level.Outcome, string, error) {
	b.t.Helper()
	return Tag(b.t.Context(), g, &b.place, level.Task{}, "job-8", func(_ context.Context, o Original, v *Original) error {
		b.versions = append(b.versions, v)
		b.kept = append(b.kept, o)
		return nil
	})
}

// Tags are written on the way of a replacing: the original first goes to the attic, and comes back bit for bit.
func TestTag(t *testing.T) {
	b := newAtticBench(t)
	if o, output, err := b.tag(tagger{refuses: true}); o.Verdict.State != level.Failed || output != "" || err != nil {
		t.Errorf("%+v %q %v", o.Verdict, output, err)
	}
	b.check([]string{"m/a.wav=source"}, nil)
	for range 2 { // the second time there is nothing to do
		if _, output, err := b.tag(tagger{}); output != "m/a.wav" || err != nil || len(b.kept) != 1 {
			t.Fatalf("%q %v %+v", output, err, b.kept)
		}
		b.check([]string{"m/a.wav=source tagged"}, []string{"m/a.*=source"})
	}
	must(t, Restore(b.src, "m/a.wav", b.place.Attic, b.kept[0], "restore-1"))
	b.check([]string{"m/a.wav=source"}, nil)
}

// A levelled file is tagged as it is; the attic goes on having its original and no file of our own making.
func TestTagWhatWasLevelled(t *testing.T) {
	b := newAtticBench(t)
	_, _, err := b.replace(&leveller{}, false)
	must(t, err)
	b.place.Ours = &b.kept[0]
	_, _, err = b.tag(tagger{})
	must(t, err)
	b.check([]string{"m/a.wav=levelled tagged"}, []string{"m/a.*=source"})
	if b.kept[1].SHA256 != b.kept[0].SHA256 || b.kept[1].Levelled == b.kept[0].Levelled {
		t.Errorf("kept: %+v", b.kept)
	}
	must(t, Restore(b.src, "m/a.wav", b.place.Attic, b.kept[1], "restore-1"))
	b.check([]string{"m/a.wav=source"}, nil)
}

// What somebody made of our file is theirs, and is kept beside the original when another takes its place.
func TestReplaceKeepsWhatSomebodyMadeOfOurs(t *testing.T) {
	b := newAtticBench(t)
	_, _, err := b.replace(&leveller{}, false)
	must(t, err)
	b.write(filepath.Join(b.src, "m/a.wav"), "levelled, with a title")
	b.again(0)
	_, _, err = b.replace(&leveller{text: " two"}, false)
	must(t, err)
	if b.kept[1].SHA256 != b.kept[0].SHA256 || b.kept[1].Stored != b.kept[0].Stored {
		t.Errorf("kept: %+v", b.kept)
	}
	got := files(t, b.place.Attic)
	for i := range got {
		_, got[i], _ = strings.Cut(got[i], "=")
	}
	slices.Sort(got)
	if !slices.Equal(got, []string{"levelled, with a title", "source"}) {
		t.Errorf("attic: %q", got)
	}
}

// What people and programs keep beside a file is kept on copies, on what takes its place, and in the attic.
func TestAttributesAreKept(t *testing.T) {
	for _, linked := range []bool{true, false} {
		b := newAtticBench(t)
		if !linked {
			was := link
			link = func(string, string) error { return unix.EXDEV }
			defer func() { link = was }()
		}
		must(t, unix.Setxattr(b.place.Source, "user.mark", []byte("mine"), 0))
		must(t, os.Chmod(b.place.Source, 0o640))
		must(t, os.Chtimes(b.place.Source, sourceTime, sourceTime))
		_, copied, err := b.deliver(&leveller{}, "m/a.wav", ours)
		must(t, err)
		_, _, err = b.replace(&leveller{}, false)
		must(t, err)
		for _, path := range []string{filepath.Join(b.out, copied), b.place.Source, filepath.Join(b.place.Attic, b.kept[0].Stored)} {
			value := make([]byte, 16)
			n, err := unix.Getxattr(path, "user.mark", value)
			if err != nil || string(value[:n]) != "mine" {
				t.Errorf("links %v, %s: %q %v", linked, path, value[:max(n, 0)], err)
			}
			info, err := os.Stat(path)
			if err != nil || info.Mode().Perm() != 0o640 || !info.ModTime().Equal(sourceTime) {
				t.Errorf("links %v, %s: %v, %v, %v", linked, path, info.Mode(), info.ModTime(), err)
			}
		}
	}
}
