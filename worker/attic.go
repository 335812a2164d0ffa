package worker

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"sync"

	"evenshelf/engine/level"
	"evenshelf/store"
	"evenshelf/worker/delivery"
)

// firstGeneration returns the sound to level: what is on the shelf, or if that is a copy we put there, its
// original in the attic, so that no sound is ever levelled twice. A replacing job that a crash cut short
// after its copy was in place is repeated the same way and makes the same file.
func (s *Service) firstGeneration(ctx context.Context, w store.Work, onShelf string) (string, error) {
	kept, err := s.store.Original(ctx, w.Recording.ID)
	switch {
	case errors.Is(err, store.ErrNotFound):
		return onShelf, nil
	case err != nil:
		return "", err
	case inAttic(kept).IsLevelled(onShelf):
		return filepath.Join(w.Shelf.Attic(), filepath.FromSlash(kept.Stored)), nil
	default:
		return onShelf, nil
	}
}

// replace puts the levelled copy in the recording's place.
func (s *Service) replace(ctx context.Context, w store.Work, onShelf, key string) (level.Outcome, string, error) {
	leave, err := s.places.enter(ctx, w.Recording.ID)
	if err != nil {
		return level.Outcome{}, "", err
	}
	defer leave()
	source, err := s.firstGeneration(ctx, w, onShelf)
	if err != nil {
		return level.Outcome{}, "", err
	}
	at := delivery.Place{Root: w.Shelf.Root, Rel: w.Recording.Path, Attic: w.Shelf.Attic(), Copies: w.Shelf.Copies, Source: source}
	return delivery.Replace(ctx, s.engine, at, level.Task{Profile: w.Profile}, key, func(ctx context.Context, o delivery.Original) error {
		return s.store.KeepOriginal(ctx, store.Original{RecordingID: w.Recording.ID, JobID: w.Job.ID,
			SHA256: o.SHA256, Stored: o.Stored, Levelled: o.Levelled, Size: o.Size})
	})
}

// deliverCopy puts a levelled copy into the shelf's copies folder.
func (s *Service) deliverCopy(ctx context.Context, w store.Work, onShelf, key string) (level.Outcome, string, error) {
	source, err := s.firstGeneration(ctx, w, onShelf)
	if err != nil {
		return level.Outcome{}, "", err
	}
	return delivery.Deliver(ctx, s.engine, source, w.Shelf.Copies, w.Recording.Path, level.Task{Profile: w.Profile}, key, delivery.Options{Overwrite: true})
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

// turnstile lets one at a time through for each recording.
type turnstile struct {
	mu   sync.Mutex
	busy map[int64]chan struct{} // closed when the one inside leaves
}

// enter waits until nobody else is inside. Call leave once.
func (t *turnstile) enter(ctx context.Context, id int64) (leave func(), err error) {
	for {
		t.mu.Lock()
		inside := t.busy[id]
		if inside == nil {
			if t.busy == nil {
				t.busy = map[int64]chan struct{}{}
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
