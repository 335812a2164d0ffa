package media

import (
	"io"
	"strconv"
	"strings"

	"evenshelf/engine/audio"
	"evenshelf/engine/tags/flac"
	"evenshelf/engine/tags/vorbis"
)

// flacMeta is what the metadata blocks of a FLAC file say, as far as it is used here.
type flacMeta struct {
	info     flac.Info
	comments []vorbis.Comment
}

// finding is the metadata in the words of the package.
func (m *flacMeta) finding() (finding, error) {
	l := finding{info: Info{
		Container: "flac", Codec: "flac", Format: audio.Format{Rate: m.info.SampleRate, Layout: m.layout()},
		Frames: int64(m.info.NSamples), BitDepth: m.info.BitsPerSample,
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

// readFLACMeta reads the metadata of the FLAC stream that begins at offset start. A damaged comment does not make the
// sound unreadable.
func readFLACMeta(r io.ReaderAt, start int64) (*flacMeta, error) {
	blocks, _, err := flac.Blocks(kind{start: start}.section(r))
	if err != nil {
		return nil, damagedFLAC(start, err)
	}
	m := &flacMeta{}
	if m.info, err = flac.ReadInfo(blocks); err != nil {
		return nil, damagedFLAC(start, err)
	}
	m.comments, _ = flac.Comments(blocks)
	return m, nil
}

// layout returns the loudspeaker positions: the usual ones unless a comment says otherwise.
func (m *flacMeta) layout() audio.Layout {
	if layout, ok := namedLayout(m.comments, m.info.NChannels); ok {
		return layout
	}
	return audio.UsualLayout(m.info.NChannels)
}

// namedLayout returns the loudspeaker positions that a comment names; ok is false if none does.
func namedLayout(comments []vorbis.Comment, channels int) (l audio.Layout, ok bool) {
	for _, c := range comments {
		for _, entry := range c.Entries {
			name, value, _ := strings.Cut(entry, "=")
			if !isMask(name) {
				continue
			}
			if mask, err := strconv.ParseUint(strings.TrimPrefix(strings.ToLower(value), "0x"), 16, 32); err == nil {
				return layoutOf(channels, uint32(mask)), true
			}
		}
	}
	return l, false
}

func isMask(name string) bool { return strings.EqualFold(name, vorbis.Mask) }
