package worker

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"strings"

	"evenshelf/engine/level"
	"evenshelf/engine/profile"
	"evenshelf/store"
	"evenshelf/worker/delivery"
)

// A recording is known by the bytes of its file where that can be (attic.go), and else by its sound, once it is measured:
// other tags, another place and another name change nothing about that. A sound that another decoder read has another
// hash and is then taken for a new one, which costs a levelling and harms nothing.

// known ends a turn of the engine: its recording is one that was levelled here before.
type known struct {
	store.Levelling
	stands bool            // levelling would only make the same again
	before *level.Analysis // of what is on the shelf
}

func (k *known) Error() string { return fmt.Sprintf("it was levelled by job %d already", k.JobID) }

// moved ends a turn of the engine: its recording is one that went missing elsewhere.
type moved struct{ from int64 }

func (m *moved) Error() string { return fmt.Sprintf("it is recording %d, moved", m.from) }

// whoever returns the question whether a recording's sound is that of one that was moved. Where levelled is given and it
// is not, it is asked about the levellings that made this sound.
func (s *Service) whoever(ctx context.Context, w store.Work, levelled func([]store.Levelling, *level.Analysis) error) func(*level.Analysis) error {
	return func(before *level.Analysis) error {
		if before.AudioHash == "" {
			return nil
		}
		from, err := s.store.MovedFrom(ctx, w.Job.ID, before.AudioHash)
		switch {
		case err != nil:
			return err
		case from != 0:
			return &moved{from}
		case levelled == nil:
			return nil
		}
		list, err := s.store.Levelled(ctx, w.Shelf.ID, w.Recording.ID, before.AudioHash)
		if err != nil {
			return err
		}
		return levelled(list, before)
	}
}

// levelledBefore is the question a levelling asks: it ends if its result stands already, or if there is an original to
// level instead of what is on the shelf. The recording's own levellings have the say, and its own original: others that
// sound the same, as the album's and the sampler's do, count only if it has none. If what is on the shelf is its original with
// other tags, it is levelled as it is, and at, unless nil, has that original.
func (s *Service) levelledBefore(ctx context.Context, w store.Work, t level.Task, at *delivery.Place) func([]store.Levelling, *level.Analysis) error {
	return func(list []store.Levelling, before *level.Analysis) error {
		n := 0 // of its own
		for n < len(list) && list[n].RecordingID == w.Recording.ID {
			n++
		}
		if err := s.bestOf(ctx, w, t, list[:n], before); err != nil {
			return err
		}
		own, err := s.store.OriginalWithSound(ctx, w.Recording.ID, before.AudioHash)
		switch {
		case err == nil:
			if at != nil {
				at.Ours = inAttic(&own)
			}
			return nil
		case !errors.Is(err, store.ErrNotFound):
			return err
		}
		return s.bestOf(ctx, w, t, list[n:], before)
	}
}

// bestOf returns, as a known, the levelling whose result stands, else the newest that has an original, one of the
// recording's own format first; nil if there is none.
func (s *Service) bestOf(ctx context.Context, w store.Work, t level.Task, list []store.Levelling, before *level.Analysis) error {
	var best *known
	fits := func(l store.Levelling) bool { return sameFormat(l.Original.Stored, w.Recording.Path) }
	for _, l := range list {
		if w.Delivery == store.Replace { // a copy is asked for where there may be none
			if stands, err := s.stands(ctx, w, t, l); err != nil {
				return err
			} else if stands {
				return &known{Levelling: l, stands: true, before: before}
			}
		}
		if l.Original != nil && (best == nil || fits(l) && !fits(best.Levelling)) {
			best = &known{Levelling: l, before: before}
		}
	}
	if best == nil {
		return nil
	}
	return best
}

func sameFormat(a, b string) bool { return strings.EqualFold(path.Ext(a), path.Ext(b)) }

// formats are those that a recording of another format with the same sound can be written in instead.
var formats = map[string]profile.Format{".wav": profile.WAV, ".flac": profile.FLAC}

// again is a levelling of a recording that is known: from its original, with the tags of the file that is there now.
func (s *Service) again(w store.Work, k *known, t level.Task, onShelf string) (source string, _ level.Task, err error) {
	t.Known, t.TagsFrom = nil, onShelf
	source, err = stored(w.Shelf, *k.Original)
	return source, inOwnFormat(t, source, w.Recording.Path), err
}

