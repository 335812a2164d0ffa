package media

import (
	"bytes"
	"fmt"
	"io"
	"math"
	"math/bits"
	"slices"

	"github.com/go-audio/riff"

	"evenshelf/engine/audio"
)

// A WAV file is a row of chunks: four letters, a 32-bit length, a body, and a byte of padding if the
// length is odd. "fmt " tells how the samples look and should come before "data", which holds them; whatever
// else there is (bext, cue, cart, LIST, …) belongs to the recording and is carried over. Where 32 bits
// are too few, RF64 (EBU Tech 3306) and BW64 (ITU-R BS.2088) write 0xFFFFFFFF and keep the length in a
// chunk "ds64" at the front, low word first.
//
// go-audio/riff reads chunk headings and the common part of "fmt "; the rest of this file is about what
// real files do wrong: lengths never filled in, lengths that lie, padding forgotten.

const (
	tagPCM        = 1
	tagFloat      = 3
	tagExtensible = 0xFFFE

	unknown32 = math.MaxUint32 // a length that is in ds64, or was never filled in
	maxChunks = 10_000
)

// guidTail is what every sub-format GUID of a plain format tag ends with.
const guidTail = "\x00\x00\x00\x00\x10\x00\x80\x00\x00\xAA\x00\x38\x9B\x71"

// chunk is one chunk of a file: its letters and where its body lies, or what it is, if it is made here.
type chunk struct {
	id         string
	start, len int64
	made       []byte
}

// wavHeader is what a WAV file's chunks say, checked.
type wavHeader struct {
	tag       int // format tag, the sub-format's own behind EXTENSIBLE
	format    audio.Format
	container int // bytes a sample
	depth     int // bits that matter
	align     int // bytes a frame

	form   string  // "RIFF", "RF64" or "BW64"
	data   int64   // where the samples begin
	frames int64   // as promised; −1 if the header does not say
	before []chunk // other chunks, in front of the data
	after  []chunk // and behind it
	// unread says in words what there is behind the data that looks like sound but is not read; "" if nothing.
	unread string
}

// native reports whether the samples can be decoded here.
func (h *wavHeader) native() bool {
	return h.tag == tagPCM && unpackerFor(h.container, false) != nil ||
		h.tag == tagFloat && h.depth == 8*h.container && unpackerFor(h.container, true) != nil
}

// codec names the sample format as FFmpeg does.
func (h *wavHeader) codec() string {
	switch {
	case h.tag == tagFloat:
		return fmt.Sprintf("pcm_f%dle", 8*h.container)
	case h.container == 1:
		return "pcm_u8"
	default:
		return fmt.Sprintf("pcm_s%dle", 8*h.container)
	}
}

// parseWAV walks the chunks of a WAV file of so many bytes. It reads headings only and never trusts a
// length further than the file reaches. A file cut off inside its data is not an error here: reading
// will tell. For a stream whose end is not known, size is what is at hand, and the walk ends at "data".
func parseWAV(r io.ReaderAt, size int64) (*wavHeader, error) {
	w := wavWalk{r: r, size: size, dataLen: -1}
	form, riffLen, err := w.heading(0)
	if err != nil {
		return nil, err
	}
	w.riffLen, w.h.form = int64(riffLen), form
	w.wide = form == "RF64" || form == "BW64"
	at := int64(12)
	for n := 0; ; n++ {
		if n == maxChunks {
			return nil, &FormatError{at, "it has more chunks than any recording: the header is damaged"}
		}
		c, err := w.next(at)
		if err != nil {
			return nil, err
		}
		if c == nil || w.h.data > 0 && !letters([]byte(c.id)) {
			break
		}
		if at, err = w.take(c); err != nil {
			return nil, err
		}
	}
	switch {
	case w.h.data == 0 && !w.hasFmt:
		return nil, &FormatError{min(at, size), "the file ends before its header does"}
	case w.h.data == 0 && w.inPieces():
		return nil, &FormatError{min(at, size), "its sound is in pieces (a LIST of waves), which are not read here"}
	case w.h.data == 0:
		return nil, &FormatError{min(at, size), "it has no data chunk: the sound is missing"}
	case !w.hasFmt:
		return nil, &FormatError{w.h.data - 8, "its data has no format: the fmt chunk is missing"}
	}
	w.h.frames = -1
	if w.dataLen >= 0 {
		w.h.frames = w.dataLen / int64(w.h.align)
	}
	return &w.h, w.remains(at)
}

