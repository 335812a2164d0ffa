package worker

import (
	"errors"
	"os"
	"slices"
	"strings"
	"testing"

	"evenshelf/engine/profile"
	"evenshelf/store"
)

// versions are what the files hold that the store knows beside a recording's original, in the order they were kept.
func (b *bench) versions(recordingID int64) (texts []string) {
	b.t.Helper()
	list, err := b.store.Versions(b.ctx, store.OriginalQuery{RecordingID: recordingID})
	if err != nil {
		b.t.Fatal(err)
	}
	for _, v := range list {
		text, err := os.ReadFile(v.File)
		if err != nil {
			b.t.Error(err)
		}
		texts = append(texts, string(text))
	}
	return texts
}

// The same song on an album and a sampler, both replaced; one is tagged, and all is levelled again: each is levelled from
// its own original, which comes back.
func TestTwinsKeepTheirOwnOriginals(t *testing.T) {
	for _, other := range []string{"sampler/song.wav", "sampler/song.flac"} {
		for _, tagged := range []string{"album/song.wav", other} {
			t.Run(tagged+" of "+other, func(t *testing.T) {
				b := newBench(t)
				originals := map[string]string{"album/song.wav": "song|album", other: "song|sampler"}
				for name, text := range originals {
					b.put(name, text)
				}
				s := b.startService(&engine{}, 1)
				b.wait(b.begin(s, store.Replace).ID, ended)
				b.put(tagged, "levelled song|1999")
				run := b.wait(b.begin(s, store.Replace).ID, ended)
				for name := range originals {
					b.job(run.ID, name, store.Done, true)
				}
				run = b.wait(b.beginWith(s, store.Replace, louder).ID, ended)
				b.job(run.ID, tagged, store.Done, false)
				if got := b.onShelf(tagged); got != "levelled-17 song|1999" {
					t.Errorf("%q", got)
				}
				if got := b.versions(b.recordings()[tagged].ID); !slices.Equal(got, []string{"levelled song|1999"}) {
					t.Errorf("versions: %q", got)
				}
				for name, text := range originals {
					if _, err := s.Restore(b.ctx, b.recordings()[name].ID); err != nil || b.onShelf(name) != text {
						t.Errorf("%s: %v, %q", name, err, b.onShelf(name))
					}
				}
			})
		}
	}
}

// A second copy in another format is levelled from the original of the first, and written in its own format.
func TestSecondCopyInAnotherFormat(t *testing.T) {
	for _, d := range []store.Delivery{store.Replace, store.Copy} {
		b := newBench(t, "a.wav")
		s := b.startService(&engine{}, 1)
		b.wait(b.begin(s, store.Replace).ID, ended)
		b.put("b.flac", "levelled sound of a.wav|b")
		run := b.wait(b.beginWith(scanned(b, s), d, louder).ID, ended)
		b.job(run.ID, "b.flac", store.Done, false)
		got := map[store.Delivery]func(string) string{store.Replace: b.onShelf, store.Copy: b.content}[d]("b.flac")
		if got != "levelled-17 sound of a.wav|b" {
			t.Errorf("%s: %q", d, got)
		}
		if d == store.Replace { // once more, and what is not of its format does not take its place
			b.wait(b.beginWith(s, d, func(p *profile.Profile) { p.Target = -16 }).ID, ended)
			if got := b.onShelf("b.flac"); got != "levelled-16 sound of a.wav|b" {
				t.Errorf("%q", got)
			}
			if _, err := s.Restore(b.ctx, b.recordings()["b.flac"].ID); !errors.Is(err, store.ErrState) || !strings.Contains(err.Error(), "another format, .wav") {
				t.Errorf("%v", err)
			}
		}
	}
}

// A second copy of what was levelled gets tags: it is levelled from what the first was, and stands where that stands.
func TestTaggedSecondCopy(t *testing.T) {
	b := newBench(t, "a.wav")
	s := b.startService(&engine{}, 1)
	b.wait(b.begin(s, store.Replace).ID, ended)
	b.put("b.wav", "levelled sound of a.wav|b")
	b.wait(b.begin(s, store.Tags).ID, ended)
	id := b.recordings()["b.wav"].ID
	if got := b.versions(id); !slices.Equal(got, []string{"levelled sound of a.wav|b"}) {
		t.Errorf("versions: %q", got)
	}
	run := b.wait(b.begin(s, store.Replace).ID, ended)
	if j := b.job(run.ID, "b.wav", store.Done, false); !strings.Contains(j.Reason, "sounds the same as a.wav") {
		t.Errorf("%+v", j)
	}
	b.wait(b.beginWith(s, store.Replace, louder).ID, ended)
	if got := b.onShelf("b.wav"); got != "levelled-17 sound of a.wav|b|gain" {
		t.Errorf("%q", got)
	}
	if _, err := s.Restore(b.ctx, id); err != nil || b.onShelf("b.wav") != "sound of a.wav" {
		t.Errorf("%v %q", err, b.onShelf("b.wav"))
	}
}

// A recording that has an original of another sound in the attic, and a copy of what was levelled in its place: both
// originals stay known.
func TestBorrowedOriginalBesideAnOwn(t *testing.T) {
	b := newBench(t, "a.wav", "b.wav")
	s := b.startService(&engine{}, 1)
	b.wait(b.begin(s, store.Replace).ID, ended)
	b.put("b.wav", "levelled sound of a.wav|b")
	b.wait(b.beginWith(scanned(b, s), store.Replace, louder).ID, ended)
	id := b.recordings()["b.wav"].ID
	if got := b.versions(id); !slices.Equal(got, []string{"sound of b.wav", "levelled sound of a.wav|b"}) {
		t.Errorf("versions: %q", got)
	}
	// Levelled again, it is from the sound of a, not from what was levelled.
	b.wait(b.beginWith(s, store.Replace, func(p *profile.Profile) { p.Target = -16 }).ID, ended)
	if got := b.onShelf("b.wav"); got != "levelled-16 sound of a.wav|b" {
		t.Errorf("%q", got)
	}
}

// Tags were written, and then somebody wrote a title: levelled or tagged again, the file as it came stays the original.
func TestTitleBetweenTwoRuns(t *testing.T) {
	for _, d := range []store.Delivery{store.Replace, store.Tags} {
		b := newBench(t, "a.wav")
		s := b.startService(&engine{}, 1)
		b.wait(b.begin(s, store.Tags).ID, ended)
		b.put("a.wav", "sound of a.wav|title")
		b.wait(b.begin(s, d).ID, ended)
		want := map[store.Delivery]string{store.Replace: "levelled sound of a.wav|title", store.Tags: "sound of a.wav|title|gain"}[d]
		if got := b.onShelf("a.wav"); got != want {
			t.Errorf("%s: %q, want %q", d, got, want)
		}
		id := b.recordings()["a.wav"].ID
		if got := b.versions(id); !slices.Equal(got, []string{"sound of a.wav|title"}) {
			t.Errorf("%s: versions %q", d, got)
		}
		if _, err := s.Restore(b.ctx, id); err != nil || b.onShelf("a.wav") != "sound of a.wav" {
			t.Errorf("%s: %v %q", d, err, b.onShelf("a.wav"))
		}
		if got := b.versions(id); !slices.Equal(got, []string{"sound of a.wav|title"}) {
			t.Errorf("%s: versions after the restore: %q", d, got)
		}
	}
}
