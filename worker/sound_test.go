package worker

import (
	"errors"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"evenshelf/engine/profile"
	"evenshelf/store"
)

// put writes a file onto the shelf, as somebody does with a program of their own.
func (b *bench) put(name, text string) {
	b.t.Helper()
	path := filepath.Join(b.shelf.Root, name)
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		b.t.Fatal(err)
	}
	if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
		b.t.Fatal(err)
	}
}

func (b *bench) rename(from, to string) {
	b.t.Helper()
	to = filepath.Join(b.shelf.Root, to)
	if err := os.MkdirAll(filepath.Dir(to), 0o755); err != nil {
		b.t.Fatal(err)
	}
	if err := os.Rename(filepath.Join(b.shelf.Root, from), to); err != nil {
		b.t.Fatal(err)
	}
}

func (b *bench) recordings() map[string]store.Recording {
	b.t.Helper()
	page, err := b.store.Recordings(b.ctx, store.RecordingQuery{Limit: 1000})
	if err != nil {
		b.t.Fatal(err)
	}
	m := map[string]store.Recording{}
	for _, r := range page.Recordings {
		m[r.Path] = r
	}
	return m
}

// attic is what the files in the attic hold, in order.
func (b *bench) attic() (list []string) {
	b.t.Helper()
	err := filepath.WalkDir(b.shelf.Attic(), func(p string, d os.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		text, err := os.ReadFile(p)
		list = append(list, string(text))
		return err
	})
	if err != nil && !errors.Is(err, os.ErrNotExist) {
		b.t.Fatal(err)
	}
	slices.Sort(list)
	return list
}

func louder(p *profile.Profile) { p.Target++ }

func (b *bench) job(run int64, name string, state store.JobState, same bool) store.Job {
	b.t.Helper()
	j, ok := b.jobs(run)[name]
	if !ok || j.State != state || (j.SameAs != 0) != same {
		b.t.Errorf("%s: %+v", name, j)
	}
	return j
}

// A levelled file that somebody tagged is known by its sound: it is not levelled again, and with another profile it is
// levelled from its original, with the tags it has now. What they made is in the attic then.
func TestTaggedSinceItWasLevelled(t *testing.T) {
	b := newBench(t, "a.wav")
	s := b.startService(&engine{}, 1)
	first := b.wait(b.begin(s, store.Replace).ID, ended)
	b.put("a.wav", "levelled sound of a.wav|title")
	again := b.wait(b.begin(s, store.Replace).ID, ended)
	if j := b.job(again.ID, "a.wav", store.Done, true); j.Reason != already || j.SameAs != b.jobs(first.ID)["a.wav"].ID {
		t.Errorf("%+v", j)
	}
	if got := b.onShelf("a.wav"); got != "levelled sound of a.wav|title" {
		t.Errorf("touched: %q", got)
	}
	rec := b.recordings()["a.wav"]
	if rec.After == nil || rec.Before == nil || rec.State != store.Done {
		t.Errorf("%+v", rec)
	}
	// Their tags would be lost, so they are asked to move the file away.
	if _, err := s.Restore(b.ctx, rec.ID); !errors.Is(err, store.ErrState) || !strings.Contains(err.Error(), "move the file away") {
		t.Errorf("restored over their tags: %v", err)
	}
	other := b.wait(b.beginWith(s, store.Replace, louder).ID, ended)
	b.job(other.ID, "a.wav", store.Done, false)
	if got := b.onShelf("a.wav"); got != "levelled-17 sound of a.wav|title" {
		t.Errorf("levelled twice, or without its tags: %q", got)
	}
	if got := b.attic(); !slices.Equal(got, []string{"levelled sound of a.wav|title", "sound of a.wav"}) {
		t.Errorf("attic: %q", got)
	}
	if _, err := s.Restore(b.ctx, rec.ID); err != nil || b.onShelf("a.wav") != "sound of a.wav" {
		t.Errorf("%v, %q", err, b.onShelf("a.wav"))
	}
}

