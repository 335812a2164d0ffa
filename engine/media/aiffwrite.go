package media

import (
	"encoding/binary"
	"fmt"
	"io"
	"math"
	"os"
	"strings"

	"evenshelf/engine/audio"
)

// aiffWritten are the codings in which AIFF is written, by FFmpeg's names: those with the high byte first as AIFF, or as
// AIFC if the source is one; the others, which AIFF has no word for, as AIFC always.
var aiffWritten = map[string]struct {
	coding string
	bits   int
}{
	"pcm_s16be": {"NONE", 16}, "pcm_s24be": {"NONE", 24}, "pcm_s32be": {"NONE", 32},
	"pcm_s16le": {"sowt", 16}, "pcm_s24le": {"sowt", 24}, "pcm_s32le": {"sowt", 32},
	"pcm_f32be": {"fl32", 32}, "pcm_f64be": {"fl64", 64},
}

// writesAIFF reports whether a spec can be written as AIFF.
func writesAIFF(s Spec) bool {
	w, known := aiffWritten[s.Codec]
	return known && w.bits == s.BitDepth && aiffCodings[w.coding].float == s.Float
}

// aiffSpec is the spec of an AIFF of the same kind as a recording, or of a WAV where AIFF has no room. What is not PCM
// is written with 16 bits.
func aiffSpec(info Info) (s Spec, note string) {
	s = Spec{Container: "aiff", BitDepth: wholeDepth(info.BitDepth), Float: info.Float, Extension: ".aiff"}
	kind, order := "s", "be"
	switch {
	case info.Float:
		kind, s.BitDepth = "f", info.BitDepth
	case info.BitDepth == 0:
		note = fmt.Sprintf("AIFF with %s is delivered as 16-bit AIFF", info.Codec)
	case strings.HasSuffix(info.Codec, "le"):
		order = "le"
	}
	s.Codec = fmt.Sprintf("pcm_%s%d%s", kind, s.BitDepth, order)
	if info.Frames*int64(info.Format.Layout.Channels)*int64(s.BitDepth/8) > aiffMost {
		return wavSpec(s.BitDepth, s.Float), "AIFF has no room for more than 4 GiB"
	}
	return s, note
}

// aiffMost is how many bytes of samples are sure to fit: 4 GiB less what else there may be.
const aiffMost = math.MaxUint32 - mostMended

// aiffWriter writes AIFF and AIFC.
type aiffWriter struct {
	f        *os.File
	pack     *packer
	tags     *tagSource
	spec     Spec
	after    []chunk // of the source, to come behind the samples
	little   bool
	frames   int64
	framesAt int64 // where COMM's frame count is
	dataAt   int64 // where the samples begin
}

func newAIFFWriter(f *os.File, spec Spec, tags *tagSource) (*aiffWriter, error) {
	coding := aiffWritten[spec.Codec].coding
	w := &aiffWriter{f: f, pack: newPacker(spec), tags: tags, spec: spec, little: aiffCodings[coding].little}

	common := binary.BigEndian.AppendUint16(nil, uint16(spec.Format.Layout.Channels))
	common = binary.BigEndian.AppendUint32(common, 0) // frames
	common = binary.BigEndian.AppendUint16(common, uint16(spec.BitDepth))
	common = append(common, extended(spec.Format.Rate)...)
	head := "FORM\x00\x00\x00\x00AIFF"
	if coding != "NONE" || tags != nil && tags.aiff != nil && tags.aiff.form == "AIFC" {
		head = "FORM\x00\x00\x00\x00AIFCFVER\x00\x00\x00\x04\xA2\x80\x51\x40" // the only version there is
		common = append(common, coding+"\x00\x00"...)                         // a name of no letters, padded
	}
	w.framesAt = int64(len(head)) + 8 + 2
	head += string(aiffHeading("COMM", int64(len(common)))) + string(common)
	if _, err := io.WriteString(f, head); err != nil {
		return nil, err
	}
	before, after := tags.chunks(spec)
	if err := w.copyChunks(before); err != nil {
		return nil, err
	}
	w.after = after
	// Offset and block size are 0: the samples begin at once.
	if _, err := f.Write(append(aiffHeading("SSND", 8), make([]byte, 8)...)); err != nil {
		return nil, err
	}
	at, err := f.Seek(0, io.SeekCurrent)
	w.dataAt = at
	return w, err
}

func aiffHeading(id string, length int64) []byte {
	return binary.BigEndian.AppendUint32([]byte(id), uint32(length))
}

func (w *aiffWriter) write(src audio.Block) error {
	w.frames += int64(src.Frames())
	b := w.pack.pack(src)
	if !w.little {
		turn(b, w.spec.BitDepth/8)
	}
	_, err := w.f.Write(b)
	return err
}

// copyChunks appends chunks of the source.
func (w *aiffWriter) copyChunks(list []chunk) error {
	for _, c := range list {
		body, length, err := w.tags.body(c, w.spec)
		if err != nil {
			return err
		}
		if _, err := w.f.Write(aiffHeading(c.id, length)); err != nil {
			return err
		}
		if _, err := io.CopyN(w.f, body, length); err != nil {
			return err
		}
		if _, err := w.f.Write(make([]byte, length%2)); err != nil {
			return err
		}
	}
	return nil
}

func (w *aiffWriter) finish() error {
	dataLen := w.frames * int64(w.spec.BitDepth/8*w.spec.Format.Layout.Channels)
	if _, err := w.f.Write(make([]byte, dataLen%2)); err != nil {
		return err
	}
	if err := w.copyChunks(w.after); err != nil {
		return err
	}
	end, err := w.f.Seek(0, io.SeekCurrent)
	if err != nil {
		return err
	}
	if end-8 > math.MaxUint32 {
		return fmt.Errorf("%w: AIFF has no room for more than 4 GiB", ErrUnsupported)
	}
	for at, n := range map[int64]int64{4: end - 8, w.framesAt: w.frames, w.dataAt - 12: 8 + dataLen} {
		if _, err := w.f.WriteAt(binary.BigEndian.AppendUint32(nil, uint32(n)), at); err != nil {
			return err
		}
	}
	return nil
}

func (w *aiffWriter) abort() {}