// inOwnFormat has a recording written in its own format if that is not the one of the original it is levelled from.
func inOwnFormat(t level.Task, source, rel string) level.Task {
	if f, ok := formats[strings.ToLower(path.Ext(rel))]; ok && t.Profile.Delivered.Format == profile.OwnFormat && !sameFormat(source, rel) {
		t.Profile.Delivered.Format = f
	}
	return t
}

// stored is where the attic has an original; errNoOriginal if it is gone.
func stored(shelf store.Shelf, o store.Original) (string, error) {
	path := filepath.Join(shelf.Attic(), filepath.FromSlash(o.Stored))
	if _, err := os.Stat(path); errors.Is(err, fs.ErrNotExist) {
		return "", errNoOriginal
	} else if err != nil {
		return "", err
	}
	return path, nil
}

// same is the result of a levelling that stands already.
func (k *known) same(w store.Work) result {
	if k.RecordingID == w.Recording.ID {
		return result{outcome: level.Outcome{Verdict: level.Verdict{State: level.Done, Reason: already}}, same: k.JobID}
	}
	reason := fmt.Sprintf("%s: it sounds the same as %s", already, k.Path)
	return result{outcome: level.Outcome{Before: k.before, Verdict: level.Verdict{State: level.Done, Reason: reason}}}
}

// tag writes gain tags into the recording's own file.
func (s *Service) tag(ctx context.Context, w store.Work, t level.Task, onShelf, key string) (r result, err error) {
	leave, err := s.places.enter(ctx, w.Recording.ID)
	if err != nil {
		return r, err
	}
	defer leave()
	ours, err := s.ours(ctx, w.Recording.ID, onShelf)
	if err != nil {
		return r, err
	}
	at := place(w, onShelf, ours)
	t.Known = s.whoever(ctx, w, func(list []store.Levelling, before *level.Analysis) error {
		for _, l := range list { // somebody else has tagged it since it was levelled
			if ours == nil && l.RecordingID == w.Recording.ID && l.Original != nil {
				ours = l.Original
			}
		}
		if ours == nil {
			own, err := s.store.OriginalWithSound(ctx, w.Recording.ID, before.AudioHash)
			switch {
			case err == nil:
				ours = &own
			case !errors.Is(err, store.ErrNotFound):
				return err
			}
		}
		for _, l := range list { // a second copy of what was levelled: what it was levelled from is its original too
			if ours == nil && l.Original != nil {
				ours, at.Borrowed = l.Original, true
			}
		}
		at.Ours = inAttic(ours)
		return nil
	})
	keep := func(ctx context.Context, o delivery.Original, version *delivery.Original) error {
		job := w.Job.ID
		if ours != nil { // what was levelled stays so, and known by the job that did it
			job = ours.JobID
		}
		return s.record(w.Recording.ID, job)(ctx, o, version)
	}
	r.outcome, _, err = delivery.Tag(ctx, s.engine, &at, t, key, keep)
	return r, err
}

// record has the store note what is in the attic.
func (s *Service) record(recordingID, jobID int64) delivery.Record {
	return func(ctx context.Context, o delivery.Original, version *delivery.Original) error {
		kept := func(o delivery.Original) store.Original {
			return store.Original{RecordingID: recordingID, JobID: jobID, SHA256: o.SHA256, Stored: o.Stored, Levelled: o.Levelled, Size: o.Size, Length: o.Length, Modified: o.Modified}
		}
		if version != nil {
			return s.store.KeepOriginal(ctx, kept(o), kept(*version))
		}
		return s.store.KeepOriginal(ctx, kept(o))
	}
}

// place is where a job that changes the shelf finds and puts things.
func place(w store.Work, source string, ours *store.Original) delivery.Place {
	return delivery.Place{Root: w.Shelf.Root, Rel: w.Recording.Path, Attic: w.Shelf.Attic(), Copies: w.Shelf.Copies, Source: source, Ours: inAttic(ours)}
}

// follow has the recording that a job's file was before take its place, and returns the job's work then.
func (s *Service) follow(ctx context.Context, w store.Work, m *moved) (store.Work, error) {
	leave, err := s.places.enter(ctx, m.from)
	if err != nil {
		return w, err
	}
	defer leave()
	return s.store.Follow(ctx, m.from, w.Job.ID)
}
