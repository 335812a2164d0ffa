package media

import (
	"bytes"
	"encoding/binary"
	"math"
	"slices"
	"strings"
	"time"

	"evenshelf/engine/audio"
	"evenshelf/engine/tags"
	"evenshelf/engine/tags/id3"
)

// infoNames are the names of a Sheet's fields for the entries of a WAV's INFO list (RIFF, 1991, 2-14; those of album and
// track by habit). What a name stands for twice, its first line is the one that is written.
var infoNames = [][2]string{
	{"INAM", "TITLE"}, {"IART", "ARTIST"}, {"IPRD", "ALBUM"}, {"ITRK", "TRACKNUMBER"}, {"IPRT", "TRACKNUMBER"}, {"ICRD", "DATE"},
	{"IGNR", "GENRE"}, {"ICMT", "COMMENT"}, {"ICOP", "COPYRIGHT"}, {"IMUS", "COMPOSER"}, {"IWRI", "LYRICIST"},
	{"IENG", "ENGINEER"}, {"IPRO", "PRODUCER"}, {"ITCH", "ENCODEDBY"}, {"ILNG", "LANGUAGE"}, {"IMED", "MEDIA"},
	{"IKEY", "KEYWORDS"}, {"ISBJ", "SUBJECT"}, {"ISRC", "SOURCE"}, {"IARL", "ARCHIVELOCATION"}, {"ICMS", "COMMISSIONED"},
}

// infoLeftOut are about the file: the program that wrote it, and when its first frame was on tape.
var infoLeftOut = []string{"ISFT", "ISMP"}

// wavSheet reads a WAV's ID3v2 tag, its INFO list for names that are not in there, and cart and bext for those that are in
// neither. Cue points are its chapters, unless the ID3v2 tag has some.
func (t *tagSource) wavSheet() (s tags.Sheet, ok bool) {
	chunks := slices.Concat(t.wav.before, t.wav.after)
	var info, broadcast tags.Sheet
	var cues cueSheet
	for _, c := range chunks {
		b, known := t.wordsOf(c)
		switch {
		case !known:
		case (c.id == "id3 " || c.id == "ID3 ") && len(s.Fields) == 0: // of several, the first that says something
			s.Merge(id3.ReadSheet(b, nil))
		case c.id == "LIST" && bytes.HasPrefix(b, []byte("INFO")):
			readInfo(&info, b[4:])
		case c.id == "LIST" && bytes.HasPrefix(b, []byte("adtl")):
			cues.labels(b[4:])
		case c.id == "cue ":
			cues.points(b)
		case c.id == "cart":
			broadcast.Merge(cartSheet(b))
		case c.id == "bext":
			broadcast.Merge(bextSheet(b))
		}
	}
	s.Merge(info)
	s.Merge(broadcast)
	s.Merge(tags.Sheet{Chapters: cues.chapters(t.wav.format, t.wav.frames)})
	return s, true
}

// withWords are the chunks a sheet is read from.
var withWords = []string{"id3 ", "ID3 ", "LIST", "cue ", "cart", "bext", "NAME", "AUTH", "(c) ", "ANNO", "COMT", "MARK"}

// wordsOf reads a chunk a sheet is made from. One that is larger than any such, or cannot be read, says nothing.
func (t *tagSource) wordsOf(c chunk) (b []byte, ok bool) {
	if !slices.Contains(withWords, c.id) || c.len > id3.MaxLength {
		return nil, false
	}
	b, err := readAt(t.f, c.start, int(c.len))
	return b, err == nil
}

// maxPieces is how many chunks of a list are read, and how many names of entries in INFO lists.
const maxPieces = 5000

// pieces calls take for every chunk in the body of a list.
func pieces(b []byte, take func(id string, body []byte)) {
	for n := 0; len(b) >= 8 && n < maxPieces; n++ {
		id, n := string(b[:4]), int64(le32(b[4:]))
		b = b[8:]
		n = min(n, int64(len(b)))
		take(id, b[:n])
		b = b[min(n+n%2, int64(len(b))):]
	}
}

// readInfo adds the entries of an INFO list.
func readInfo(s *tags.Sheet, list []byte) {
	names := map[string]string{}
	for _, pair := range infoNames {
		names[pair[0]] = pair[1]
	}
	pieces(list, func(id string, body []byte) {
		name, value := names[id], tags.Guess(body)
		if name == "" {
			name = strings.TrimSpace(id)
		}
		switch {
		case slices.Contains(infoLeftOut, id) || !letters([]byte(id)) || len(s.Fields) >= maxPieces:
		case name == "TRACKNUMBER":
			s.AddNumber(name, "TRACKTOTAL", value)
		default:
			s.Add(name, value)
		}
	})
}

// cartSheet reads title and artist out of a cart chunk (AES46).
func cartSheet(b []byte) (s tags.Sheet) {
	if len(b) >= 132 {
		s.Add("TITLE", tags.Guess(b[4:68]))
		s.Add("ARTIST", tags.Guess(b[68:132]))
	}
	return s
}

// bextSheet reads what a bext chunk says about the recording (EBU Tech 3285); its UMID, time reference, loudness and coding
// history are about the file.
func bextSheet(b []byte) (s tags.Sheet) {
	if len(b) >= bextVersion {
		s.Add("DESCRIPTION", tags.Guess(b[:256]))
		s.Add("ORIGINATOR", tags.Guess(b[256:288]))
		s.Add("ORIGINATOR_REFERENCE", tags.Guess(b[288:320]))
		s.Add("DATE", tags.Guess(b[320:330]))
	}
	return s
}

