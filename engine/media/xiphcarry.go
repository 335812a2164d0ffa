package media

import (
	"context"

	"evenshelf/engine/tags"
	"evenshelf/engine/tags/flac"
	"evenshelf/engine/tags/ogg"
	"evenshelf/engine/tags/vorbis"
)

// FLAC, Ogg Vorbis and Opus have the same comments, so between them comments keep their order and spelling. Only pictures
// are in blocks of their own in FLAC, and comments in Ogg.

// comments reads the comments and pictures of a source that is one of these; ok is false if it is not, or damaged from the
// beginning.
func (src *tagSource) comments() (c vorbis.Comment, pictures []tags.Picture, ok bool) {
	if list := flacSource(src); list != nil {
		all, _ := flac.Comments(list)
		for _, more := range all {
			c.Entries = append(c.Entries, more.Entries...)
		}
		pictures = flac.Pictures(list)
	} else {
		if src.kind.container != "ogg" {
			return c, nil, false
		}
		var err error
		if _, c, err = ogg.Comments(src.kind.section(src.f)); err != nil {
			return c, nil, false
		}
		c.Rest = nil // it is the codec's
	}
	return c, append(pictures, c.TakePictures()...), true
}

// commentsOf returns what a source, which may be nil, carries into FLAC or Ogg from another format, also if that is one of
// these.
func (t *Toolbox) commentsOf(ctx context.Context, src *tagSource) (c vorbis.Comment, pictures []tags.Picture, err error) {
	if src != nil {
		if c, pictures, ok := src.comments(); ok {
			vorbis.Edit{Vendor: vorbis.Vendor, Drop: untrue}.Apply(&c)
			return c, pictures, nil
		}
	}
	s, err := t.sheetOf(ctx, src)
	return vorbis.FromSheet(s), s.Pictures, err
}

// untrue reports whether a comment of this name is wrong in a levelled copy that has another encoding.
func untrue(name string) bool {
	return tags.Stale(name) || tags.NamesEncoder(name) || isMask(name)
}
