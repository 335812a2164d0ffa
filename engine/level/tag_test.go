package level

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"testing"

	"evenshelf/engine/media"
	"evenshelf/engine/tags"
	"evenshelf/engine/tags/ogg"
)

// retagger is a stand-in that has metaflac write the tags.
type retagger struct {
	t     *testing.T
	with  []tags.Gains // what it was asked for
	other string       // it writes a copy of this file instead
	err   error
}

func (r *retagger) retag(_ context.Context, source, path string, g tags.Gains) error {
	r.t.Helper()
	r.with = append(r.with, g)
	if r.other != "" {
		source = r.other
	}
	if err := os.WriteFile(path, readFile(r.t, source), 0o600); err != nil {
		r.t.Fatal(err)
	}
	metaflac(r.t, path, g)
	return r.err
}

func metaflac(t *testing.T, path string, g tags.Gains) {
	t.Helper()
	args := []string{"--remove-replay-gain"}
	for _, pair := range g.ReplayGain() {
		args = append(args, "--set-tag="+pair[0]+"="+pair[1])
	}
	for _, a := range args { // metaflac takes one major operation at a time
		if out, err := exec.Command("metaflac", a, path).CombinedOutput(); err != nil {
			t.Fatalf("metaflac: %v\n%s(the tests need Debian's flac)", err, out)
		}
	}
}

func tagInto(t *testing.T, r *retagger, source string, task Task) (Outcome, string, error) {
	t.Helper()
	scratch := filepath.Join(t.TempDir(), "scratch")
	task.Profile = named(t, "untouched")
	o, err := (&Engine{Media: media.Find()}).tag(t.Context(), source, task, scratch, r.retag)
	if _, there := os.Stat(scratch); (there == nil) != (err == nil && o.After != nil) {
		t.Errorf("scratch file: %v, outcome %+v, %v", there, o.Verdict, err)
	}
	return o, scratch, err
}

func TestTag(t *testing.T) {
	dir := t.TempDir()
	song := excerpt(t, dir, "song.flac", 0.5)
	o, _, err := tagInto(t, &retagger{t: t}, song, Task{})
	if err != nil || o.Verdict.State != Done || o.Extension != ".flac" || o.After.AudioHash != o.Before.AudioHash || len(o.After.AudioHash) != 32 {
		t.Fatalf("%+v %v", o.Verdict, err)
	}
	if want := "gain tags written: "; !strings.HasPrefix(o.Verdict.Reason, want) {
		t.Errorf("%q", o.Verdict.Reason)
	}
	integrated, peak := secondOpinion(t, song)
	r := &retagger{t: t}
	shared := &Shared{Integrated: -20, TruePeak: -2}
	if o, _, err = tagInto(t, r, song, Task{Shared: shared}); err != nil || o.After == nil {
		t.Fatalf("%+v %v", o.Verdict, err)
	}
	g := r.with[0]
	if diff := float64(g.Track.Integrated - integrated); diff > 0.1 || diff < -0.1 {
		t.Errorf("track %v LUFS, FFmpeg says %v", g.Track.Integrated, integrated)
	}
	if diff := float64(g.Track.Peak - peak); diff > 0.3 || diff < -0.3 {
		t.Errorf("track peak %v dBTP, FFmpeg says %v", g.Track.Peak, peak)
	}
	if g.Album == nil || g.Album.Integrated != -20 || g.Album.Peak != -2 {
		t.Errorf("album %+v", g.Album)
	}

	// What says exactly that already is left alone; one tag more or another figure is not that.
	metaflac(t, song, tags.Gains{Track: g.Track})
	r = &retagger{t: t}
	if o, _, err := tagInto(t, r, song, Task{}); err != nil || o.Verdict.State != Done || o.Verdict.Reason != rightAlready || len(r.with) > 0 {
		t.Errorf("%+v %v", o.Verdict, err)
	}
	if _, _, err := tagInto(t, r, song, Task{Shared: shared}); err != nil || len(r.with) != 1 {
		t.Errorf("without the album's: %v, %+v", err, r.with)
	}
	metaflac(t, song, g)
	if _, _, err := tagInto(t, r, song, Task{}); err != nil || len(r.with) != 2 {
		t.Errorf("with an album's that it has none of: %v, %+v", err, r.with)
	}
}

