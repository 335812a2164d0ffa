package worker

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"sync"

	"evenshelf/engine/level"
	"evenshelf/store"
	"evenshelf/worker/delivery"
)

// firstGeneration returns the sound to level: what is on the shelf, or if that is a copy we put there, its
// original in the attic, so that no sound is ever levelled twice. In that case ours is what the attic knows of
// it, else nil. errNoOriginal if that original is not there. A replacing job that a crash cut short after its copy was in place is repeated the same way and
// makes the same file.
func (s *Service) firstGeneration(ctx context.Context, shelf store.Shelf, recordingID int64, onShelf string) (source string, ours *store.Original, err error) {
	kept, err := s.store.Original(ctx, recordingID)
	switch {
	case errors.Is(err, store.ErrNotFound):
		return onShelf, nil, nil
	case err != nil:
		return "", nil, err
	case !inAttic(kept).IsLevelled(onShelf):
		return onShelf, nil, nil
	}
	source = filepath.Join(shelf.Attic(), filepath.FromSlash(kept.Stored))
	if _, err := os.Stat(source); errors.Is(err, fs.ErrNotExist) {
		return "", nil, errNoOriginal
	} else if err != nil {
		return "", nil, err
	}
	return source, &kept, nil
}

// errNoOriginal says that what is on the shelf is a copy of ours, which is not to be levelled, and that there is
// nothing else to level.
var errNoOriginal = errors.New("its original is missing from the attic")

// already is the reason of a job that found its work done by an earlier one.
const already = "levelled with this profile already"

// replace puts the levelled copy in the recording's place, unless what it would put there is there.
func (s *Service) replace(ctx context.Context, w store.Work, t level.Task, onShelf, key string) (r result, err error) {
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
		switch stands, err := s.stands(ctx, w, t, *ours); {
		case err != nil:
			return r, err
		case stands:
			return result{outcome: level.Outcome{Verdict: level.Verdict{State: level.Done, Reason: already}}, same: ours.JobID}, nil
		}
	}
	at := delivery.Place{Root: w.Shelf.Root, Rel: w.Recording.Path, Attic: w.Shelf.Attic(), Copies: w.Shelf.Copies, Source: source}
	r.outcome, r.output, err = delivery.Replace(ctx, s.engine, at, t, key, func(ctx context.Context, o delivery.Original) error {
		return s.store.KeepOriginal(ctx, store.Original{RecordingID: w.Recording.ID, JobID: w.Job.ID,
			SHA256: o.SHA256, Stored: o.Stored, Levelled: o.Levelled, Size: o.Size})
	})
	return r, err
}

// stands reports whether levelling would only make the file again that we put on the shelf: it was made by this
// engine, with this version of the profile and, if it shares its gain with others, with the same gain.
func (s *Service) stands(ctx context.Context, w store.Work, t level.Task, ours store.Original) (bool, error) {
	ok, err := s.store.Stands(ctx, ours.JobID, w.Job.ProfileVersion)
	if err != nil || !ok || t.Shared == nil {
		return ok, err
	}
	then, err := s.store.Shared(ctx, ours.RunID, folderOf(w.Recording))
	if errors.Is(err, store.ErrNotFound) {
		return false, nil
	}
	return err == nil && then == *t.Shared, err
}

// deliverCopy puts a levelled copy into the shelf's copies folder.
func (s *Service) deliverCopy(ctx context.Context, w store.Work, t level.Task, onShelf, key string) (level.Outcome, string, error) {
	source, _, err := s.firstGeneration(ctx, w.Shelf, w.Recording.ID, onShelf)
	if err != nil {
		return level.Outcome{}, "", err
	}
	return delivery.Deliver(ctx, s.engine, source, w.Shelf.Copies, w.Recording.Path, t, key, delivery.Options{Overwrite: true})
}

func inAttic(o store.Original) delivery.Original {
	return delivery.Original{Stored: o.Stored, SHA256: o.SHA256, Levelled: o.Levelled, Size: o.Size}
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
	err = delivery.Restore(shelf.Root, rec.Path, shelf.Attic(), inAttic(kept), fmt.Sprintf("restore-%d", recordingID))
	if err != nil {
		return fail(fmt.Errorf("%w: %w", err, store.ErrState))
	}
	info, err := os.Stat(filepath.Join(shelf.Root, filepath.FromSlash(rec.Path)))
	if err != nil {
		return fail(err)
	}
	if err := s.store.Restored(ctx, kept, info.Size()); err != nil {
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
