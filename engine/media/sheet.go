package media

import (
	"context"

	"evenshelf/engine/tags"
	"evenshelf/engine/tags/id3"
	"evenshelf/engine/tags/mp4"
)

// A recording that changes its format carries a tags.Sheet from the one to the other: what its own reader here says, or
// what FFmpeg tells of formats that have none.

// sheet reads what a source carries, if it is of a format that is read here. ok is false for all others, and for what is
// damaged.
func (src *tagSource) sheet() (s tags.Sheet, ok bool) {
	switch src.kind.container {
	case "flac", "ogg":
		c, pictures, ok := src.comments()
		s := c.Sheet()
		s.Pictures = pictures
		return s, ok
	case "mp4":
		s, err := mp4.ReadSheet(src.f, src.size)
		return s, err == nil
	case "mp3", "aac", "wv", "ape":
		return src.sheetAtEnds()
	case "wav":
		return src.wavSheet()
	case "aiff":
		return src.aiffSheet()
	}
	return tags.Sheet{}, false
}

// sheetAtEnds reads the tags that stand in front of the format's own bytes and behind them: ID3 and APEv2.
func (src *tagSource) sheetAtEnds() (s tags.Sheet, ok bool) {
	from, err := id3.TailStart(src.f, src.kind.start, src.size)
	if err != nil {
		return s, false
	}
	head, err1 := readAt(src.f, 0, int(min(src.kind.start, id3.MaxLength)))
	tail, err2 := readAt(src.f, from, int(min(src.size-from, id3.MaxLength)))
	return id3.ReadSheet(head, tail), err1 == nil && err2 == nil
}

// sheetOf returns what a source, which may be nil, carries into another format. Without FFmpeg that is nothing where there is
// no reader here.
func (t *Toolbox) sheetOf(ctx context.Context, src *tagSource) (s tags.Sheet, err error) {
	if src == nil {
		return s, nil
	}
	s, ok := src.sheet()
	if !ok && t.FFmpeg() != "" {
		if s, err = t.probeSheet(ctx, src); err != nil {
			return s, err
		}
	}
	s.Settle()
	return s, nil
}
