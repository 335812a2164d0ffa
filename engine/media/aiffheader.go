package media

import (
	"encoding/binary"
	"fmt"
	"io"
	"math"

	"evenshelf/engine/audio"
)

// An AIFF file (Audio Interchange File Format 1.3, 1989) is a row of chunks like a WAV, with all numbers high byte
// first: COMM tells how the samples look, SSND holds them, in any order; names, markers, comments, ID3 tags and others
// belong to the recording. AIFC (1991 draft) is the same with a word for the coding in COMM.

// aiffCoding is how an AIFC file keeps its samples.
type aiffCoding struct {
	width  int // bytes a sample; 0: as many as the bits need
	float  bool
	little bool // low byte first
}

// aiffCodings are the codings read here, by the word in COMM. Others are left to FFmpeg.
var aiffCodings = map[string]aiffCoding{
	"NONE": {}, "twos": {}, "sowt": {little: true}, "in24": {width: 3}, "in32": {width: 4},
	"fl32": {width: 4, float: true}, "FL32": {width: 4, float: true}, "fl64": {width: 8, float: true}, "FL64": {width: 8, float: true},
}

// aiffHeader is what an AIFF file's chunks say, checked.
type aiffHeader struct {
	form   string // "AIFF" or "AIFC"
	coding string // "NONE" where there is no word for it
	format audio.Format
	depth  int // bits that matter
	width  int // bytes a sample; 0 if the coding is not read here

	data   int64   // where the samples begin
	frames int64   // as promised; −1 if the header does not say
	before []chunk // other chunks, in front of the samples
	after  []chunk // and behind them
}

func (h *aiffHeader) native() bool { return h.width > 0 }
func (h *aiffHeader) align() int   { return h.width * h.format.Layout.Channels }

// codec names the sample format as FFmpeg does.
func (h *aiffHeader) codec() string {
	c, order := aiffCodings[h.coding], "be"
	switch {
	case c.float:
		return fmt.Sprintf("pcm_f%dbe", 8*h.width)
	case h.width == 1:
		return "pcm_s8"
	case c.little:
		order = "le"
	}
	return fmt.Sprintf("pcm_s%d%s", 8*h.width, order)
}

// parseAIFF walks the chunks of an AIFF file of so many bytes. It reads headings only and never trusts a length further
// than the file reaches. A file cut off inside its samples is not an error here: reading will tell.
func parseAIFF(r io.ReaderAt, size int64) (*aiffHeader, error) {
	head, err := readAt(r, 0, 12)
	if err != nil {
		return nil, err
	}
	if len(head) < 12 {
		return nil, &FormatError{size, "the file ends before its header does"}
	}
	w := aiffWalk{r: r, size: size, h: aiffHeader{form: string(head[8:])}}
	at := int64(12)
	for n := 0; at+8 <= size; n++ {
		if n == maxChunks {
			return nil, &FormatError{at, "it has more chunks than any recording: the header is damaged"}
		}
		b, err := readAt(r, at, 8)
		if err != nil {
			return nil, err
		}
		if w.sound != nil && !letters(b[:4]) {
			break
		}
		c := &chunk{id: string(b[:4]), start: at + 8, len: int64(be32(b[4:]))}
		if at, err = w.take(c); err != nil {
			return nil, err
		}
	}
	switch {
	case !w.hasCommon:
		return nil, &FormatError{min(at, size), "it has no COMM chunk: the format of its sound is not known"}
	case w.sound == nil && w.frames > 0:
		return nil, &FormatError{min(at, size), "it has no SSND chunk: the sound is missing"}
	}
	return &w.h, w.measure()
}

// aiffWalk is the state of one walk along the chunks.
type aiffWalk struct {
	r         io.ReaderAt
	size      int64
	hasCommon bool
	frames    int64  // by COMM
	sound     *chunk // SSND
	h         aiffHeader
}

