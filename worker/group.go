package worker

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path"
	"slices"
	"sync"

	"evenshelf/engine/level"
	"evenshelf/engine/media"
	"evenshelf/engine/profile"
	"evenshelf/store"
	"evenshelf/worker/delivery"
	"evenshelf/worker/discover"
)

// group is recordings that share a gain, for one run.
type group struct {
	run  int64
	name string // a folder relative to the shelf's root, "" for the root itself; or an album
}

// folderOf returns the folder of a recording as the store names it.
func folderOf(p string) string {
	if dir := path.Dir(p); dir != "." {
		return dir
	}
	return ""
}

// task says what a job's recording is to become. If its profile has recordings share a gain, that is measured by the
// first job of the group; the others wait for it, which takes less than measuring it again.
func (s *Service) task(ctx context.Context, w store.Work) (t level.Task, err error) {
	t.Profile = w.Profile
	if w.Profile.Group == profile.Alone {
		return t, nil
	}
	if w.Profile.Group == profile.Album {
		if err := s.readAlbums(ctx, w.Shelf); err != nil {
			return t, err
		}
	}
	name, err := s.groupOf(ctx, w.Profile, w.Recording.ID, w.Recording.Path)
	if err != nil || name == "" && w.Profile.Group == profile.Album { // of no album: on its own
		return t, err
	}
	g := group{w.Job.RunID, name}
	leave, err := s.groups.enter(ctx, g)
	if err != nil {
		return t, err
	}
	defer leave()
	shared, err := s.store.Shared(ctx, g.run, g.name)
	if errors.Is(err, store.ErrNotFound) {
		shared, err = s.measureTogether(ctx, w, g)
	}
	if err != nil {
		return t, err
	}
	t.Shared = &shared
	return t, nil
}

// groupOf names the group of a recording.
func (s *Service) groupOf(ctx context.Context, p profile.Profile, recordingID int64, path string) (string, error) {
	if p.Group == profile.Album {
		return s.store.Album(ctx, recordingID)
	}
	return folderOf(path), nil
}

// readAlbums reads the albums of a shelf's recordings whose file is new or changed, so that it is known who belongs
// together. A file that cannot be read is of no album until it changes: its own turn says why.
func (s *Service) readAlbums(ctx context.Context, shelf store.Shelf) error {
	leave, err := s.albums.enter(ctx, shelf.ID)
	if err != nil {
		return err
	}
	defer leave()
	unread, err := s.store.AlbumsUnread(ctx, shelf.ID)
	if err != nil {
		return err
	}
	// A file takes some 70 ms, nearly all of it to start FFmpeg; the other jobs of the run wait, so there are hands free.
	// What was read is stored in between, so that a stop loses little.
	for some := range slices.Chunk(unread, 50*s.workers) {
		var mu sync.Mutex
		var failed error
		keys, queue := make(map[int64]string, len(some)), make(chan store.Recording, len(some))
		for _, r := range some {
			queue <- r
		}
		close(queue)
		var hands sync.WaitGroup
		for range s.workers {
			hands.Go(func() {
				for r := range queue {
					key, err := s.readAlbum(ctx, shelf, r)
					mu.Lock()
					keys[r.ID], failed = key, errors.Join(failed, err)
					mu.Unlock()
					if err != nil {
						return
					}
				}
			})
		}
		hands.Wait()
		if failed != nil {
			return failed
		}
		if err := s.store.KeepAlbums(ctx, keys); err != nil {
			return err
		}
	}
	return nil
}

func (s *Service) readAlbum(ctx context.Context, shelf store.Shelf, r store.Recording) (key string, err error) {
	source, err := discover.Resolve(shelf.Root, r.Path)
	album := media.Album{}
	if err == nil {
		album, err = s.engine.Album(ctx, source)
	}
	switch {
	case ctx.Err() != nil:
		return "", context.Cause(ctx)
	case errors.Is(err, media.ErrKilled):
		return "", err
	case err != nil:
		s.log.InfoContext(ctx, "album not read", "path", r.Path, "error", err)
	}
	return store.AlbumKey(album.Title, album.Artist), nil
}

// measureTogether measures all recordings of a group as one programme: the sound that each would be levelled
// from, so that it makes no difference which of them the run takes, nor which have been replaced already; or the files
// themselves if it is those that get the tags. One that cannot be read is left out: its own turn says why.
func (s *Service) measureTogether(ctx context.Context, w store.Work, g group) (shared level.Shared, err error) {
	find := s.store.Members
	if w.Profile.Group == profile.Album {
		find = s.store.AlbumMembers
	}
	members, err := find(ctx, g.run, g.name)
	if err != nil {
		return shared, err
	}
	var sources []string
	var first []fs.FileInfo
	for _, m := range members {
		source, info, err := s.member(ctx, w, m)
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
		return shared, fmt.Errorf("measure the %s %q as one programme: %w", w.Profile.Group, g.name, err)
	}
	for i, source := range sources { // another run may have replaced one meanwhile
		if err := delivery.Unchanged(source, first[i]); err != nil {
			return shared, err
		}
	}
	return s.store.KeepShared(ctx, g.run, g.name, measured)
}

// member finds the sound with which a recording counts in its group.
func (s *Service) member(ctx context.Context, w store.Work, r store.Recording) (source string, info fs.FileInfo, err error) {
	if source, err = discover.Resolve(w.Shelf.Root, r.Path); err != nil {
		return "", nil, err
	}
	if w.Delivery != store.Tags {
		if source, err = s.toLevel(ctx, w, r, source); err != nil {
			return "", nil, err
		}
	}
	info, err = os.Stat(source)
	return source, info, err
}

// toLevel finds the sound that a recording would be levelled from. One whose original is in the attic, but whose file
// is not, byte for byte, what was put there, may have been tagged since: its sound tells.
func (s *Service) toLevel(ctx context.Context, w store.Work, r store.Recording, onShelf string) (string, error) {
	source, ours, err := s.firstGeneration(ctx, w.Shelf, r.ID, onShelf)
	if err != nil || ours != nil {
		return source, err
	}
	if _, err := s.store.Original(ctx, r.ID); err != nil {
		if errors.Is(err, store.ErrNotFound) {
			return onShelf, nil
		}
		return "", err
	}
	a, err := s.engine.Analyse(ctx, onShelf, level.Options{Mono: w.Profile.Mono, LoudnessOnly: true})
	if err != nil {
		if ctx.Err() != nil || errors.Is(err, media.ErrKilled) {
			return "", err
		}
		return onShelf, nil // its own turn says why it cannot be read
	}
	list, err := s.store.Levelled(ctx, w.Shelf.ID, r.ID, a.AudioHash)
	if err != nil {
		return "", err
	}
	for _, l := range list {
		if l.RecordingID == r.ID && l.Original != nil {
			return stored(w.Shelf, *l.Original)
		}
	}
	return onShelf, nil
}