// An original that is within another profile as it is comes back byte for byte, which is said.
func TestTaggedSinceAndTheOriginalWillDo(t *testing.T) {
	b := newBench(t, "a.wav")
	s := b.startService(&engine{}, 1)
	b.wait(b.begin(s, store.Replace).ID, ended)
	b.put("a.wav", "levelled sound of a.wav|title")
	run := b.wait(b.beginWith(scanned(b, s), store.Replace, func(p *profile.Profile) { p.Target = -30 }).ID, ended)
	j := b.job(run.ID, "a.wav", store.Done, false)
	if !strings.Contains(j.Reason, "the file with other tags is in the attic") || b.onShelf("a.wav") != "sound of a.wav" {
		t.Errorf("%+v %q", j, b.onShelf("a.wav"))
	}
	if got := b.attic(); !slices.Contains(got, "levelled sound of a.wav|title") {
		t.Errorf("attic: %q", got)
	}
}

// A copy is made from the original too, though somebody tagged the levelled file.
func TestCopyOfWhatWasTagged(t *testing.T) {
	b := newBench(t, "a.wav")
	s := b.startService(&engine{}, 1)
	b.wait(b.begin(s, store.Replace).ID, ended)
	b.put("a.wav", "levelled sound of a.wav|title")
	run := b.wait(b.begin(s, store.Copy).ID, ended)
	b.job(run.ID, "a.wav", store.Done, false)
	if got := b.content("a.wav"); got != "levelled sound of a.wav|title" {
		t.Errorf("%q", got)
	}
}

// A second copy of what was levelled, under another name and with other tags, is not levelled either; with another
// profile it is levelled from the original of the first, which is its own then too: what is levelled is no original. The
// file with its tags is in the attic as a version.
func TestSecondCopyOfWhatWasLevelled(t *testing.T) {
	b := newBench(t, "a.wav")
	s := b.startService(&engine{}, 1)
	b.wait(b.begin(s, store.Replace).ID, ended)
	b.put("best of/b.wav", "levelled sound of a.wav|best of")
	run := b.wait(b.begin(s, store.Replace).ID, ended)
	j := b.job(run.ID, "best of/b.wav", store.Done, false)
	if !strings.Contains(j.Reason, already) || !strings.Contains(j.Reason, "a.wav") || b.onShelf("best of/b.wav") != "levelled sound of a.wav|best of" {
		t.Errorf("%+v, %q", j, b.onShelf("best of/b.wav"))
	}
	b.wait(b.beginWith(s, store.Replace, louder).ID, ended)
	if got := b.onShelf("best of/b.wav"); got != "levelled-17 sound of a.wav|best of" {
		t.Errorf("%q", got)
	}
	id := b.recordings()["best of/b.wav"].ID
	if got := b.versions(id); !slices.Equal(got, []string{"levelled sound of a.wav|best of"}) {
		t.Errorf("versions: %q", got)
	}
	if _, err := s.Restore(b.ctx, id); err != nil || b.onShelf("best of/b.wav") != "sound of a.wav" {
		t.Errorf("%v %q", err, b.onShelf("best of/b.wav"))
	}
	if got := b.onShelf("a.wav"); got != "levelled-17 sound of a.wav" {
		t.Errorf("%q", got)
	}
	if _, err := s.Restore(b.ctx, b.recordings()["a.wav"].ID); err != nil || b.onShelf("a.wav") != "sound of a.wav" {
		t.Errorf("its original went with the other's: %v %q", err, b.onShelf("a.wav"))
	}
}

// A file that was moved takes its recording along, with its history and its original, found by the scan.
func TestMovedFileKeepsItsStory(t *testing.T) {
	b := newBench(t, "a.wav", "other.wav")
	s := b.startService(&engine{}, 1)
	b.wait(b.begin(s, store.Replace).ID, ended)
	was := b.recordings()["a.wav"]
	if _, err := s.Scan(b.ctx, b.shelf.ID, ""); err != nil { // the file that took its place has another inode
		t.Fatal(err)
	}
	b.rename("a.wav", "by name/renamed.wav")
	scan, err := s.Scan(b.ctx, b.shelf.ID, "")
	if err != nil || scan.Moved != 1 || scan.Added != 0 || scan.Missing != 0 {
		t.Errorf("%+v %v", scan, err)
	}
	now := b.recordings()["by name/renamed.wav"]
	if now.ID != was.ID || now.State != store.Done || now.After == nil || len(b.recordings()) != 2 {
		t.Errorf("%+v, was %+v", now, was)
	}
	run := b.wait(b.begin(s, store.Replace).ID, ended)
	b.job(run.ID, "by name/renamed.wav", store.Done, true)
	if _, err := s.Restore(b.ctx, was.ID); err != nil || b.onShelf("by name/renamed.wav") != "sound of a.wav" {
		t.Errorf("%v", err)
	}
}

