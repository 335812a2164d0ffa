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

// replace puts the levelled copy in the recording's place. If what is there is a copy we made, the original
// in the attic is levelled instead, so that no sound is ever levelled twice; a job that a crash cut short
// after the copy was in place is repeated the same way and makes the same file.
func (s *Service) replace(ctx context.Context, w store.Work, source, key string) (level.Outcome, string, error) {
	leave, err := s.places.enter(ctx, w.Recording.ID)
	if err != nil {
		return level.Outcome{}, "", err
	}
	defer leave()
	at := delivery.Place{Root: w.Shelf.Root, Rel: w.Recording.Path, Attic: w.Shelf.Attic(), Copies: w.Shelf.Copies, Source: source}
	kept, err := s.store.Original(ctx, w.Recording.ID)
	switch {
	case errors.Is(err, store.ErrNotFound):
	case err != nil:
		return level.Outcome{}, "", err
	case inAttic(kept).IsLevelled(source):
		at.Source = filepath.Join(at.Attic, filepath.FromSlash(kept.Stored))
	}
	return delivery.Replace(ctx, s.engine, at, w.Profile, key, func(ctx context.Context, o delivery.Original) error {
		return s.store.KeepOriginal(ctx, store.Original{RecordingID: w.Recording.ID, JobID: w.Job.ID,
			SHA256: o.SHA256, Stored: o.Stored, Levelled: o.Levelled, Size: o.Size})
	})
}

func inAttic(o store.Original) delivery.Original {
	return delivery.Original{Stored: o.Stored, SHA256: o.SHA256, Levelled: o.Levelled, Size: o.Size}
}

// Restore puts a recording's original back in its place, bit for bit, and returns the recording as it is
// then. It wraps store.ErrNotFound if the attic holds nothing of it, and store.ErrState if a job is waiting
// for or working on it, or if the file was changed since it was levelled: then neither version is lost.
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
	shelf, err := s.store.Shelf(ctx, rec.ShelfID)
	if err != nil {
		return fail(err)
	}
	err = delivery.Restore(shelf.Root, rec.Path, shelf.Attic(), inAttic(kept), fmt.Sprintf("restore-%d", recordingID))
	if errors.Is(err, delivery.ErrChanged) {
		err = fmt.Errorf("%w: %w", err, store.ErrState)
	}
	if err != nil {
		return fail(err)
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
