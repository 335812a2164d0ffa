package media

import (
	"context"
	"fmt"
	"strings"
)

// Tags returns the text tags of a file as FFmpeg reads them, by their names in small letters. Where the file and its
// sound say different things under one name, the sound's count. Errors name the file.
func (t *Toolbox) Tags(ctx context.Context, path string) (map[string]string, error) {
	f, size, err := openRegular(path)
	if err != nil {
		return nil, about(path, err)
	}
	defer f.Close()
	k, err := recognise(f, size)
	if err != nil {
		return nil, about(path, err)
	}
	if t.FFmpeg() == "" {
		return nil, about(path, fmt.Errorf("%w: reading tags needs FFmpeg, and %s", ErrUnsupported, needFFmpeg))
	}
	k.end = 0 // tags may lie behind the sound
	p, err := t.runProbe(ctx, f, k)
	if err != nil {
		return nil, about(path, err)
	}
	all := map[string]string{}
	for name, value := range p.Format.Tags {
		all[strings.ToLower(name)] = value
	}
	if s := p.sound(); s != nil {
		for name, value := range s.Tags {
			all[strings.ToLower(name)] = value
		}
	}
	return all, nil
}

// Album is what a file's tags say about the album it is from.
type Album struct{ Title, Artist string }

// Album reads the album of a file; its title is empty if there is none.
func (t *Toolbox) Album(ctx context.Context, path string) (Album, error) {
	all, err := t.Tags(ctx, path)
	if err != nil {
		return Album{}, err
	}
	first := func(names ...string) string {
		for _, name := range names {
			if v := strings.TrimSpace(all[name]); v != "" {
				return v
			}
		}
		return ""
	}
	return Album{Title: first("album"), Artist: first("album_artist", "albumartist", "album artist")}, nil
}
