package worker

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path"
	"path/filepath"
	"sync"

	"evenshelf/engine/level"
	"evenshelf/store"
	"evenshelf/worker/delivery"
)

// firstGeneration returns the sound to level: what is on the shelf, or if that is, byte for byte, a file we put there,
// its original in the attic, so that no sound is ever levelled twice. In that case ours is what the attic knows of
// it, else nil. errNoOriginal if that original is not there. A replacing job that a crash cut short after its copy was in
// place is repeated the same way and makes the same file.
func (s *Service) firstGeneration(ctx context.Context, shelf store.Shelf, recordingID int64, onShelf string) (source string, ours *store.Original, err error) {
	if ours, err = s.ours(ctx, recordingID, onShelf); err != nil || ours == nil {
		return onShelf, nil, err
	}
	source, err = stored(shelf, *ours)
	return source, ours, err
}

// tagsFrom is where a recording that is levelled from its original has its tags from: the file that was put in its place if
// that got those of a version somebody made, else "", the original.
func (s *Service) tagsFrom(ctx context.Context, w store.Work, onShelf string) (string, error) {
	versions, err := s.store.Versions(ctx, store.OriginalQuery{RecordingID: w.Recording.ID, Limit: 1})
	if err != nil || len(versions) == 0 {
		return "", err
	}
	return onShelf, nil
}

// ours is what the attic has of a file that is, byte for byte, what we put in a recording's place; nil if it is not.
func (s *Service) ours(ctx context.Context, recordingID int64, onShelf string) (*store.Original, error) {
	kept, err := s.store.Original(ctx, recordingID)
	switch {
	case errors.Is(err, store.ErrNotFound):
		return nil, nil
	case err != nil:
		return nil, err
	case !inAttic(&kept).IsLevelled(onShelf):
		return nil, nil
	}
	return &kept, nil
}

// errNoOriginal says that what is on the shelf is a copy of ours, which is not to be levelled, and that there is
// nothing else to level.
var errNoOriginal = errors.New("its original is missing from the attic")

// already is the reason of a job that found its work done by an earlier one.
const already = "levelled with this profile already"

// replace puts the levelled copy in the recording's place, unless what it would put there is there.
func (s *Service) replace(ctx context.Context, w store.Work, t level.Task, onShelf, key string) (r result, err error) {
	if refusal := delivery.Unfit(w.Profile.Delivered.Format, w.Recording.Path); refusal != "" { // before the work, not after it
		return result{outcome: failedBecause(refusal)}, nil
	}
	leave, err := s.places.enter(ctx, w.Recording.ID)
	if err != nil {
		return r, err
	}
	defer leave()
	source, ours, err := s.firstGeneration(ctx, w.Shelf, w.Recording.ID, onShelf)
	if err != nil {
		return r, err
	}
	if ours != nil {
		by, err := s.store.Job(ctx, ours.JobID) // of another recording, if it is a second copy that got tags
		if err != nil {
			return r, err
		}
		l := store.Levelling{JobID: by.ID, RunID: by.RunID, RecordingID: by.RecordingID, Path: by.Path}
		if stands, err := s.stands(ctx, w, t, l); err != nil || stands {
			return (&known{Levelling: l}).same(w), err
		}
		if t.TagsFrom, err = s.tagsFrom(ctx, w, onShelf); err != nil {
			return r, err
		}
		t = inOwnFormat(t, source, w.Recording.Path)
	}
	at := place(w, source, ours)
	if ours == nil {
		t.Known = s.whoever(ctx, w, s.levelledBefore(ctx, w, t, &at))
	}
	put := func() error {
		r.outcome, r.output, err = delivery.Replace(ctx, s.engine, &at, t, key, s.record(w.Recording.ID, w.Job.ID))
		return err
	}
	var k *known
	if err := put(); !errors.As(err, &k) {
		return r, err
	}
	if k.stands {
		return k.same(w), nil
	}
	if at.Source, t, err = s.again(w, k, t, onShelf); err != nil {
		return r, err
	}
	at.Ours, at.Borrowed = inAttic(k.Original), k.RecordingID != w.Recording.ID
	err = put()
	if plan := r.outcome.Plan; err == nil && plan != nil && plan.Untouched { // copied byte for byte, tags and all
		r.outcome.Verdict.Reason = "the original is within the profile and is back with the tags it had; the file with other tags is in the attic"
	}
	return r, err
}

// stands reports whether levelling would only make again what a levelling made: it was by this engine, with this
// version of the profile and, if it shares its gain with others, with the same gain.
func (s *Service) stands(ctx context.Context, w store.Work, t level.Task, l store.Levelling) (bool, error) {
	ok, err := s.store.Stands(ctx, l.JobID, w.Job.ProfileVersion)
	if err != nil || !ok || t.Shared == nil {
		return ok, err
	}
	name, err := s.groupOf(ctx, w.Profile, l.RecordingID, l.Path)
	if err != nil {
		return false, err
	}
	then, err := s.store.Shared(ctx, l.RunID, name)
	if errors.Is(err, store.ErrNotFound) {
		return false, nil
	}
	return err == nil && then == *t.Shared, err
}

