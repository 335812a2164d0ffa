package media

import (
	"bytes"
	"encoding/binary"
	"io"
	"slices"

	"evenshelf/engine/tags/id3"
)

// Chunks are carried over byte for byte, in their order and on their side of the samples. Two kinds are not: those that
// describe the samples themselves, of which a new file has its own or none, and those that state a level, a length of
// a word or how the sound was made, which are mended.

// ownChunks describe the samples. PEAK and levl hold peaks and go stale with any gain.
var ownChunks = []string{"fmt ", "data", "fact", "ds64", "JUNK", "junk", "PEAK", "levl", "COMM", "SSND", "FVER"}

// mend makes a chunk's body true of a levelled copy.
type mend func(body []byte, src *tagSource, spec Spec) []byte

var mends = map[string]mend{
	"bext": mendBext,
	"cart": mendCart,
	"axml": mendXML, // an audio definition model (ITU-R BS.2076)
	"iXML": mendXML,
	"id3 ": mendID3, // in WAV, also in capitals
	"ID3 ": mendID3, // in AIFF
}

// mostMended is the largest chunk that is read whole to be mended; a larger one is carried as it is.
const mostMended = 64 << 20

// chunks returns the chunks to carry over in front of the samples and behind them: the source's own, if it is of the same
// container as the copy, else those that say what its tags do.
func (t *tagSource) chunks(spec Spec) (before, after []chunk) {
	if t != nil && t.kind.container != spec.Container {
		if spec.Container == "wav" {
			return wavChunks(t.said, spec.Format)
		}
		return aiffChunks(t.said, spec.Format)
	}
	switch {
	case t == nil:
		return nil, nil
	case t.wav != nil:
		before, after = t.wav.before, t.wav.after
	case t.aiff != nil:
		before, after = t.aiff.before, t.aiff.after
	}
	own := func(c chunk) bool { return slices.Contains(ownChunks, c.id) }
	return slices.DeleteFunc(slices.Clone(before), own), slices.DeleteFunc(slices.Clone(after), own)
}

// body returns a chunk's content for the copy, and its length.
func (t *tagSource) body(c chunk, spec Spec) (io.Reader, int64, error) {
	if c.made != nil {
		return bytes.NewReader(c.made), c.len, nil
	}
	repair := mends[c.id]
	if repair == nil || c.len > mostMended {
		return io.NewSectionReader(t.f, c.start, c.len), c.len, nil
	}
	b, err := readAt(t.f, c.start, int(c.len))
	if err != nil {
		return nil, 0, err
	}
	b = repair(b, t, spec)
	return bytes.NewReader(b), int64(len(b)), nil
}

// mendID3 takes the gains out of an ID3v2 tag. What is behind it stays.
func mendID3(b []byte, _ *tagSource, _ Spec) []byte {
	n := id3.HeadLength(b)
	if n == 0 || n > int64(len(b)) {
		return b
	}
	front, _ := id3.Levelled(b[:n], nil)
	return append(front, b[n:]...)
}

// mendCart keeps the level reference of a cart chunk (AES46) true: it is the sample value of 0 dB. The one in use is
// full scale, which is another number where the word length changes. Timers count samples and stay right.
func mendCart(b []byte, src *tagSource, spec Spec) []byte {
	const reference = 680
	if src.wav == nil || spec.Float || len(b) < reference+4 {
		return b
	}
	from, to := src.wav.depth, spec.BitDepth
	if from != to && from > 0 && from < 32 && to < 32 && le32(b[reference:]) == 1<<(from-1) {
		binary.LittleEndian.PutUint32(b[reference:], 1<<(to-1))
	}
	return b
}

// staleXML are the elements that state a loudness: in the audio definition model, and in iXML, beside or for the
// figures of bext (names of iXML from memory).
var staleXML = []string{
	"loudnessMetadata", "LOUDNESS", "BWF_LOUDNESS_VALUE", "BWF_LOUDNESS_RANGE", "BWF_MAX_TRUE_PEAK_LEVEL",
	"BWF_MAX_MOMENTARY_LOUDNESS", "BWF_MAX_SHORT_TERM_LOUDNESS",
}

// mendXML blanks what states a loudness out: all of it is optional, and spaces keep every other byte in its place.
func mendXML(b []byte, _ *tagSource, _ Spec) []byte {
	for _, name := range staleXML {
		for at := 0; ; {
			start, inner := nextTag(b, at, "<", name)
			if start < 0 {
				break
			}
			end := inner
			if b[inner-2] != '/' {
				if _, end = nextTag(b, inner, "</", name); end < 0 {
					break // nor does any later one end
				}
			}
			copy(b[start:end], bytes.Repeat([]byte(" "), end-start))
			at = end
		}
	}
	return b
}

// nextTag finds the next tag of a name from a place on, whatever its prefix of a namespace: where it begins and where it
// has ended; −1 if there is none. Every byte is looked at once or twice, however hostile they are.
func nextTag(b []byte, at int, opening, name string) (start, end int) {
	for {
		i := bytes.Index(b[at:], []byte(name))
		if i < 0 {
			return -1, -1
		}
		i, at = at+i, at+i+len(name)
		start = bytes.LastIndexByte(b[max(0, i-mostPrefix):i], '<')
		if start < 0 || at == len(b) || !bytes.ContainsRune([]byte(" \t\r\n/>"), rune(b[at])) {
			continue
		}
		start += max(0, i-mostPrefix)
		prefix, found := bytes.CutPrefix(b[start:i], []byte(opening))
		if !found || len(prefix) > 0 && (prefix[len(prefix)-1] != ':' || bytes.ContainsAny(prefix, " \t\r\n/>\"'=")) {
			continue
		}
		bracket := bytes.IndexByte(b[at:], '>')
		if bracket < 0 {
			return -1, -1
		}
		return start, at + bracket + 1
	}
}

// mostPrefix is how many bytes of a tag may stand in front of its name.
const mostPrefix = 64