// take records a chunk and returns where the next one begins.
func (w *aiffWalk) take(c *chunk) (int64, error) {
	end := c.start + c.len
	switch {
	case c.id == "SSND" && w.sound == nil:
		w.sound = c
		if c.len < 8 || end > w.size {
			return w.size, nil // its length was never filled in, or the file is cut off
		}
	case c.id == "COMM" && !w.hasCommon:
		if err := w.common(c); err != nil {
			return 0, err
		}
		w.hasCommon = true
	case end > w.size && w.sound == nil:
		return 0, &FormatError{c.start - 8, fmt.Sprintf("its %q chunk reaches past the end of the file", c.id)}
	case end > w.size: // torn: what there is of it
		w.h.after = append(w.h.after, chunk{id: c.id, start: c.start, len: w.size - c.start})
	case w.sound == nil:
		w.h.before = append(w.h.before, *c)
	default:
		w.h.after = append(w.h.after, *c)
	}
	return padded(w.r, w.size, c.len, end), nil
}

// common reads and checks the COMM chunk.
func (w *aiffWalk) common(c *chunk) error {
	b, err := readAt(w.r, c.start, int(min(c.len, 22)))
	if err != nil {
		return err
	}
	if len(b) < 18 {
		return &FormatError{c.start - 8, "its COMM chunk is too short"}
	}
	h := &w.h
	w.frames, h.depth, h.coding = int64(be32(b[2:])), int(be16(b[6:])), "NONE"
	h.format = audio.Format{Rate: extendedInt(b[8:18]), Layout: audio.UsualLayout(int(be16(b)))}
	if err := checkFormat(h.format, c.start); err != nil {
		return err
	}
	if h.form == "AIFC" && len(b) == 22 {
		h.coding = string(b[18:22])
	}
	coding, known := aiffCodings[h.coding]
	if !known {
		return nil
	}
	h.width = coding.width
	if h.width == 0 {
		h.width = (h.depth + 7) / 8
	}
	if coding.float {
		h.depth = 8 * h.width
	}
	if h.depth < 1 || h.depth > 8*h.width || unpackerFor(h.width, coding.float) == nil {
		return &FormatError{c.start, fmt.Sprintf("its header contradicts itself: samples of %d bits in %q", h.depth, h.coding)}
	}
	return nil
}

// measure finds where the samples begin and how many there are: as many as SSND has room for, which is what others
// play, unless it is filled up to whole blocks; as COMM says where SSND does not.
func (w *aiffWalk) measure() error {
	h := &w.h
	if w.sound == nil { // a recording of no frames may do without
		h.data = w.size
		return nil
	}
	b, err := readAt(w.r, w.sound.start, 8)
	if err != nil {
		return err
	}
	if len(b) < 8 {
		return &FormatError{w.sound.start, "its SSND chunk is too short"}
	}
	offset := int64(be32(b))
	h.data = w.sound.start + 8 + offset
	if offset > 0 && h.data > w.size {
		return &FormatError{w.sound.start, "its samples would begin past the end of the file"}
	}
	if !h.native() {
		return nil
	}
	room, whole := (w.sound.len-8-offset)/int64(h.align()), w.sound.start+w.sound.len <= w.size
	switch {
	case whole && w.sound.len >= 8+offset && (be32(b[4:]) == 0 || w.frames == 0 || w.frames > room):
		h.frames = room
	case !whole && w.sound.len >= neverFilled:
		h.frames = -1
	case w.frames > 0:
		h.frames = w.frames
	case w.sound.len > 8+offset:
		h.frames = room
	default:
		h.frames = -1
	}
	return nil
}

// neverFilled is a length of 127 × 2^24 bytes, from which on programs that cannot go back to fill it in write one.
const neverFilled = 0x7F000000

// extendedInt is the 80-bit floating point number of IEEE 754 in b, rounded to a whole one; 0 if it is none that could
// be a sampling rate.
func extendedInt(b []byte) int {
	const bias, point = 16383, 63
	v := math.Ldexp(float64(be64(b[2:])), int(be16(b))-bias-point)
	if !(v < math.MaxInt32) {
		return 0
	}
	return int(math.Round(v))
}

// extended is a whole number as an 80-bit floating point number: sign and exponent, then the mantissa with its highest
// bit set.
func extended(n int) []byte {
	const bias, point = 16383, 63
	mantissa, shift := uint64(n), 0
	for ; mantissa>>point == 0 && shift < point; shift++ {
		mantissa <<= 1
	}
	return binary.BigEndian.AppendUint64(binary.BigEndian.AppendUint16(nil, uint16(bias+point-shift)), mantissa)
}

var (
	be16 = binary.BigEndian.Uint16
	be32 = binary.BigEndian.Uint32
	be64 = binary.BigEndian.Uint64
)
