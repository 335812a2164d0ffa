package media

import (
	"bufio"
	"fmt"
	"os"

	"github.com/mewkiz/flac"
	"github.com/mewkiz/flac/frame"
	"github.com/mewkiz/flac/meta"

	"evenshelf/engine/audio"
)

// flacBlock is the length of a FLAC frame, the reference encoder's default.
const flacBlock = 4096

// flacWriter encodes FLAC without FFmpeg. The library predicts with fixed polynomials only, so files
// come out some per cent larger; they are as exact.
type flacWriter struct {
	f          *os.File
	enc        *flac.Encoder
	out        *seekBuffer
	quantisers []quantiser
	carry      *flacCarrier
	frame      *frame.Frame
	samples    [][]int32 // one FLAC frame being filled
	fill       int
}

func newFLACWriter(f *os.File, spec Spec, carry *flacCarrier) (*flacWriter, error) {
	channels := spec.Format.Layout.Channels
	info := &meta.StreamInfo{
		BlockSizeMin: flacBlock, BlockSizeMax: flacBlock, SampleRate: uint32(spec.Format.Rate),
		NChannels: uint8(channels), BitsPerSample: uint8(spec.BitDepth),
	}
	w := &flacWriter{f: f, out: &seekBuffer{f: f, w: bufio.NewWriterSize(f, 1<<16)}, quantisers: newQuantisers(spec), carry: carry}
	room := &meta.Block{Header: meta.Header{Type: meta.TypePadding, Length: carry.room}}
	var err error
	if w.enc, err = flac.NewEncoder(w.out, info, room); err != nil {
		return nil, err
	}
	w.frame = &frame.Frame{Header: frame.Header{
		HasFixedBlockSize: true, SampleRate: info.SampleRate, BitsPerSample: info.BitsPerSample,
		Channels: frame.Channels(channels - 1), // channels one by one: values 0 … 7 of the format's table
	}}
	for range channels {
		w.samples = append(w.samples, make([]int32, flacBlock))
		w.frame.Subframes = append(w.frame.Subframes, &frame.Subframe{})
	}
	return w, nil
}

// unusualMask returns the text of the comment that names the loudspeakers, or "" where it is not needed.
func unusualMask(l audio.Layout) string {
	if l.Mask == 0 || l == audio.UsualLayout(l.Channels) {
		return ""
	}
	return fmt.Sprintf("0x%04X", uint32(l.Mask))
}

func (w *flacWriter) write(src audio.Block) error {
	for from, frames := 0, src.Frames(); from < frames; {
		n := min(frames-from, flacBlock-w.fill)
		for c := range src {
			w.quantisers[c].quantise(w.samples[c][w.fill:w.fill+n], src[c][from:from+n], src[0][from:from+n])
		}
		from += n
		if w.fill += n; w.fill == flacBlock {
			if err := w.flush(); err != nil {
				return err
			}
		}
	}
	return nil
}

// flush encodes the frame that has been filled so far.
func (w *flacWriter) flush() error {
	w.frame.BlockSize = uint16(w.fill)
	for c, sub := range w.frame.Subframes {
		*sub = frame.Subframe{
			SubHeader: frame.SubHeader{Pred: frame.PredVerbatim}, // lets the encoder choose
			Samples:   w.samples[c][:w.fill], NSamples: w.fill,
		}
	}
	w.fill = 0
	_, err := guard(func() (struct{}, error) { return struct{}{}, w.enc.WriteFrame(w.frame) })
	return err
}

func (w *flacWriter) finish() error {
	if w.fill > 0 {
		if err := w.flush(); err != nil {
			return err
		}
	}
	if err := w.enc.Close(); err != nil { // writes length and MD5 into STREAMINFO
		return err
	}
	if err := w.out.w.Flush(); err != nil {
		return err
	}
	// The encoder counts the last, shorter frame as the smallest; STREAMINFO's minimum leaves it out.
	if _, err := w.f.WriteAt([]byte{flacBlock >> 8, flacBlock & 0xFF, flacBlock >> 8, flacBlock & 0xFF}, 8); err != nil {
		return err
	}
	return w.carry.finish(w.f)
}

func (w *flacWriter) abort() {}

// seekBuffer gathers the encoder's many small writes. It hides the file's Close, which is the sink's.
type seekBuffer struct {
	f *os.File
	w *bufio.Writer
}

func (s *seekBuffer) Write(p []byte) (int, error) { return s.w.Write(p) }

func (s *seekBuffer) Seek(offset int64, whence int) (int64, error) {
	if err := s.w.Flush(); err != nil {
		return 0, err
	}
	return s.f.Seek(offset, whence)
}
