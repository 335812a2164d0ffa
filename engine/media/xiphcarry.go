package media

import (
	"bytes"
	"context"
	"io"

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
		return c, append(flac.Pictures(list), c.TakePictures()...), true
	}
	if src.kind.container != "ogg" {
		return c, nil, false
	}
	_, c, err := ogg.Comments(src.kind.section(src.f))
	c.Rest = nil // it is the codec's
	return c, c.TakePictures(), err == nil
}

// flacSource lists the metadata blocks of a source that is a FLAC, by itself or in Ogg; those behind damage are left
// out. Other sources have none. What ID3 tags around a FLAC say that its blocks do not is put behind them.
func flacSource(src *tagSource) (list []flac.Block) {
	switch {
	case src == nil:
	case src.kind.container == "flac":
		list, _, _ = flac.Blocks(io.NewSectionReader(src.f, src.kind.start, src.size-src.kind.start))
		if around, ok := src.sheetAtEnds(); ok && list != nil {
			list = withLacking(list, around)
		}
	case src.kind.container == "ogg":
		if head, err := ogg.FLACHead(src.kind.section(src.f)); err == nil {
			list, _, _ = flac.Blocks(bytes.NewReader(head))
		}
	}
	return list
}

// withLacking adds to metadata blocks what they lack of a sheet.
func withLacking(list []flac.Block, around tags.Sheet) []flac.Block {
	around.Settle()
	own := flac.Sheet(list)
	whole := own
	whole.Merge(around)
	lacking := tags.Sheet{Fields: whole.Fields[len(own.Fields):]}
	if len(own.Chapters) == 0 {
		lacking.Chapters = whole.Chapters
	}
	if c := vorbis.FromSheet(lacking); len(c.Entries) > 0 {
		list, _ = flac.EditComments(list, vorbis.Edit{Drop: func(string) bool { return false }, Add: c.Pairs()})
	}
	if len(own.Pictures) == 0 {
		list = append(list, flac.Of(vorbis.Comment{}, whole.Pictures)[1:]...)
	}
	return list
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
