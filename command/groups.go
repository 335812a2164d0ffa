package command

import (
	"context"
	"path/filepath"
	"sync"

	"evenshelf/engine/level"
	"evenshelf/engine/profile"
)

// groups measures the recordings that share a gain: those of one folder, each group once and only when its first
// recording's turn comes.
type groups struct {
	measure func(ctx context.Context, folder string) (level.Shared, error)
	profile profile.Profile

	mu    sync.Mutex
	known map[string]*group
}

type group struct {
	once   sync.Once
	shared level.Shared
	err    error
}

func newGroups(e *level.Engine, p profile.Profile, files []input) *groups {
	members := map[string][]string{}
	for _, f := range files {
		if f.err == nil {
			members[filepath.Dir(f.path)] = append(members[filepath.Dir(f.path)], f.path)
		}
	}
	return &groups{profile: p, known: map[string]*group{}, measure: func(ctx context.Context, folder string) (level.Shared, error) {
		return e.Group(ctx, members[folder], level.OptionsFor(p))
	}}
}

// of returns the reading of the group that a recording belongs to; nil if the profile groups nothing.
func (g *groups) of(ctx context.Context, in input) (*level.Shared, error) {
	if g.profile.Group != profile.Folder || in.err != nil {
		return nil, nil
	}
	folder := filepath.Dir(in.path)
	g.mu.Lock()
	one := g.known[folder]
	if one == nil {
		one = &group{}
		g.known[folder] = one
	}
	g.mu.Unlock()
	one.once.Do(func() { one.shared, one.err = g.measure(ctx, folder) })
	return &one.shared, one.err
}