// remains notes what lies from an offset to the end of the file, if it belongs to no chunk. Zeros are padding.
func (w *wavWalk) remains(from int64) error {
	for at := from; w.size-from >= 8 && at < w.size; at += ahead {
		b, err := readAt(w.r, at, ahead)
		if err != nil {
			return err
		}
		if len(bytes.Trim(b, "\x00")) > 0 {
			w.h.unread = fmt.Sprintf("its data chunk ends %d bytes before the file does, and no other chunk begins there", w.size-from)
			return nil
		}
	}
	return nil
}

// inPieces reports whether there is a wave list, in which data and silence take turns (RIFF, 1991).
func (w *wavWalk) inPieces() bool {
	return slices.ContainsFunc(w.h.before, func(c chunk) bool {
		kind, _ := readAt(w.r, c.start, 4)
		return c.id == "LIST" && string(kind) == "wavl"
	})
}

// wavWalk is the state of one walk along the chunks.
type wavWalk struct {
	r       io.ReaderAt
	size    int64
	riffLen int64
	wide    bool             // RF64 or BW64
	sizes   map[string]int64 // from ds64
	hasFmt  bool
	dataLen int64 // bytes; −1 if nobody says
	h       wavHeader
}

// heading reads the letters and the 32-bit length at an offset.
func (w *wavWalk) heading(at int64) (string, uint32, error) {
	if at+8 > w.size {
		return "", 0, &FormatError{w.size, "the file ends before its header does"}
	}
	id, n, err := riff.New(io.NewSectionReader(w.r, at, 8)).IDnSize()
	return string(id[:]), n, err
}

// next returns the chunk whose heading is at an offset, or nil at the end of the file.
func (w *wavWalk) next(at int64) (*chunk, error) {
	if at+8 > w.size {
		return nil, nil
	}
	id, n, err := w.heading(at)
	if err != nil {
		return nil, err
	}
	c := &chunk{id: id, start: at + 8, len: int64(n)}
	if big, ok := w.sizes[id]; ok && w.wide && (n == unknown32 || n == 0 && id == "data") {
		c.len = big
	}
	return c, nil
}

// take records a chunk and returns where the next one begins.
func (w *wavWalk) take(c *chunk) (int64, error) {
	end := c.start + c.len
	switch {
	case c.id == "data" && w.h.data == 0:
		w.h.data = c.start
		if w.open(c) {
			return w.size, nil // to the end of the file, however long that is
		}
		w.dataLen = c.len
	case c.id == "data" && c.len > 0:
		w.h.unread = "it has a second data chunk, which is not read"
	case c.id == "fmt " && !w.hasFmt:
		if err := w.format(c); err != nil {
			return 0, err
		}
		w.hasFmt = true
	case c.id == "ds64" && w.wide && w.sizes == nil:
		if err := w.ds64(c); err != nil {
			return 0, err
		}
	case end > w.size && w.h.data == 0:
		return 0, &FormatError{c.start - 8, fmt.Sprintf("its %q chunk reaches past the end of the file", c.id)}
	case end > w.size: // torn: what there is of it
		w.h.after = append(w.h.after, chunk{id: c.id, start: c.start, len: w.size - c.start})
	case w.h.data == 0:
		w.h.before = append(w.h.before, *c)
	default:
		w.h.after = append(w.h.after, *c)
	}
	return padded(w.r, w.size, c.len, end), nil
}

// open reports whether a data chunk's length was never filled in, as in a stream or after a crash. A
// length of 0 is taken at its word only if the whole file's length was filled in and agrees. One that is just under
// 2 or 4 GiB, in a file that is shorter, is what programs write that cannot go back to fill it in.
func (w *wavWalk) open(c *chunk) bool {
	const under = 4096
	for _, top := range []int64{1 << 31, 1 << 32} {
		if c.start+c.len > w.size && c.len >= top-under && c.len <= top {
			return true
		}
	}
	if c.len == unknown32 {
		return true
	}
	if c.len != 0 || c.start >= w.size {
		return false
	}
	whole := w.riffLen + 8
	if big, ok := w.sizes["RIFF"]; ok && w.riffLen == unknown32 {
		whole = big + 8
	}
	return whole < w.size-1 || whole > w.size+1
}

