package media

import (
	"encoding/binary"
	"math"
	"slices"
	"strings"

	"evenshelf/engine/audio"
	"evenshelf/engine/tags"
	"evenshelf/engine/tags/id3"
)

// aiffNames are the names of a Sheet's fields for AIFF's text chunks (AIFF 1.3, Text Chunks).
var aiffNames = [][2]string{{"NAME", "TITLE"}, {"AUTH", "ARTIST"}, {"(c) ", "COPYRIGHT"}, {"ANNO", "COMMENT"}}

// aiffSheet reads an AIFF's ID3v2 tag, and its text chunks for names that are not in there. Markers are its chapters, unless
// the ID3v2 tag has some.
func (t *tagSource) aiffSheet() (s tags.Sheet, ok bool) {
	if t.aiff == nil {
		return s, false
	}
	var own tags.Sheet
	for _, c := range slices.Concat(t.aiff.before, t.aiff.after) {
		b, known := t.wordsOf(c)
		switch {
		case !known:
		case (c.id == "ID3 " || c.id == "id3 ") && len(s.Fields) == 0: // of several, the first that says something
			s.Merge(id3.ReadSheet(b, nil))
		case c.id == "MARK":
			own.Merge(tags.Sheet{Chapters: markers(b, t.aiff.format, t.aiff.frames)})
		case c.id == "COMT":
			comments(&own, b)
		}
		for _, pair := range aiffNames {
			if known && c.id == pair[0] {
				own.Add(pair[1], tags.Guess(b))
			}
		}
	}
	s.Merge(own)
	return s, true
}

// markers reads a MARK chunk (AIFF 1.3, Marker Chunk): of each its number, its place in frames and its name, whose length
// comes first and which with it has an even number of bytes.
func markers(b []byte, f audio.Format, frames int64) (list []tags.Chapter) {
	const fixed = 7
	for b = b[min(2, len(b)):]; len(b) >= fixed && len(list) < tags.Most; {
		n := min(int(b[6]), len(b)-fixed)
		list = append(list, tags.Chapter{Start: duration(f, int64(be32(b[2:]))), Title: tags.Guess(b[fixed : fixed+n])})
		b = b[min(fixed+n+1-n%2, len(b)):]
	}
	return withEnds(list, duration(f, frames))
}

// comments reads a COMT chunk (AIFF 1.3, Comments Chunk), but for those on markers: of each a time, a marker, and a text.
func comments(s *tags.Sheet, b []byte) {
	const fixed = 8
	for b = b[min(2, len(b)):]; len(b) >= fixed; {
		marker, n := be16(b[4:]), int(be16(b[6:]))
		b = b[fixed:]
		n = min(n, len(b))
		if marker == 0 {
			s.Add("COMMENT", tags.Guess(b[:n]))
		}
		b = b[min(n+n%2, len(b)):]
	}
}

// aiffChunks returns the chunks of an AIFF that say what a sheet does: its own texts and markers in front of the samples,
// and an ID3v2 tag behind them.
func aiffChunks(s tags.Sheet, f audio.Format) (before, after []chunk) {
	for _, pair := range aiffNames {
		if values := s.Values(pair[1]); len(values) > 0 {
			before = append(before, madeChunk(pair[0], []byte(strings.Join(values, "; "))))
		}
	}
	if len(s.Chapters) > 0 {
		before = append(before, madeChunk("MARK", writeMarkers(s.Chapters, f)))
	}
	if b := id3.WriteSheet(s); len(b) > 0 {
		after = append(after, madeChunk("ID3 ", b))
	}
	return before, after
}

// writeMarkers writes chapters as markers, numbered from 1.
func writeMarkers(chapters []tags.Chapter, f audio.Format) []byte {
	be := binary.BigEndian
	chapters = chapters[:min(len(chapters), math.MaxInt16)]
	b := be.AppendUint16(nil, uint16(len(chapters)))
	for i, c := range chapters {
		title := strings.ToValidUTF8(c.Title[:min(len(c.Title), math.MaxUint8)], "") // perhaps cut inside a letter
		b = be.AppendUint16(b, uint16(i+1))
		b = be.AppendUint32(b, place(f, c.Start))
		b = append(append(b, byte(len(title))), title...)
		b = append(b, make([]byte, 1-len(title)%2)...)
	}
	return b
}
