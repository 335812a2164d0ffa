package worker

import (
	"context"
	"errors"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"

	"evenshelf/engine/profile"
	"evenshelf/store"
)

func (b *bench) onShelf(name string) string {
	b.t.Helper()
	c, err := os.ReadFile(filepath.Join(b.shelf.Root, name))
	if err != nil {
		b.t.Error(err)
	}
	return string(c)
}

func TestReplaceAndRestore(t *testing.T) {
	b := newBench(t, "a.wav", "b.wav")
	s := b.startService(&engine{}, 2)
	run := b.wait(b.begin(s, store.Replace).ID, ended)
	if run.Done != 2 || b.onShelf("a.wav") != "levelled sound of a.wav" {
		t.Fatalf("%+v, %q", run, b.onShelf("a.wav"))
	}
	if scan, err := s.Scan(b.ctx, b.shelf.ID, ""); err != nil || scan.Changed != 0 || scan.Added != 0 {
		t.Errorf("the next scan takes our copies for changes: %+v, %v", scan, err)
	}
	kept, err := b.store.Originals(b.ctx, store.OriginalQuery{RunID: run.ID})
	if err != nil || len(kept) != 2 || kept[0].Path != "a.wav" || kept[0].RunID != run.ID {
		t.Fatalf("attic: %+v, %v", kept, err)
	}
	// A run with another profile levels the originals again, not the copies.
	again := b.wait(b.beginWith(s, store.Replace, func(p *profile.Profile) { p.Target-- }).ID, ended)
	if again.Done != 2 || b.onShelf("b.wav") != "levelled-19 sound of b.wav" {
		t.Errorf("%+v, %q", again, b.onShelf("b.wav"))
	}
	b.wait(b.begin(s, store.Copy).ID, ended)
	if got := b.content("b.wav"); got != "levelled sound of b.wav" {
		t.Errorf("a copy of a replaced recording is %q", got)
	}
	rec, err := s.Restore(b.ctx, kept[0].RecordingID)
	if err != nil || rec.State != "" || rec.After != nil || b.onShelf("a.wav") != "sound of a.wav" {
		t.Errorf("%+v, %v, %q", rec, err, b.onShelf("a.wav"))
	}
	if _, err := s.Restore(b.ctx, kept[0].RecordingID); !errors.Is(err, store.ErrNotFound) {
		t.Errorf("restoring twice: %v", err)
	}
	if scan, err := s.Scan(b.ctx, b.shelf.ID, ""); err != nil || scan.Changed != 0 {
		t.Errorf("the next scan takes the original for a change: %+v, %v", scan, err)
	}
	// Somebody put another file there: neither is lost.
	if err := os.WriteFile(filepath.Join(b.shelf.Root, "b.wav"), []byte("new take"), 0o644); err != nil {
		t.Fatal(err)
	}
	if _, err := s.Restore(b.ctx, kept[1].RecordingID); !errors.Is(err, store.ErrState) || b.onShelf("b.wav") != "new take" {
		t.Errorf("%v, %q", err, b.onShelf("b.wav"))
	}
	if left, _ := b.store.Originals(b.ctx, store.OriginalQuery{}); len(left) != 1 {
		t.Errorf("attic: %+v", left)
	}
}

// Levelling twice changes nothing: what would only be made again is left as it is, and said to be so.
func TestReplacingTwiceChangesNothing(t *testing.T) {
	b := newBench(t, "a.wav", "b.wav")
	e := &engine{}
	s := b.startService(e, 2)
	first := b.wait(b.begin(s, store.Replace).ID, ended)
	was, err := os.Stat(filepath.Join(b.shelf.Root, "a.wav"))
	if err != nil {
		t.Fatal(err)
	}
	for range 2 {
		run := b.wait(b.begin(s, store.Replace).ID, ended)
		for name, j := range b.jobs(run.ID) {
			if j.State != store.Done || j.Reason != "levelled with this profile already" || j.SameAs != b.jobs(first.ID)[name].ID || j.After == nil || j.Output != name {
				t.Errorf("%s: %+v", name, j)
			}
		}
		now, err := os.Stat(filepath.Join(b.shelf.Root, "a.wav"))
		if err != nil || !os.SameFile(was, now) || !now.ModTime().Equal(was.ModTime()) || e.times("a.wav") != 1 {
			t.Errorf("touched again: %v, %d times at work", err, e.times("a.wav"))
		}
		if kept, err := b.store.Originals(b.ctx, store.OriginalQuery{RunID: first.ID}); err != nil || len(kept) != 2 {
			t.Errorf("the attic no longer knows the run that did it: %+v %v", kept, err)
		}
	}
	// Somebody else's bytes are a new recording, whatever was done here before.
	if err := os.WriteFile(filepath.Join(b.shelf.Root, "a.wav"), []byte("new take"), 0o644); err != nil {
		t.Fatal(err)
	}
	run := b.wait(b.begin(s, store.Replace).ID, ended)
	if j := b.jobs(run.ID)["a.wav"]; j.SameAs != 0 || b.onShelf("a.wav") != "levelled new take" {
		t.Errorf("%+v, %q", j, b.onShelf("a.wav"))
	}
	if j := b.jobs(run.ID)["b.wav"]; j.SameAs == 0 {
		t.Errorf("%+v", j)
	}
}

