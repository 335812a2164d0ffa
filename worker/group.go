package worker

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path"

	"evenshelf/engine/level"
	"evenshelf/engine/profile"
	"evenshelf/store"
	"evenshelf/worker/delivery"
	"evenshelf/worker/discover"
)

// folder is one folder of recordings, for one run.
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

// measureTogether measures all recordings of a folder as one programme: the sound that each would be levelled
// from, so that it makes no difference which of them the run takes, nor which have been replaced already. One that
// cannot be read is left out: its own turn says why.
func (s *Service) measureTogether(ctx context.Context, w store.Work, f folder) (shared level.Shared, err error) {
	members, err := s.store.Members(ctx, f.run, f.path)
	if err != nil {
		return shared, err
	}
	var sources []string
	var first []fs.FileInfo
	for _, m := range members {
		source, info, err := s.toLevel(ctx, w.Shelf, m)
		if isGone(err) || errors.Is(err, fs.ErrNotExist) || errors.Is(err, fs.ErrPermission) {
			continue
		}
		if err != nil {
			return shared, err
		}
		sources, first = append(sources, source), append(first, info)
	}
	measured, err := s.engine.Group(ctx, sources, level.OptionsFor(w.Profile))
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

// toLevel finds the sound that a recording would be levelled from.
func (s *Service) toLevel(ctx context.Context, shelf store.Shelf, r store.Recording) (source string, info fs.FileInfo, err error) {
	if source, err = discover.Resolve(shelf.Root, r.Path); err != nil {
		return "", nil, err
	}
	if source, _, err = s.firstGeneration(ctx, shelf, r.ID, source); err != nil {
		return "", nil, err
	}
	info, err = os.Stat(source)
	return source, info, err
}
