package worker

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path"

	"evenshelf/engine/level"
	"evenshelf/engine/profile"
	"evenshelf/store"
	"evenshelf/worker/delivery"
	"evenshelf/worker/discover"
)

// folder is the recordings that a run takes of one folder.
type folder struct {
	run  int64
	path string // relative to the shelf's root, "" for the root itself
}

// folderOf returns the folder of a recording as the store names it.
func folderOf(r store.Recording) string {
	if dir := path.Dir(r.Path); dir != "." {
		return dir
	}
	return ""
}

// task says what a job's recording is to become. If its profile has folders share a gain, that is measured by the
// first job of the folder; the others wait for it, which takes less than measuring it again.
func (s *Service) task(ctx context.Context, w store.Work) (t level.Task, err error) {
	t.Profile = w.Profile
	if w.Profile.Group != profile.Folder {
		return t, nil
	}
	f := folder{w.Job.RunID, folderOf(w.Recording)}
	leave, err := s.groups.enter(ctx, f)
	if err != nil {
		return t, err
	}
	defer leave()
	shared, err := s.store.Shared(ctx, f.run, f.path)
	if errors.Is(err, store.ErrNotFound) {
		shared, err = s.measureTogether(ctx, w, f)
	}
	if err != nil {
		return t, err
	}
	t.Shared = &shared
	return t, nil
}

// measureTogether measures the recordings of a folder as one programme: the sound that each will be levelled
// from, so that it makes no difference which of them have been replaced already.
func (s *Service) measureTogether(ctx context.Context, w store.Work, f folder) (shared level.Shared, err error) {
	members, err := s.store.Members(ctx, f.run, f.path)
	if err != nil {
		return shared, err
	}
	var sources []string
	var first []os.FileInfo
	for _, m := range members {
		source, err := discover.Resolve(w.Shelf.Root, m.Path)
		if isGone(err) { // as its own job will say
			continue
		}
		if err == nil {
			source, _, err = s.firstGeneration(ctx, w.Shelf, m.ID, source)
		}
		if err != nil {
			return shared, err
		}
		info, err := os.Stat(source)
		if err != nil {
			return shared, err
		}
		sources, first = append(sources, source), append(first, info)
	}
	measured, err := s.engine.Group(ctx, sources, w.Profile.Mono)
	if err != nil {
		return shared, fmt.Errorf("measure the folder %q as one programme: %w", f.path, err)
	}
	for i, source := range sources { // another run may have replaced one meanwhile
		if err := delivery.Unchanged(source, first[i]); err != nil {
			return shared, err
		}
	}
	return s.store.KeepShared(ctx, f.run, f.path, measured)
}
