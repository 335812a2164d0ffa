package worker

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"sync/atomic"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/level"
	"evenshelf/engine/profile"
	"evenshelf/store"
)

func byFolder(p *profile.Profile) { p.Group, p.Ride.Speed = profile.Folder, profile.Still }

// below returns the groups that were measured as names relative to dir, in order.
func (e *engine) below(dir string) (all []string) {
	e.mu.Lock()
	defer e.mu.Unlock()
	for _, set := range e.sets {
		var names []string
		for _, path := range set {
			rel, err := filepath.Rel(dir, path)
			if err != nil {
				return []string{err.Error()}
			}
			names = append(names, rel)
		}
		all = append(all, strings.Join(names, " "))
	}
	slices.Sort(all)
	return all
}

func TestFolderSharesOneReading(t *testing.T) {
	b := newBench(t, "top.wav", "a/1.wav", "a/2.wav", "a/3.wav", "a/b/4.wav", "a/gone.wav")
	e := &engine{}
	s := b.startService(e, 3)
	if _, err := s.Scan(b.ctx, b.shelf.ID, ""); err != nil {
		t.Fatal(err)
	}
	if err := os.Remove(filepath.Join(b.shelf.Root, "a/gone.wav")); err != nil {
		t.Fatal(err)
	}
	run := b.wait(b.beginWith(s, store.Copy, byFolder).ID, ended)
	if run.Done != 5 || run.Failed != 1 {
		t.Errorf("%+v", run)
	}
	if got := e.below(b.shelf.Root); !slices.Equal(got, []string{"a/1.wav a/2.wav a/3.wav", "a/b/4.wav", "top.wav"}) {
		t.Errorf("measured together: %q", got)
	}
	for name, lufs := range map[string]audio.LUFS{"1.wav": -3, "2.wav": -3, "3.wav": -3, "4.wav": -1, "top.wav": -1} {
		if with := e.with[name]; with == nil || with.Integrated != lufs {
			t.Errorf("%s shares %+v", name, with)
		}
	}
	b.wait(b.begin(s, store.Copy).ID, ended)
	if e.with["1.wav"] != nil || len(e.sets) != 3 {
		t.Error("a profile without groups shares a gain")
	}
}

// What was replaced already counts with its original, so the gain is the same however far an earlier run came,
// and where it is the same nothing is done again.
func TestFolderIsMeasuredFromOriginals(t *testing.T) {
	b := newBench(t, "a/1.wav", "a/2.wav")
	e := &engine{}
	s := b.startService(e, 1)
	b.wait(b.begin(s, store.Replace).ID, ended) // with another profile
	for i, levelled := range []int{2, 2} {      // once from the originals, then not again
		run := b.wait(b.beginWith(s, store.Replace, byFolder).ID, ended)
		if run.Done != 2 || len(e.sets) != i+1 || e.times("1.wav")+e.times("2.wav") > 2 {
			t.Errorf("%+v, groups %q", run, e.sets)
		}
		for _, path := range e.sets[i] {
			if !strings.HasPrefix(path, b.shelf.Attic()) {
				t.Errorf("run %d measured %s", i, path)
			}
		}
		levelled -= 2 * i
		done := 0
		for _, j := range b.jobs(run.ID) {
			if j.SameAs == 0 {
				done++
			}
		}
		if done != levelled {
			t.Errorf("run %d levelled %d, want %d", i, done, levelled)
		}
	}
	// With one recording less the gain is another one, and all are levelled with it.
	if err := os.Remove(filepath.Join(b.shelf.Root, "a/2.wav")); err != nil {
		t.Fatal(err)
	}
	if _, err := s.Scan(b.ctx, b.shelf.ID, ""); err != nil {
		t.Fatal(err)
	}
	run := b.wait(b.beginWith(s, store.Replace, byFolder).ID, ended)
	if j := b.jobs(run.ID)["a/1.wav"]; j.State != store.Done || j.SameAs != 0 {
		t.Errorf("%+v", j)
	}
}