// One that was moved and tagged has another path, length and time: it is known when it is measured.
func TestMovedAndTaggedFileKeepsItsStory(t *testing.T) {
	for _, d := range []store.Delivery{store.Replace, store.Measure, store.Copy, store.Tags} {
		t.Run(string(d), func(t *testing.T) {
			b := newBench(t, "a.wav")
			s := b.startService(&engine{}, 1)
			b.wait(b.begin(s, store.Replace).ID, ended)
			was := b.recordings()["a.wav"]
			b.rename("a.wav", "x/b.wav")
			b.put("x/b.wav", "levelled sound of a.wav|title")
			if err := os.Chtimes(filepath.Join(b.shelf.Root, "x/b.wav"), time.Now(), time.Now().Add(time.Hour)); err != nil {
				t.Fatal(err)
			}
			run := b.wait(b.begin(s, d).ID, ended)
			b.job(run.ID, "x/b.wav", store.Done, d == store.Replace)
			all := b.recordings()
			now := all["x/b.wav"]
			if len(all) != 1 || now.ID != was.ID || now.Missing || now.AddedAt != was.AddedAt || now.JobID != b.jobs(run.ID)["x/b.wav"].ID {
				t.Errorf("%+v, was %+v", all, was)
			}
			events, err := b.store.RecordingHistory(b.ctx, was.ID)
			if err != nil {
				t.Fatal(err)
			}
			if !slices.ContainsFunc(events, func(e store.Event) bool { return e.What == "moved" && strings.Contains(e.Words, `"a.wav"`) }) {
				t.Errorf("%+v", events)
			}
			if scan, err := s.Scan(b.ctx, b.shelf.ID, ""); err != nil || scan.Added+scan.Changed+scan.Missing+scan.Moved != 0 {
				t.Errorf("%+v %v", scan, err)
			}
		})
	}
}

// Two that went missing and sound alike: nobody can say which of them it is, so it is a new one.
func TestMovedFileThatCouldBeEither(t *testing.T) {
	b := newBench(t)
	b.put("a.wav", "same sound")
	b.put("b.wav", "same sound|b")
	s := b.startService(&engine{}, 1)
	b.wait(b.begin(s, store.Measure).ID, ended)
	for _, name := range []string{"a.wav", "b.wav"} {
		if err := os.Remove(filepath.Join(b.shelf.Root, name)); err != nil {
			t.Fatal(err)
		}
	}
	b.put("c.wav", "same sound|c, another length")
	run := b.wait(b.begin(s, store.Measure).ID, ended)
	b.job(run.ID, "c.wav", store.Done, false)
	if all := b.recordings(); len(all) != 3 || !all["a.wav"].Missing || all["c.wav"].Missing {
		t.Errorf("%+v", all)
	}
}