// Why an original cannot be brought back is told to the person who asks, and going by it helps.
func TestRestoreSaysWhatToDo(t *testing.T) {
	b := newBench(t, "a.wav", "b.wav")
	s := b.startService(&engine{}, 1)
	run := b.wait(b.begin(s, store.Replace).ID, ended)
	kept, err := b.store.Originals(b.ctx, store.OriginalQuery{RunID: run.ID})
	if err != nil || len(kept) != 2 {
		t.Fatal(kept, err)
	}
	for i, damage := range []string{filepath.Join(b.shelf.Root, "a.wav"), filepath.Join(b.shelf.Attic(), kept[1].Stored)} {
		if err := os.WriteFile(damage, []byte("somebody's own"), 0o644); err != nil {
			t.Fatal(err)
		}
		want := []string{"move the file away", "damaged"}[i]
		if _, err := s.Restore(b.ctx, kept[i].RecordingID); !errors.Is(err, store.ErrState) || !strings.Contains(err.Error(), want) {
			t.Errorf("%v, want ErrState that says %q", err, want)
		}
	}
	if err := os.Rename(filepath.Join(b.shelf.Root, "a.wav"), filepath.Join(b.shelf.Root, "mine.wav")); err != nil {
		t.Fatal(err)
	}
	if _, err := s.Restore(b.ctx, kept[0].RecordingID); err != nil || b.onShelf("a.wav") != "sound of a.wav" || b.onShelf("mine.wav") != "somebody's own" {
		t.Errorf("%v, a.wav %q, mine.wav %q", err, b.onShelf("a.wav"), b.onShelf("mine.wav"))
	}
}

// A format that nothing could be replaced in is refused at once, and where only some could, those that cannot end without work.
func TestReplaceInAFormatThatDoesNotFit(t *testing.T) {
	b := newBench(t, "a.wav")
	e := &engine{}
	s := b.startService(e, 1)
	asFLAC := func(p *profile.Profile) { p.Delivered.Format = profile.FLAC }
	p, err := profile.Named("rotation")
	if err != nil {
		t.Fatal(err)
	}
	asFLAC(&p)
	scanned(b, s)
	if _, err := s.StartRun(b.ctx, store.NewRun{ShelfID: b.shelf.ID, Profile: p, Delivery: store.Replace}); !errors.Is(err, store.ErrFormat) || !strings.Contains(err.Error(), ".wav") {
		t.Errorf("%v", err)
	}
	b.put("b.flac", "sound of b")
	run := b.wait(b.beginWith(scanned(b, s), store.Replace, asFLAC).ID, ended)
	b.job(run.ID, "b.flac", store.Done, false)
	if j := b.job(run.ID, "a.wav", store.Failed, false); !strings.Contains(j.Reason, "cannot take the place of .wav") || j.Attempts != 1 || e.times("a.wav") != 0 {
		t.Errorf("%+v, at work %d times", j, e.times("a.wav"))
	}
}

// What takes an original's place and is as long has another time, which is no change to the next scan.
func TestReplacedAsLongIsNoChange(t *testing.T) {
	b := newBench(t, "a.wav")
	s := b.startService(&engine{}, 1)
	b.wait(b.begin(s, store.Replace).ID, ended)
	b.wait(b.beginWith(s, store.Replace, func(p *profile.Profile) { p.Target = -16 }).ID, ended) // longer
	b.wait(b.beginWith(s, store.Replace, louder).ID, ended)                                      // as long
	if scan, err := s.Scan(b.ctx, b.shelf.ID, ""); err != nil || scan.Changed != 0 {
		t.Errorf("%+v %v", scan, err)
	}
}

func TestTurnstileLetsOneThrough(t *testing.T) {
	var turn turnstile[int64]
	var wg sync.WaitGroup
	inside, most := 0, 0
	for range 50 {
		wg.Go(func() {
			leave, err := turn.enter(t.Context(), 7)
			if err != nil {
				t.Error(err)
				return
			}
			inside++ // the race detector would see two at once
			most = max(most, inside)
			inside--
			leave()
		})
	}
	wg.Wait()
	if most != 1 {
		t.Errorf("%d were inside at once", most)
	}
	leave, _ := turn.enter(t.Context(), 8)
	defer leave()
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	if _, err := turn.enter(ctx, 8); !errors.Is(err, context.Canceled) {
		t.Errorf("waiting does not heed the context: %v", err)
	}
}
