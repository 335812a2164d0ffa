package media

import (
	"context"
	"fmt"
	"io"
	"math"
	"os"
	"strconv"
	"strings"

	"github.com/mewkiz/flac"
	"github.com/mewkiz/flac/frame"
	"github.com/mewkiz/flac/meta"

	"evenshelf/engine/audio"
)

// flacReader reads FLAC without FFmpeg.
type flacReader struct {
	f       *os.File
	path    string
	info    Info
	stream  *flac.Stream
	scale   float32
	frame   *frame.Frame // being handed out
	at      int          // frames of it already handed out
	got     int64
	stopped func() error
	err     error
}

func newFLACReader(ctx context.Context, f *os.File, path string, start int64) (*flacReader, error) {
	m, err := readFLACMeta(io.NewSectionReader(f, start, math.MaxInt64-start), false)
	if err != nil {
		return nil, &FormatError{start, "its FLAC header is damaged: " + err.Error()}
	}
	format := audio.Format{Rate: int(m.info.SampleRate), Layout: m.layout()}
	if err := checkFormat(format, start+8); err != nil {
		return nil, err
	}
	frames := int64(m.info.NSamples)
	if frames == 0 {
		frames = -1
	}
	r := &flacReader{
		f: f, path: path, stopped: stopped(ctx), scale: float32(math.Ldexp(1, 1-int(m.info.BitsPerSample))),
		info: Info{
			Container: "flac", Codec: "flac", Format: format, Frames: frames,
			BitDepth: int(m.info.BitsPerSample), Decoder: "mewkiz/flac 1.0.14",
		},
	}
	r.stream, err = flac.New(io.NewSectionReader(f, start, math.MaxInt64-start))
	if err != nil {
		return nil, &FormatError{start, "its FLAC header is damaged: " + err.Error()}
	}
	return r, nil
}

func (r *flacReader) Format() audio.Format { return r.info.Format }
func (r *flacReader) Info() Info           { return r.info }
func (r *flacReader) Close() error         { return closeOnce(&r.f) }

// ReadBlock implements audio.Source. It hands out at most the rest of one FLAC frame.
func (r *flacReader) ReadBlock(dst audio.Block) (int, error) {
	if r.err == nil {
		r.err = r.stopped()
	}
	if r.err == nil && r.frame == nil {
		r.err = r.next()
	}
	if r.err != nil {
		return 0, r.err
	}
	n := min(dst.Frames(), int(r.frame.BlockSize)-r.at)
	for c, sub := range r.frame.Subframes {
		for i, v := range sub.Samples[r.at : r.at+n] {
			dst[c][i] = float32(v) * r.scale
		}
	}
	r.at += n
	r.got += int64(n)
	if r.at == int(r.frame.BlockSize) {
		r.frame, r.at = nil, 0
	}
	return n, nil
}

// next decodes the next FLAC frame that holds something.
func (r *flacReader) next() error {
	f, err := guard(r.stream.ParseNext)
	switch {
	case err == io.EOF && r.got < r.info.Frames:
		return torn(r.path, r.info, r.got)
	case err == io.EOF:
		return io.EOF
	case err == io.ErrUnexpectedEOF && r.info.Frames >= 0:
		return torn(r.path, r.info, r.got)
	case err != nil:
		where := r.info.Format.Seconds(r.got)
		return fmt.Errorf("%s: the sound is damaged after %.2f s: %w: %w", r.path, where, err, io.ErrUnexpectedEOF)
	}
	for _, sub := range f.Subframes {
		if len(f.Subframes) != r.info.Format.Layout.Channels || len(sub.Samples) != int(f.BlockSize) || f.BlockSize == 0 {
			return about(r.path, fmt.Errorf("the sound is damaged: a frame does not fit the header: %w", io.ErrUnexpectedEOF))
		}
	}
	r.frame = f
	return nil
}

// flacMeta is what the metadata blocks of a FLAC file say, as far as it is used here.
type flacMeta struct {
	info     *meta.StreamInfo
	comments [][2]string
	pictures []*meta.Block
}

const (
	maxComments = 1 << 20  // bytes of all comments
	maxPicture  = 16 << 20 // bytes of one picture: the format's own limit, 24 bits of length
	maxPictures = 8
	maxBlocks   = 1000
)

// readFLACMeta reads the metadata blocks of the FLAC stream that r holds. Blocks that break the rules
// are passed over, except STREAMINFO: a damaged comment does not make the sound unreadable. Pictures are
// read only on demand.
func readFLACMeta(r io.ReadSeeker, pictures bool) (*flacMeta, error) {
	var sig [4]byte
	if _, err := io.ReadFull(r, sig[:]); err != nil || string(sig[:]) != "fLaC" {
		return nil, io.ErrUnexpectedEOF
	}
	m := &flacMeta{}
	for n, last := 0, false; !last && n < maxBlocks; n++ {
		block, err := meta.New(r)
		if err != nil {
			return nil, err
		}
		next, err := r.Seek(0, io.SeekCurrent)
		if err != nil {
			return nil, err
		}
		next += block.Length
		last = block.IsLast
		wanted := block.Type == meta.TypeStreamInfo ||
			block.Type == meta.TypeVorbisComment && block.Length <= maxComments ||
			pictures && block.Type == meta.TypePicture && block.Length <= maxPicture && len(m.pictures) < maxPictures
		if wanted {
			if _, err := guard(func() (struct{}, error) { return struct{}{}, block.Parse() }); err == nil {
				m.keep(block)
			}
		}
		if m.info == nil {
			return nil, fmt.Errorf("it does not begin with STREAMINFO")
		}
		if _, err := r.Seek(next, io.SeekStart); err != nil {
			return nil, err
		}
	}
	return m, nil
}

func (m *flacMeta) keep(block *meta.Block) {
	switch body := block.Body.(type) {
	case *meta.StreamInfo:
		m.info = body
	case *meta.VorbisComment:
		m.comments = append(m.comments, body.Tags...)
	case *meta.Picture:
		m.pictures = append(m.pictures, block)
	}
}

// maskComment is the comment that names loudspeakers where they are not the usual ones (RFC 9639).
const maskComment = "WAVEFORMATEXTENSIBLE_CHANNEL_MASK"

// layout returns the loudspeaker positions: the usual ones unless the comment says otherwise.
func (m *flacMeta) layout() audio.Layout {
	channels := int(m.info.NChannels)
	for _, c := range m.comments {
		if !strings.EqualFold(c[0], maskComment) {
			continue
		}
		if mask, err := strconv.ParseUint(strings.TrimPrefix(strings.ToLower(c[1]), "0x"), 16, 32); err == nil {
			return layoutOf(channels, uint32(mask))
		}
	}
	return audio.UsualLayout(channels)
}