// Gain tags are written into the files; the originals are in the attic, come back bit for bit, and are what is levelled later.
func TestTagsRun(t *testing.T) {
	b := newBench(t, "a.wav", "b.wav")
	s := b.startService(&engine{}, 2)
	run := b.wait(b.begin(s, store.Tags).ID, ended)
	if run.Done != 2 || b.onShelf("a.wav") != "sound of a.wav|gain" {
		t.Fatalf("%+v %q", run, b.onShelf("a.wav"))
	}
	if scan, err := s.Scan(b.ctx, b.shelf.ID, ""); err != nil || scan.Changed != 0 {
		t.Errorf("%+v %v", scan, err)
	}
	before, err := os.Stat(filepath.Join(b.shelf.Root, "a.wav"))
	if err != nil {
		t.Fatal(err)
	}
	again := b.wait(b.begin(s, store.Tags).ID, ended)
	b.job(again.ID, "a.wav", store.Done, false)
	if after, err := os.Stat(filepath.Join(b.shelf.Root, "a.wav")); err != nil || !os.SameFile(before, after) {
		t.Errorf("written again: %v", err)
	}
	kept, err := b.store.Originals(b.ctx, store.OriginalQuery{RunID: run.ID})
	if err != nil || len(kept) != 2 {
		t.Fatalf("%+v %v", kept, err)
	}
	if _, err := s.Restore(b.ctx, kept[1].RecordingID); err != nil || b.onShelf("b.wav") != "sound of b.wav" {
		t.Errorf("%v %q", err, b.onShelf("b.wav"))
	}
	b.wait(b.begin(s, store.Replace).ID, ended)
	if b.onShelf("a.wav") != "levelled sound of a.wav" {
		t.Errorf("%q", b.onShelf("a.wav"))
	}
	// On a levelled file they say what that one measures, and it stays levelled.
	b.wait(b.begin(s, store.Tags).ID, ended)
	if b.onShelf("a.wav") != "levelled sound of a.wav|gain" || b.recordings()["a.wav"].After == nil {
		t.Errorf("%q, %+v", b.onShelf("a.wav"), b.recordings()["a.wav"])
	}
	last := b.wait(b.begin(s, store.Replace).ID, ended)
	b.job(last.ID, "a.wav", store.Done, true)
	if _, err := s.Restore(b.ctx, kept[0].RecordingID); err != nil || b.onShelf("a.wav") != "sound of a.wav" {
		t.Errorf("%v %q", err, b.onShelf("a.wav"))
	}
	if got := b.attic(); !slices.Equal(got, []string{"sound of b.wav"}) {
		t.Errorf("attic: %q", got)
	}
}

func byAlbum(p *profile.Profile) { p.Group, p.Ride.Speed = profile.Album, profile.Still }

// An album is what the tags say, wherever its files lie; what names none is on its own.
func TestAlbumSharesOneReading(t *testing.T) {
	b := newBench(t, "x/one-1.wav", "y/ONE-2.wav", "x/two-1.wav", "x/single.wav")
	e := &engine{}
	s := b.startService(e, 3)
	b.wait(b.beginWith(scanned(b, s), store.Copy, byAlbum).ID, ended)
	if got := e.below(b.shelf.Root); !slices.Equal(got, []string{"x/one-1.wav y/ONE-2.wav", "x/two-1.wav"}) {
		t.Errorf("measured together: %q", got)
	}
	with := e.with
	if with["one-1.wav"] == nil || with["ONE-2.wav"] == nil || with["single.wav"] != nil || with["one-1.wav"].Integrated != -2 {
		t.Errorf("%+v", with)
	}
	// Tags of an album come from the files that get them; a replaced one that was tagged counts with its original.
	b.wait(b.beginWith(s, store.Replace, byAlbum).ID, ended)
	b.put("x/one-1.wav", b.onShelf("x/one-1.wav")+"|title")
	e.mu.Lock()
	e.sets = nil
	e.mu.Unlock()
	again := b.wait(b.beginWith(scanned(b, s), store.Replace, byAlbum).ID, ended)
	b.job(again.ID, "x/one-1.wav", store.Done, true)
	for _, set := range e.sets {
		for _, path := range set {
			if !strings.HasPrefix(path, b.shelf.Attic()) {
				t.Errorf("measured %s", path)
			}
		}
	}
	b.wait(b.beginWith(s, store.Tags, byAlbum).ID, ended)
	if got := b.onShelf("y/ONE-2.wav"); got != "levelled sound of y/ONE-2.wav|gain-2" {
		t.Errorf("%q", got)
	}
	if set := e.sets[len(e.sets)-1]; !strings.HasPrefix(set[0], b.shelf.Root) {
		t.Errorf("measured %q", set)
	}
}