// A run that takes one file of a folder levels it as part of the whole folder, as a run of all of it does: the
// balance within the folder does not depend on how it was split among runs.
func TestFolderIsWholeWhenARunTakesPartOfIt(t *testing.T) {
	b := newBench(t, "a/1.wav", "a/2.wav", "a/3.wav", "a/b/4.wav")
	e := &engine{}
	s := b.startService(e, 1)
	b.wait(b.beginWith(scanned(b, s), store.Replace, byFolder).ID, ended)
	whole := e.shared()["2"]
	list, err := b.store.Recordings(b.ctx, store.RecordingQuery{ShelfID: b.shelf.ID, Search: "2.wav"})
	if err != nil || len(list.Recordings) != 1 {
		t.Fatalf("%+v %v", list, err)
	}
	own, err := profile.Named("rotation")
	if err != nil {
		t.Fatal(err)
	}
	byFolder(&own)
	for _, target := range []audio.LUFS{-18, -21} { // the profile that levelled the folder, and another
		own.Target = target
		run, err := s.StartRun(b.ctx, store.NewRun{ShelfID: b.shelf.ID, Recordings: []int64{list.Recordings[0].ID}, Profile: own, Delivery: store.Copy})
		if err != nil {
			t.Fatal(err)
		}
		if run = b.wait(run.ID, ended); run.Jobs != 1 || run.Done != 1 {
			t.Errorf("%+v", run)
		}
		if with := e.shared(); len(with) != 1 || with["2"] != whole || whole.Integrated != -3 {
			t.Errorf("alone it shares %+v, in the whole folder %+v", with, whole)
		}
		if set := e.sets[len(e.sets)-1]; len(set) != 3 || !strings.HasPrefix(set[0], b.shelf.Attic()) {
			t.Errorf("measured %q", set)
		}
	}
}

// shared returns what was shared since it was last asked, by the start of the recordings' names: those of originals
// in the attic go on with a hash.
func (e *engine) shared() map[string]level.Shared {
	e.mu.Lock()
	defer e.mu.Unlock()
	all := map[string]level.Shared{}
	for name, with := range e.with {
		start, _, _ := strings.Cut(name, ".")
		all[start] = *with
	}
	e.with = nil
	return all
}

func scanned(b *bench, s *Service) *Service {
	b.t.Helper()
	if _, err := s.Scan(b.ctx, b.shelf.ID, ""); err != nil {
		b.t.Fatal(err)
	}
	return s
}

// An original that is lost from the attic fails its own recording, in words without a path, and holds up no other.
func TestLostOriginalFailsAlone(t *testing.T) {
	b := newBench(t, "a/1.wav", "a/2.wav", "a/3.wav")
	e := &engine{}
	s := b.startService(e, 2)
	first := b.wait(b.beginWith(scanned(b, s), store.Replace, byFolder).ID, ended)
	kept, err := b.store.Originals(b.ctx, store.OriginalQuery{RunID: first.ID})
	if err != nil || len(kept) != 3 || kept[1].Path != "a/2.wav" {
		t.Fatalf("%+v %v", kept, err)
	}
	if err := os.Remove(filepath.Join(b.shelf.Attic(), kept[1].Stored)); err != nil {
		t.Fatal(err)
	}
	e.shared()
	for _, d := range []store.Delivery{store.Replace, store.Copy} {
		run := b.wait(b.beginWith(s, d, func(p *profile.Profile) { byFolder(p); p.Target-- }).ID, ended)
		if run.Done != 2 || run.Failed != 1 {
			t.Errorf("%s: %+v", d, run)
		}
		j := b.jobs(run.ID)["a/2.wav"]
		if j.State != store.Failed || j.Reason != "its original is missing from the attic" || j.Attempts != 1 {
			t.Errorf("%s: %s after %d attempts: %q", d, j.State, j.Attempts, j.Reason)
		}
		if with := e.shared(); len(with) != 2 || with["1"].Integrated != -2 || with["3"] != with["1"] {
			t.Errorf("%s: the others share %+v", d, with)
		}
	}
	if got := b.onShelf("a/2.wav"); got != "levelled sound of a/2.wav" {
		t.Errorf("on the shelf is %q", got)
	}
}

func TestFolderThatCannotBeMeasuredIsTriedAgain(t *testing.T) {
	b := newBench(t, "a/1.wav", "a/2.wav")
	var tried atomic.Int32
	e := &engine{hook: func(_ context.Context, source string) error {
		if source == "group" && tried.Add(1) < 3 {
			return errors.New("the disk is away")
		}
		return nil
	}}
	s := b.startService(e, 1)
	if _, err := s.Scan(b.ctx, b.shelf.ID, ""); err != nil {
		t.Fatal(err)
	}
	run := b.wait(b.beginWith(s, store.Copy, byFolder).ID, ended)
	if run.Done != 2 || tried.Load() != 3 {
		t.Errorf("%+v after %d tries", run, tried.Load())
	}
	var told []string
	events, err := b.store.RunEvents(b.ctx, run.ID, 0, 100)
	if err != nil {
		t.Fatal(err)
	}
	for _, ev := range events {
		told = append(told, ev.Words)
	}
	if !strings.Contains(fmt.Sprint(told), `measure the folder "a" as one programme: the disk is away`) {
		t.Errorf("history: %q", told)
	}
}
