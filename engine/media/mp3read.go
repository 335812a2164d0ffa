package media

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"os"

	mp3 "github.com/hajimehoshi/go-mp3"

	"evenshelf/engine/audio"
)

// mp3Reader reads MP3 without FFmpeg. It is the fallback: go-mp3 delivers 16-bit samples, clipped at
// full scale, so overs are lost; it stops at damage where FFmpeg carries on; and it decodes intensity
// stereo wrongly, so that is refused.
type mp3Reader struct {
	f       *os.File
	path    string
	info    Info
	stream  *blockStream
	wide    audio.Block // go-mp3 always makes two channels
	cut     audio.Block
	mono    bool
	left    int64 // frames promised and still to come; math.MaxInt64 if none are
	exact   bool
	stopped func() error
	err     error
	damage  string
}

func newMP3Reader(ctx context.Context, f *os.File, path string, k kind) (*mp3Reader, error) {
	l, err := lookMPEG(f, k.start)
	if err != nil {
		return nil, err
	}
	const lowest = 16_000 // Hz; go-mp3 does not know the rates below, which are MPEG-2.5
	if l.info.Codec != "mp3" || l.info.Format.Rate < lowest {
		return nil, fmt.Errorf("%w: reading %s at %d Hz needs FFmpeg, and %s", ErrUnsupported, l.info.Codec, l.info.Format.Rate, needFFmpeg)
	}
	// A reader of the reading must know that overs are missing from it.
	l.info.Decoder = "go-mp3 0.3.4, 16 bits, clips at full scale"
	r := &mp3Reader{
		f: f, path: path, info: l.info, mono: l.info.Format.Layout == audio.Mono, exact: l.gapless.trimmed, stopped: stopped(ctx),
		left: math.MaxInt64, wide: audio.NewBlock(2, audio.BlockFrames), cut: make(audio.Block, 2),
	}
	if r.exact {
		r.left = l.info.Frames
	}
	// The decoder gets a Reader that begins at the sound: given a Seeker it would first read all
	// of it to count frames, and given an ID3 tag it would take its word for how much memory it needs.
	src := &plainStereo{r: bufio.NewReader(k.section(f))}
	dec, err := guard(func() (*mp3.Decoder, error) { return mp3.NewDecoder(src) })
	switch {
	case errors.Is(err, ErrUnsupported):
		return nil, err
	case err != nil:
		return nil, &FormatError{k.start, "its sound cannot be decoded: " + err.Error()}
	}
	r.stream = newBlockStream(guardedReader{dec}, unpackS16, 4, math.MaxInt64)
	_, err = r.stream.r.Discard(4 * (l.gapless.note + l.gapless.skip))
	if err != nil && err != io.EOF {
		return nil, &FormatError{k.start, "its sound cannot be decoded: " + err.Error()}
	}
	return r, nil
}

func (r *mp3Reader) Format() audio.Format { return r.info.Format }
func (r *mp3Reader) Info() Info           { return r.info }
func (r *mp3Reader) Close() error         { return closeOnce(&r.f) }

// Damage implements Damaged.
func (r *mp3Reader) Damage() string { return r.damage }

// ReadBlock implements audio.Source.
func (r *mp3Reader) ReadBlock(dst audio.Block) (int, error) {
	if r.err == nil {
		r.err = ended(r.path, r.stopped)
	}
	if r.err != nil {
		return 0, r.err
	}
	if r.left == 0 && r.more() {
		r.left, r.exact = math.MaxInt64, false
	}
	want := int(min(int64(dst.Frames()), audio.BlockFrames, r.left))
	if want == 0 && r.left == 0 {
		r.err = io.EOF
		return 0, r.err
	}
	n, err := 0, error(nil)
	if r.mono {
		if n, err = r.stream.read(r.wide.Cut(r.cut, 0, want)); n > 0 {
			copy(dst[0], r.wide[0][:n])
		}
	} else {
		n, err = r.stream.read(dst.Cut(r.cut, 0, want))
	}
	if r.left != math.MaxInt64 {
		r.left -= int64(n)
	}
	switch {
	case err == io.EOF || err == io.ErrUnexpectedEOF:
		err = io.EOF
		if r.exact && r.left > 0 {
			err = torn(r.path, r.info, r.info.Frames-r.left)
		}
	case errors.Is(err, ErrUnsupported):
		err = about(r.path, err)
	case err != nil:
		r.damage = err.Error()
		err = about(r.path, fmt.Errorf("the sound is damaged: %w: %w", err, io.ErrUnexpectedEOF))
	}
	r.err = err
	return n, err
}

// more reports whether more follows what was promised than an encoder's padding, as ffReader does.
func (r *mp3Reader) more() bool {
	extra, _ := r.stream.r.Peek((maxPacket + 1) * r.stream.align)
	return len(extra) > maxPacket*r.stream.align
}

// plainStereo passes MPEG frames on and ends the stream at the first that uses intensity stereo: one
// channel with a direction instead of two. Old encoders chose it at low bit rates.
type plainStereo struct {
	r    *bufio.Reader
	left int // bytes of the current frame
}

func (s *plainStereo) Read(p []byte) (int, error) {
	if s.left == 0 {
		head, _ := s.r.Peek(4)
		h := parseMPEG(head)
		if h.intensity {
			return 0, fmt.Errorf("%w: this MP3 has intensity stereo, reading it needs FFmpeg, and %s", ErrUnsupported, needFFmpeg)
		}
		s.left = max(1, h.length) // byte by byte to the next frame where there is none
	}
	n, err := s.r.Read(p[:min(len(p), s.left)])
	s.left -= n
	return n, err
}

// guard turns a panic of a decoder, which hostile input can cause, into an error.
func guard[T any](f func() (T, error)) (v T, err error) {
	defer func() {
		if p := recover(); p != nil {
			err = errors.New("the decoder gave up on damaged data")
		}
	}()
	return f()
}

// guardedReader is a Reader that never panics.
type guardedReader struct{ io.Reader }

func (g guardedReader) Read(p []byte) (int, error) {
	return guard(func() (int, error) { return g.Reader.Read(p) })
}
