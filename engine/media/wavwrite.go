package media

import (
	"encoding/binary"
	"fmt"
	"io"
	"math"
	"os"

	"github.com/go-audio/wav"

	"evenshelf/engine/audio"
)

// wavWriter writes PCM and float WAV, and RF64 or BW64 when the file passes 4 GiB. The plan is EBU Tech 3306's:
// a JUNK chunk in front reserves the room of the ds64 chunk and turns into it when that is needed.
//
// go-audio/wav's encoder carries the chunks and counts the bytes. Its own header knows neither
// EXTENSIBLE nor 64-bit sizes, and its own sample loop encodes one sample at a time, so header, packing
// and the final sizes are done here.
type wavWriter struct {
	f      *os.File
	enc    *wav.Encoder
	pack   *packer
	tags   *tagSource
	spec   Spec
	after  []chunk // of the source, to come behind the samples
	wide   string  // the form that a file with 64-bit sizes has
	align  int
	frames int64
	dataAt int64 // where the samples begin
	factAt int64 // where the fact chunk's frame count is; 0 if there is none
	limit  int64 // the largest 32-bit size; lower only in tests
}

const ds64Len = 28 // the fixed part; no table is needed for one data chunk

func newWAVWriter(f *os.File, spec Spec, tags *tagSource) (*wavWriter, error) {
	channels := spec.Format.Layout.Channels
	// The encoder would reserve a minute of sound: with no channels it reserves nothing. It would bring a file to the
	// disk when it is done: what it is handed is not one, because sink does that.
	enc := wav.NewEncoder(struct{ io.WriteSeeker }{f}, spec.Format.Rate, spec.BitDepth, 0, tagPCM)
	enc.NumChans = channels
	w := &wavWriter{
		f: f, enc: enc, pack: newPacker(spec), align: channels * spec.BitDepth / 8,
		limit: math.MaxUint32, tags: tags, spec: spec, wide: "RF64",
	}
	// Audio definition models are at home in BW64 (ITU-R BS.2088), whose readers go by its name: one stays one, however
	// short. Anything else past 4 GiB becomes RF64, which more programs read, and what is shorter a plain WAV, which all do.
	if tags != nil && tags.wav != nil && tags.wav.form == "BW64" {
		w.wide, w.limit = "BW64", 0
	}
	head := append([]byte("RIFF\xFF\xFF\xFF\xFFWAVEJUNK"), binary.LittleEndian.AppendUint32(nil, ds64Len)...)
	head = append(head, make([]byte, ds64Len)...)
	head = append(head, fmtChunk(spec)...)
	if spec.Float {
		head = append(head, "fact\x04\x00\x00\x00\xFF\xFF\xFF\xFF"...)
		w.factAt = int64(len(head)) - 4
	}
	if err := enc.AddLE(head); err != nil {
		return nil, err
	}
	before, after := tags.chunks(spec)
	if err := w.copyChunks(before); err != nil {
		return nil, err
	}
	w.after, w.dataAt = after, int64(enc.WrittenBytes)+8
	return w, enc.WriteFrame([]byte{}) // opens the data chunk
}

// fmtChunk returns the whole "fmt " chunk. EXTENSIBLE is used where the plain form does not say enough:
// for more than two channels, unusual positions, or integers of more than 16 bits.
func fmtChunk(spec Spec) []byte {
	le := binary.LittleEndian
	l, tag := spec.Format.Layout, uint16(tagPCM)
	if spec.Float {
		tag = tagFloat
	}
	align := l.Channels * spec.BitDepth / 8
	extended := l.Channels > 2 || l != audio.UsualLayout(l.Channels) || !spec.Float && spec.BitDepth > 16
	size, first := uint32(16), tag
	if extended {
		size, first = 40, tagExtensible
	} else if spec.Float {
		size = 18
	}
	b := le.AppendUint32([]byte("fmt "), size)
	b = le.AppendUint16(b, first)
	b = le.AppendUint16(b, uint16(l.Channels))
	b = le.AppendUint32(b, uint32(spec.Format.Rate))
	b = le.AppendUint32(b, uint32(spec.Format.Rate*align))
	b = le.AppendUint16(b, uint16(align))
	b = le.AppendUint16(b, uint16(spec.BitDepth))
	switch {
	case extended:
		b = le.AppendUint16(b, 22)
		b = le.AppendUint16(b, uint16(spec.BitDepth))
		b = le.AppendUint32(b, uint32(l.Mask))
		b = le.AppendUint16(b, tag)
		b = append(b, guidTail...)
	case spec.Float:
		b = le.AppendUint16(b, 0)
	}
	return b
}

// write appends sample bytes. The encoder would copy them once more.
func (w *wavWriter) write(src audio.Block) error {
	w.frames += int64(src.Frames())
	n, err := w.f.Write(w.pack.pack(src))
	w.enc.WrittenBytes += n
	return err
}

// copyChunks appends chunks of the source.
func (w *wavWriter) copyChunks(list []chunk) error {
	for _, c := range list {
		body, length, err := w.tags.body(c, w.spec)
		if err != nil {
			return err
		}
		if length >= unknown32 {
			return fmt.Errorf("%w: the source's %q chunk is larger than 4 GiB and cannot be carried over", ErrUnsupported, c.id)
		}
		if err := w.enc.AddLE(append([]byte(c.id), binary.LittleEndian.AppendUint32(nil, uint32(length))...)); err != nil {
			return err
		}
		n, err := io.CopyN(w.f, body, length)
		w.enc.WrittenBytes += int(n)
		if err != nil {
			return err
		}
		if err := w.padded(length); err != nil {
			return err
		}
	}
	return nil
}

// padded appends the byte that follows an odd length.
func (w *wavWriter) padded(length int64) error {
	return w.enc.AddLE(make([]byte, length%2))
}

func (w *wavWriter) finish() error {
	dataLen := w.frames * int64(w.align)
	if err := w.padded(dataLen); err != nil {
		return err
	}
	if err := w.copyChunks(w.after); err != nil {
		return err
	}
	total := int64(w.enc.WrittenBytes) - 8
	if err := w.enc.Close(); err != nil { // writes sizes of its own, counted in blocks instead of frames
		return err
	}
	le := binary.LittleEndian
	riffLen, data32, fact := uint32(total), uint32(dataLen), uint32(min(w.frames, math.MaxUint32))
	if total > w.limit {
		riffLen, data32, fact = unknown32, unknown32, unknown32
		b := le.AppendUint32([]byte(w.wide), unknown32)
		b = le.AppendUint32(append(b, "WAVEds64"...), ds64Len)
		b = le.AppendUint64(b, uint64(total))
		b = le.AppendUint64(b, uint64(dataLen))
		b = le.AppendUint64(b, uint64(w.frames))
		b = le.AppendUint32(b, 0)
		if _, err := w.f.WriteAt(b, 0); err != nil {
			return err
		}
	}
	return w.patch(map[int64]uint32{4: riffLen, w.dataAt - 4: data32, w.factAt: fact})
}

// patch overwrites sizes in the finished file. The place 0 is none.
func (w *wavWriter) patch(sizes map[int64]uint32) error {
	for at, n := range sizes {
		if at == 0 {
			continue
		}
		if _, err := w.f.WriteAt(binary.LittleEndian.AppendUint32(nil, n), at); err != nil {
			return err
		}
	}
	return nil
}

func (w *wavWriter) abort() {}
