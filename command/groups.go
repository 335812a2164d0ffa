package command

import (
	"context"
	"path/filepath"
	"sync"

	"evenshelf/engine/level"
	"evenshelf/engine/profile"
	"evenshelf/store"
)

// groups measures the recordings that share a gain: those of one folder, or of one album by their tags, each group once
// and only when its first recording's turn comes.
type groups struct {
	engine  *level.Engine
	profile profile.Profile
	files   []input

	sort    sync.Once
	failed  error
	name    map[string]string   // of each recording's group, by its path
	members map[string][]string // paths

	mu    sync.Mutex
	known map[string]*group
}

type group struct {
	once   sync.Once
	shared level.Shared
	err    error
}

func newGroups(e *level.Engine, p profile.Profile, files []input) *groups {
	return &groups{engine: e, profile: p, files: files, known: map[string]*group{}, name: map[string]string{}, members: map[string][]string{}}
}

// sorted finds out who belongs together. A recording whose tags cannot be read is on its own: its turn says why.
func (g *groups) sorted(ctx context.Context) error {
	for _, f := range g.files {
		if f.err != nil {
			continue
		}
		name := filepath.Dir(f.path)
		if g.profile.Group == profile.Album {
			album, err := g.engine.Album(ctx, f.path)
			if ctx.Err() != nil {
				return context.Cause(ctx)
			}
			if name = store.AlbumKey(album.Title, album.Artist); err != nil || name == "" {
				continue
			}
		}
		g.name[f.path] = name
		g.members[name] = append(g.members[name], f.path)
	}
	return nil
}

// of returns the reading of the group that a recording belongs to; nil if it belongs to none.
func (g *groups) of(ctx context.Context, in input) (*level.Shared, error) {
	if g.profile.Group == profile.Alone || in.err != nil {
		return nil, nil
	}
	g.sort.Do(func() { g.failed = g.sorted(ctx) })
	if g.failed != nil {
		return nil, g.failed
	}
	name, ok := g.name[in.path]
	if !ok {
		return nil, nil
	}
	g.mu.Lock()
	one := g.known[name]
	if one == nil {
		one = &group{}
		g.known[name] = one
	}
	g.mu.Unlock()
	one.once.Do(func() { one.shared, one.err = g.engine.Group(ctx, g.members[name], level.OptionsFor(g.profile)) })
	return &one.shared, one.err
}
