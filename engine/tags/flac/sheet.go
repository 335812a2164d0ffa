package flac

import (
	"evenshelf/engine/tags"
	"evenshelf/engine/tags/vorbis"
)

// Sheet is what the metadata blocks of a FLAC say; a cue sheet says it of a disc. What is damaged is left out.
func Sheet(list []Block) (s tags.Sheet) {
	all, _ := Comments(list)
	whole := vorbis.Comment{}
	for _, c := range all {
		whole.Entries = append(whole.Entries, c.Entries...)
	}
	s = whole.Sheet()
	s.Pictures = append(Pictures(list), s.Pictures...)
	return s
}

// Pictures reads the picture blocks in their order. What is damaged is left out.
func Pictures(list []Block) (all []tags.Picture) {
	for _, b := range list {
		if b.Type != Picture {
			continue
		}
		if body, err := b.bytes(); err == nil {
			if p, err := vorbis.ParsePicture(body); err == nil {
				all = append(all, p)
			}
		}
	}
	return all
}

// Of makes metadata blocks of comments and pictures. What is larger than a block can be is left out.
func Of(c vorbis.Comment, pictures []tags.Picture) (list []Block) {
	c.Fit(MaxBody)
	list = append(list, Made(VorbisComment, c.Bytes()))
	for _, p := range pictures {
		if body := vorbis.PictureBytes(p); len(body) <= MaxBody {
			list = append(list, Made(Picture, body))
		}
	}
	return list
}