// cueSheet gathers the cue points of a WAV and what is said about them.
type cueSheet struct {
	ids     []uint32
	at      map[uint32]uint32 // in frames
	title   map[uint32]string
	lengths map[uint32]uint32 // in frames
}

// points reads a cue chunk (RIFF, 1991, 3-5): of each point its number and its place in frames.
func (c *cueSheet) points(b []byte) {
	const one = 24
	if len(b) < 4 {
		return
	}
	if c.at == nil {
		c.at = map[uint32]uint32{}
	}
	for b = b[4:]; len(b) >= one && len(c.ids) < tags.Most; b = b[one:] {
		id := le32(b)
		if _, twice := c.at[id]; !twice {
			c.ids = append(c.ids, id)
		}
		c.at[id] = le32(b[20:])
	}
}

// labels reads the names of points, or notes where there is no name, and the lengths that some have.
func (c *cueSheet) labels(list []byte) {
	if c.title == nil {
		c.title, c.lengths = map[uint32]string{}, map[uint32]uint32{}
	}
	pieces(list, func(id string, b []byte) {
		if len(b) < 4 {
			return
		}
		point := le32(b)
		switch {
		case id == "labl", id == "note" && c.title[point] == "":
			c.title[point] = tags.Guess(b[4:])
		case id == "ltxt" && len(b) >= 8:
			c.lengths[point] = le32(b[4:])
		}
	})
}

// chapters are the points in their order. One that has no length ends where the next begins, the last with the sound.
func (c *cueSheet) chapters(f audio.Format, frames int64) (list []tags.Chapter) {
	for _, id := range c.ids {
		ch := tags.Chapter{Start: duration(f, int64(c.at[id])), Title: c.title[id]}
		if n := c.lengths[id]; n > 0 {
			ch.End = duration(f, int64(c.at[id])+int64(n))
		}
		list = append(list, ch)
	}
	return withEnds(list, duration(f, frames))
}

// withEnds puts chapters in order and gives those an end that have none.
func withEnds(list []tags.Chapter, whole time.Duration) []tags.Chapter {
	s := tags.Sheet{Chapters: list}
	s.Settle()
	for i := range list {
		next := whole
		if i+1 < len(list) {
			next = list[i+1].Start
		}
		if list[i].End == 0 && next > list[i].Start {
			list[i].End = next
		}
	}
	return list
}

// duration is how long so many frames take.
func duration(f audio.Format, frames int64) time.Duration {
	return time.Duration(math.Round(f.Seconds(frames) * float64(time.Second)))
}

// place is the frame at a time, as far as 32 bits reach.
func place(f audio.Format, at time.Duration) uint32 {
	return uint32(min(math.Round(at.Seconds()*float64(f.Rate)), math.MaxUint32))
}

// wavChunks returns the chunks of a WAV that say what a sheet does: an INFO list in front of the samples, for every
// program, and behind them cue points with their names and an ID3v2 tag, for all the list has no names for.
func wavChunks(s tags.Sheet, f audio.Format) (before, after []chunk) {
	if b := writeInfo(s); len(b) > 0 {
		before = append(before, madeChunk("LIST", append([]byte("INFO"), b...)))
	}
	if len(s.Chapters) > 0 {
		cue, names := writeCues(s.Chapters, f)
		after = append(after, madeChunk("cue ", cue), madeChunk("LIST", append([]byte("adtl"), names...)))
	}
	s.Chapters = nil // readers that know both would have each twice
	if b := id3.WriteSheet(s); len(b) > 0 {
		after = append(after, madeChunk("id3 ", b))
	}
	return before, after
}

func madeChunk(id string, body []byte) chunk {
	return chunk{id: id, len: int64(len(body)), made: body}
}

// writeInfo writes the entries of an INFO list.
func writeInfo(s tags.Sheet) (list []byte) {
	written := map[string]bool{}
	for _, pair := range infoNames {
		values := s.Values(pair[1])
		if written[pair[1]] || len(values) == 0 {
			continue
		}
		written[pair[1]] = true
		value := strings.Join(values, "; ")
		if total := s.Values("TRACKTOTAL"); pair[1] == "TRACKNUMBER" && len(values) == 1 && len(total) == 1 {
			value += "/" + total[0]
		}
		list = appendPiece(list, pair[0], []byte(value+"\x00"))
	}
	return list
}

// appendPiece appends a chunk of a list.
func appendPiece(list []byte, id string, body []byte) []byte {
	list = binary.LittleEndian.AppendUint32(append(list, id...), uint32(len(body)))
	list = append(list, body...)
	return append(list, make([]byte, len(body)%2)...)
}

// writeCues writes chapters as cue points, numbered from 1, and the list of their names and lengths.
func writeCues(chapters []tags.Chapter, f audio.Format) (cue, names []byte) {
	le := binary.LittleEndian
	cue = le.AppendUint32(nil, uint32(len(chapters)))
	var lengths []byte
	for i, c := range chapters {
		id, at := le.AppendUint32(nil, uint32(i+1)), place(f, c.Start)
		cue = le.AppendUint32(append(cue, id...), at)
		cue = append(append(cue, "data"...), make([]byte, 8)...) // one chunk of samples, in one block
		cue = le.AppendUint32(cue, at)
		if c.Title != "" {
			names = appendPiece(names, "labl", append(slices.Clone(id), c.Title+"\x00"...))
		}
		if c.End > c.Start {
			region := le.AppendUint32(slices.Clone(id), place(f, c.End)-at)
			lengths = appendPiece(lengths, "ltxt", append(append(region, "rgn "...), make([]byte, 8)...)) // no country, language, code page
		}
	}
	return cue, append(names, lengths...) // FFmpeg reads no name behind a length
}