// Nothing is delivered that is not certainly the same sound, or whose figures are not those of all of it.
func TestTagFails(t *testing.T) {
	dir := t.TempDir()
	song, other := excerpt(t, dir, "song.flac", 0.5), excerpt(t, dir, "other.flac", 0.51)
	torn := filepath.Join(dir, "torn.flac")
	whole := readFile(t, song)
	silence := excerpt(t, dir, "silence.flac", 0)
	for path, b := range map[string][]byte{torn: whole[:len(whole)/2]} {
		if err := os.WriteFile(path, b, 0o600); err != nil {
			t.Fatal(err)
		}
	}
	for _, c := range []struct {
		source string
		r      retagger
		reason string
	}{
		{song, retagger{other: other}, "the sound of the copy with new tags is not the same"},
		{song, retagger{other: torn}, "is not the same"},
		{song, retagger{err: fmt.Errorf("%w: of another kind", media.ErrUnsupported)}, "not supported: of another kind"},
		{song, retagger{err: fmt.Errorf("x: %w", ogg.ErrDamaged)}, "damaged"},
		{song, retagger{err: &media.FormatError{Offset: 4, Reason: "a block longer than the file"}}, "a block longer than the file"},
		{torn, retagger{}, "what was read is not the whole of it"},
		{silence, retagger{}, "silent"},
		{filepath.Join(dir, "none.flac"), retagger{}, "no such file"},
	} {
		c.r.t = t
		o, _, err := tagInto(t, &c.r, c.source, Task{})
		if err != nil || o.Verdict.State != Failed || !strings.Contains(o.Verdict.Reason, c.reason) || strings.Contains(o.Verdict.Reason, dir) {
			t.Errorf("%s: %+v %v, want %q", filepath.Base(c.source), o.Verdict, err, c.reason)
		}
	}
	full := &fs.PathError{Op: "write", Path: "x", Err: syscall.ENOSPC}
	if _, _, err := tagInto(t, &retagger{t: t, err: full}, song, Task{}); !errors.Is(err, syscall.ENOSPC) {
		t.Errorf("a full disk may heal: %v", err)
	}
	known := errors.New("known")
	r := &retagger{t: t}
	if _, _, err := tagInto(t, r, song, Task{Known: func(a *Analysis) error {
		if a.AudioHash == "" {
			t.Error("asked about nothing")
		}
		return known
	}}); !errors.Is(err, known) || len(r.with) > 0 {
		t.Errorf("%v", err)
	}
}

// With the engine's own writing, a format either has gain tags, which ffprobe finds, or is left as it is, which is said.
func TestTagInEveryFormat(t *testing.T) {
	dir, e := t.TempDir(), &Engine{Media: media.Find()}
	for _, name := range []string{"a.flac", "a.mp3", "a.m4a", "a.ogg", "a.opus", "a.wav", "a.aiff", "a.mkv"} {
		source, scratch := excerpt(t, dir, name, 0.5), filepath.Join(dir, "scratch-"+name)
		has := e.Media.Retag(t.Context(), source, filepath.Join(dir, "try"), tags.Gains{})
		o, err := e.Tag(t.Context(), source, Task{Profile: named(t, "untouched"), Shared: &Shared{Integrated: -20, TruePeak: -2}}, scratch)
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		if errors.Is(has, media.ErrUnsupported) {
			if want := "left as it is: there are no gain tags in " + map[string]string{"a.wav": "WAV", "a.aiff": "AIFF", "a.mkv": "Matroska"}[name]; o.Verdict.State != Done || o.Verdict.Reason != want || o.After != nil {
				t.Errorf("%s: %+v", name, o.Verdict)
			}
			if _, err := os.Stat(scratch); err == nil {
				t.Errorf("%s: something was written", name)
			}
			continue
		}
		if o.Verdict.State != Done || o.After == nil || o.After.AudioHash != o.Before.AudioHash {
			t.Errorf("%s: %+v", name, o.Verdict)
			continue
		}
		found, err := e.Media.Tags(t.Context(), scratch)
		if g := gainsOf(o.Before, &Shared{Integrated: -20, TruePeak: -2}); err != nil || !saysExactly(found, g, o.Before.Info) {
			t.Errorf("%s: %v, %v", name, found, err)
		}
		if again, err := e.Tag(t.Context(), scratch, Task{Profile: named(t, "untouched"), Shared: &Shared{Integrated: -20, TruePeak: -2}}, scratch+".2"); err != nil || again.Verdict.Reason != rightAlready {
			t.Errorf("%s again: %+v %v", name, again.Verdict, err)
		}
	}
}

// An Ogg file with something between its pages, which FFmpeg reads over, is damaged whenever it is tried.
func TestTagWhatIsDamagedInside(t *testing.T) {
	dir, e := t.TempDir(), &Engine{Media: media.Find()}
	song := excerpt(t, dir, "a.ogg", 0.5)
	b := readFile(t, song)
	at := bytes.LastIndex(b, []byte("OggS"))
	if err := os.WriteFile(song, slices.Concat(b[:at], make([]byte, 64), b[at:]), 0o600); err != nil {
		t.Fatal(err)
	}
	o, err := e.Tag(t.Context(), song, Task{Profile: named(t, "untouched")}, filepath.Join(dir, "scratch"))
	if err != nil || o.Verdict.State != Failed || !strings.Contains(o.Verdict.Reason, "Ogg stream holds") {
		t.Errorf("%+v %v", o.Verdict, err)
	}
	if o, err := e.Level(t.Context(), song, Task{Profile: named(t, "rotation")}, filepath.Join(dir, "scratch")); err != nil {
		t.Errorf("%+v %v", o.Verdict, err)
	}
}

// A copy carries the tags of the file it is told to take them from.
func TestLevelWithTagsFromAnotherFile(t *testing.T) {
	dir := t.TempDir()
	song, other := excerpt(t, dir, "song.flac", 0.5, "-metadata", "title=Old"), excerpt(t, dir, "other.flac", 0.4, "-metadata", "title=New")
	copied := filepath.Join(dir, "copy.flac")
	e := &Engine{Media: media.Find()}
	o, err := e.Level(t.Context(), song, Task{Profile: named(t, "untouched"), TagsFrom: other}, copied)
	if err != nil || o.After == nil || o.Plan.Untouched {
		t.Fatalf("%+v %v", o.Verdict, err)
	}
	if found, err := e.Media.Tags(t.Context(), copied); err != nil || found["title"] != "New" {
		t.Errorf("%v %v", found, err)
	}
}
