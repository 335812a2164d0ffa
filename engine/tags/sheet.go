package tags

import "time"

// Sheet is what a recording carries beside its sound, in terms that every carrier has words for. Between files of one
// format everything is carried byte for byte; a Sheet is for the way from one format to another.
type Sheet struct {
	Fields   []Field   // in the source's order
	Pictures []Picture // the front cover first, if there is one, else in the source's order
	Chapters []Chapter // in order of their starts
}

// Field is a tag: a name, and what it says, which may be several things. Names are those of Vorbis comments in capitals,
// as taggers have agreed on them: TITLE, ARTIST, ALBUM, ALBUMARTIST, TRACKNUMBER (the number alone), TRACKTOTAL,
// DISCNUMBER, DISCTOTAL, DATE, GENRE, COMPOSER, COMMENT, LYRICS, ISRC, BPM, COPYRIGHT, LANGUAGE …; a name that only one
// carrier knows is kept as it is there.
type Field struct {
	Name   string
	Values []string
}

// Picture is a picture in a tag.
type Picture struct {
	Kind        int    // as ID3v2's APIC and FLAC's PICTURE count: 3 is the front cover, 0 other
	MIME        string // "image/jpeg"
	Description string
	Data        []byte
}

// FrontCover is the Kind of the picture that players show.
const FrontCover = 3

// Chapter is a part of a recording with a title.
type Chapter struct {
	Start, End time.Duration // from the first frame of the sound; an End of 0 is not known
	Title      string
}