// deliverCopy puts a levelled copy into the shelf's copies folder.
func (s *Service) deliverCopy(ctx context.Context, w store.Work, t level.Task, onShelf, key string) (o level.Outcome, output string, err error) {
	source, ours, err := s.firstGeneration(ctx, w.Shelf, w.Recording.ID, onShelf)
	if err != nil {
		return level.Outcome{}, "", err
	}
	if ours == nil {
		t.Known = s.whoever(ctx, w, s.levelledBefore(ctx, w, t, nil))
	} else if t.TagsFrom, err = s.tagsFrom(ctx, w, onShelf); err != nil {
		return level.Outcome{}, "", err
	}
	t = inOwnFormat(t, source, w.Recording.Path)
	deliver := func() (level.Outcome, string, error) {
		return delivery.Deliver(ctx, s.engine, source, w.Shelf.Copies, w.Recording.Path, t, key, delivery.Options{Overwrite: true})
	}
	var k *known
	if o, output, err = deliver(); !errors.As(err, &k) {
		return o, output, err
	}
	if source, t, err = s.again(w, k, t, onShelf); err != nil {
		return level.Outcome{}, "", err
	}
	return deliver()
}

// inAttic is an original as delivery knows it; nil if there is none.
func inAttic(o *store.Original) *delivery.Original {
	if o == nil {
		return nil
	}
	return &delivery.Original{Stored: o.Stored, SHA256: o.SHA256, Levelled: o.Levelled, Size: o.Size, Length: o.Length}
}

// Restore puts a recording's original back in its place, bit for bit, and returns the recording as it is
// then. It wraps store.ErrNotFound if the attic holds nothing of it, and store.ErrState if a job is waiting
// for or working on it, or if the files do not allow it: the one on the shelf was changed since it was levelled,
// the one in the attic is damaged, the disk is full, read-only or away. No version is lost then.
func (s *Service) Restore(ctx context.Context, recordingID int64) (store.Recording, error) {
	fail := func(err error) (store.Recording, error) {
		return store.Recording{}, fmt.Errorf("restore recording %d: %w", recordingID, err)
	}
	leave, err := s.places.enter(ctx, recordingID)
	if err != nil {
		return fail(err)
	}
	defer leave()
	rec, err := s.store.Recording(ctx, recordingID)
	if err != nil {
		return fail(err)
	}
	if rec.State == store.Waiting || rec.State == store.Working {
		return fail(fmt.Errorf("a job is %s: %w", rec.State, store.ErrState))
	}
	kept, err := s.store.Original(ctx, recordingID)
	if err != nil {
		return fail(err)
	}
	shelf, err := s.store.ShelfNamed(ctx, rec.ShelfName) // Shelf would count all its recordings
	if err != nil {
		return fail(err)
	}
	if !sameFormat(kept.Stored, rec.Path) {
		return fail(fmt.Errorf("what it was levelled from has another format, %s, and is at %s: %w", path.Ext(kept.Stored), filepath.Join(shelf.Attic(), kept.Stored), store.ErrState))
	}
	err = delivery.Restore(shelf.Root, rec.Path, shelf.Attic(), *inAttic(&kept), fmt.Sprintf("restore-%d", recordingID))
	if err != nil {
		return fail(fmt.Errorf("%w: %w", err, store.ErrState))
	}
	info, err := os.Stat(filepath.Join(shelf.Root, filepath.FromSlash(rec.Path)))
	if err != nil {
		return fail(err)
	}
	if err := s.store.Restored(ctx, kept, info.Size(), info.ModTime()); err != nil {
		return fail(err)
	}
	return s.store.Recording(ctx, recordingID)
}

// turnstile lets one at a time through for each key.
type turnstile[K comparable] struct {
	mu   sync.Mutex
	busy map[K]chan struct{} // closed when the one inside leaves
}

// enter waits until nobody else is inside. Call leave once.
func (t *turnstile[K]) enter(ctx context.Context, id K) (leave func(), err error) {
	for {
		t.mu.Lock()
		inside := t.busy[id]
		if inside == nil {
			if t.busy == nil {
				t.busy = map[K]chan struct{}{}
			}
			out := make(chan struct{})
			t.busy[id] = out
			t.mu.Unlock()
			return func() {
				t.mu.Lock()
				defer t.mu.Unlock()
				delete(t.busy, id)
				close(out)
			}, nil
		}
		t.mu.Unlock()
		select {
		case <-inside:
		case <-ctx.Done():
			return nil, ctx.Err()
		}
	}
}
