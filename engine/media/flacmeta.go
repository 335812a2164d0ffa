package media

import (
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"

	"github.com/mewkiz/flac/meta"

	"evenshelf/engine/audio"
)

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

// finding is the metadata in the words of the package.
func (m *flacMeta) finding() (finding, error) {
	l := finding{info: Info{
		Container: "flac", Codec: "flac", Format: audio.Format{Rate: int(m.info.SampleRate), Layout: m.layout()},
		Frames: int64(m.info.NSamples), BitDepth: int(m.info.BitsPerSample),
	}}
	switch {
	case l.info.BitDepth <= 16:
		l.wire = wire16
	case l.info.BitDepth <= 24:
		l.wire = wire24
	default:
		l.wire = wire32
	}
	if l.info.Frames == 0 { // not known
		l.info.Frames = -1
	}
	return l, checkFormat(l.info.Format, -1)
}

func damagedFLAC(start int64, err error) error {
	return &FormatError{start, "its FLAC header is damaged: " + err.Error()}
}

// readFLACMeta reads the metadata of the FLAC stream that begins at offset start, without pictures.
func readFLACMeta(r io.ReaderAt, start int64) (*flacMeta, error) {
	m, err := readFLACBlocks(io.NewSectionReader(r, start, math.MaxInt64-start), false)
	if err != nil {
		return nil, damagedFLAC(start, err)
	}
	return m, nil
}

// readFLACBlocks reads the metadata blocks of the FLAC stream that r holds. Blocks that break the rules
// are passed over, except STREAMINFO: a damaged comment does not make the sound unreadable. Pictures are
// read only on demand.
func readFLACBlocks(r io.ReadSeeker, pictures bool) (*flacMeta, error) {
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
