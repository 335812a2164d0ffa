package media

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"os"

	"github.com/mewkiz/flac"
	"github.com/mewkiz/flac/frame"

	"evenshelf/engine/audio"
)

// shortFLAC is how many samples, of all channels together, are sooner decoded here than by FFmpeg. Measured
// on real music: the library takes 32 ns a sample, FFmpeg and the pipe 10 ns, but FFmpeg has to be started, which
// takes 65 ms; so both cost the same at 3 million samples, half a minute of stereo. Both deliver the same bits.
const shortFLAC = 2_500_000

// openFLAC chooses the decoder. Depths over 24 bits are too much for the library.
func (t *Toolbox) openFLAC(ctx context.Context, f *os.File, path string, k kind) (Reader, error) {
	m, err := readFLACMeta(f, k.start)
	if err != nil {
		return nil, err
	}
	samples := m.info.NSamples * uint64(m.info.NChannels)
	short := samples > 0 && samples <= shortFLAC && m.info.BitsPerSample <= 24
	if !short && t.FFmpeg() != "" {
		return t.openFFmpeg(ctx, f, path, k, 0)
	}
	r, err := newFLACReader(ctx, f, path, k, m)
	if err != nil {
		return nil, err
	}
	r.other = func() (*ffReader, error) {
		if t.FFmpeg() == "" {
			return nil, fmt.Errorf("%w: %s", ErrUnsupported, needFFmpeg)
		}
		return t.openFFmpeg(ctx, f, path, k, 0)
	}
	return r, nil
}

// flacReader reads FLAC without FFmpeg. The library stops at damage; what follows is left to FFmpeg, if there
// is one, which finds its way back into the stream.
type flacReader struct {
	f       *os.File
	path    string
	info    Info
	stream  *flac.Stream
	scale   float32
	frame   *frame.Frame // being handed out
	at      int          // frames of it already handed out
	got     int64
	other   func() (*ffReader, error) // opens the recording with FFmpeg
	rest    *ffReader                 // reads what follows damage
	damage  string                    // that nothing could read past
	stopped func() error
	err     error
}

func newFLACReader(ctx context.Context, f *os.File, path string, k kind, m *flacMeta) (*flacReader, error) {
	l, err := m.finding()
	if err != nil {
		return nil, err
	}
	l.info.Decoder = "mewkiz/flac 1.0.14"
	r := &flacReader{f: f, path: path, stopped: stopped(ctx), scale: float32(math.Ldexp(1, 1-l.info.BitDepth)), info: l.info}
	r.stream, err = flac.New(k.section(f))
	if err != nil {
		return nil, damagedFLAC(k.start, err)
	}
	return r, nil
}

func (r *flacReader) Format() audio.Format { return r.info.Format }

// Info implements Reader. It names the decoder that is at work.
func (r *flacReader) Info() Info {
	if r.rest != nil {
		return r.rest.Info()
	}
	return r.info
}

// Damage implements Damaged.
func (r *flacReader) Damage() string {
	if r.rest == nil {
		return r.damage
	}
	return r.rest.Damage()
}

// Close implements Reader.
func (r *flacReader) Close() error {
	if r.rest != nil {
		return r.rest.Close() // it has taken the file over
	}
	return closeOnce(&r.f)
}

// ReadBlock implements audio.Source. It hands out at most the rest of one FLAC frame.
func (r *flacReader) ReadBlock(dst audio.Block) (n int, err error) {
	if r.err == nil {
		r.err = ended(r.path, r.stopped)
	}
	if r.err == nil && r.frame == nil && r.rest == nil {
		r.err = r.next()
	}
	switch {
	case r.err != nil:
		return 0, r.err
	case r.rest != nil:
		n, r.err = r.rest.ReadBlock(dst)
		return n, r.err
	}
	n = min(dst.Frames(), int(r.frame.BlockSize)-r.at)
	for c, sub := range r.frame.Subframes {
		scale(dst[c][:n], sub.Samples[r.at:], r.scale)
	}
	r.at += n
	r.got += int64(n)
	if r.at == int(r.frame.BlockSize) {
		r.frame, r.at = nil, 0
	}
	return n, nil
}

// scale turns integers into floats. src must be no shorter than dst.
//
//go:norace
func scale(dst []float32, src []int32, by float32) {
	for i, v := range src[:len(dst)] {
		dst[i] = float32(v) * by
	}
}

// next decodes the next FLAC frame, or hands the recording over.
func (r *flacReader) next() error {
	if err := tooLong(r.path, r.info.Format, r.got, longest); err != nil {
		return err
	}
	f, err := guard(r.stream.ParseNext)
	switch {
	case err == nil:
		err = r.fits(f)
	case err == io.EOF && r.got >= r.info.Frames:
		return io.EOF
	case (err == io.EOF || err == io.ErrUnexpectedEOF) && r.got < r.info.Frames:
		return torn(r.path, r.info, r.got)
	}
	if err != nil {
		return r.handOver(err)
	}
	r.frame = f
	return nil
}

// fits checks that a frame has the shape that the header promises.
func (r *flacReader) fits(f *frame.Frame) error {
	ok := len(f.Subframes) == r.info.Format.Layout.Channels && int(f.BitsPerSample) == r.info.BitDepth && f.BlockSize > 0
	for _, sub := range f.Subframes {
		ok = ok && len(sub.Samples) == int(f.BlockSize)
	}
	if !ok {
		return errors.New("a frame does not fit the header")
	}
	return nil
}

// handOver lets FFmpeg read what follows the place where the library gave up. Whether that is damage is for
// FFmpeg to say: the library also stumbles over frames that leave their depth to the header.
func (r *flacReader) handOver(why error) error {
	whole := r.info.Frames >= 0 && r.got >= r.info.Frames
	words := fmt.Sprintf("the sound is damaged after %.2f s: %v", r.info.Format.Seconds(r.got), why)
	rest, err := r.other()
	switch {
	case errors.Is(err, ErrUnsupported) && whole:
		return io.EOF
	case errors.Is(err, ErrUnsupported):
		r.damage = why.Error()
		return about(r.path, fmt.Errorf("%s: %w", words, io.ErrUnexpectedEOF))
	case err != nil:
		return about(r.path, err)
	}
	r.rest = rest
	if rest.Format().Layout.Channels != r.info.Format.Layout.Channels {
		rest.damage = why.Error()
		return about(r.path, fmt.Errorf("%s: %w", words, io.ErrUnexpectedEOF))
	}
	buf := audio.NewBlock(r.info.Format.Layout.Channels, audio.BlockFrames)
	for past := r.got; past > 0; {
		n, err := rest.ReadBlock(buf.Cut(make(audio.Block, len(buf)), 0, int(min(past, audio.BlockFrames))))
		if past -= int64(n); err != nil {
			return err
		}
	}
	return nil
}