// padded returns where the chunk begins that comes after one of so many bytes. After an odd length there is a byte of
// padding, but some programs forget it; the next letters give them away.
func padded(r io.ReaderAt, size, length, end int64) int64 {
	if length%2 == 0 || end+8 > size {
		return end + length%2
	}
	next, err := readAt(r, end, 5)
	if err == nil && len(next) == 5 && letters(next[:4]) && !letters(next[1:5]) {
		return end
	}
	return end + 1
}

func letters(b []byte) bool {
	for _, c := range b {
		if c < ' ' || c > '~' {
			return false
		}
	}
	return true
}

// ds64 reads the 64-bit lengths: RIFF, data, sample count, then a table of others.
func (w *wavWalk) ds64(c *chunk) error {
	b, err := readAt(w.r, c.start, int(min(c.len, 28+12*64)))
	if err != nil {
		return err
	}
	if len(b) < 28 {
		return &FormatError{c.start - 8, "its ds64 chunk is too short"}
	}
	w.sizes = map[string]int64{}
	set := func(id string, n uint64) {
		if n > 0 && n < math.MaxInt64/2 { // else it was never filled in
			w.sizes[id] = int64(n)
		}
	}
	set("RIFF", le64(b))
	set("data", le64(b[8:]))
	for n := le32(b[24:]); n > 0 && len(b) >= 28+12; n-- {
		set(string(b[28:32]), le64(b[32:]))
		b = b[12:]
	}
	return nil
}

// format reads and checks the "fmt " chunk.
func (w *wavWalk) format(c *chunk) error {
	b, err := readAt(w.r, c.start, int(min(c.len, 40)))
	if err != nil {
		return err
	}
	if len(b) < 16 {
		return &FormatError{c.start - 8, "its fmt chunk is too short"}
	}
	var p riff.Parser
	common := riff.Chunk{ID: riff.FmtID, Size: 16, R: io.NewSectionReader(w.r, c.start, 16)}
	if err := common.DecodeWavHeader(&p); err != nil {
		return err
	}
	h := &w.h
	h.tag, h.align, h.depth = int(p.WavAudioFormat), int(p.BlockAlign), int(p.BitsPerSample)
	h.format = audio.Format{Rate: int(min(p.SampleRate, math.MaxInt32)), Layout: audio.UsualLayout(int(p.NumChannels))}
	if err := checkFormat(h.format, c.start); err != nil {
		return err
	}
	channels := h.format.Layout.Channels
	if h.tag == tagExtensible {
		if len(b) < 40 {
			return &FormatError{c.start, "its fmt chunk says it is extended but is too short for that"}
		}
		if string(b[26:40]) == guidTail {
			h.tag = int(le16(b[24:]))
		}
		h.format.Layout = layoutOf(channels, le32(b[20:]))
		if valid := int(le16(b[18:])); valid > 0 && valid <= h.depth && h.tag == tagPCM {
			h.depth = valid
		}
	}
	if h.tag != tagPCM && h.tag != tagFloat {
		if h.align == 0 {
			h.align = 1 // only FFmpeg will read this
		}
		return nil
	}
	h.container = h.align / channels
	need := (int(p.BitsPerSample) + 7) / 8
	if h.align%channels != 0 || h.container < need || need == 0 || h.container > 8 {
		return &FormatError{c.start, fmt.Sprintf("its header contradicts itself: %d channels of %d bits in frames of %d bytes", channels, p.BitsPerSample, h.align)}
	}
	return nil
}

// layoutOf makes a layout of a WAVE_FORMAT_EXTENSIBLE channel mask. Mono and stereo are what they are
// even with no mask; in general a mask of 0 says that positions are not known. Bits past the channel
// count are ignored, as the format demands; too few bits leave positions unknown.
func layoutOf(channels int, mask uint32) audio.Layout {
	mask &= 1<<18 - 1
	for bits.OnesCount32(mask) > channels {
		mask &^= 1 << (bits.Len32(mask) - 1)
	}
	switch {
	case bits.OnesCount32(mask) == channels:
		return audio.Layout{Channels: channels, Mask: audio.Speaker(mask)}
	case channels <= 2:
		return audio.UsualLayout(channels)
	default:
		return audio.Layout{Channels: channels}
	}
}
