package media

import (
	"context"
	"os"

	"evenshelf/engine/tags/mp4"
)

// carrier puts what a source carries beside its sound into a file that FFmpeg encodes.
type carrier interface {
	args() []string          // FFmpeg's options in front of the output, for the room that it has to leave; it is to write no tags
	finish(f *os.File) error // completes the file when FFmpeg has ended
}

// carrierFor chooses a carrier: one that keeps every byte where source and target are of one format, else one that
// translates. src may be nil.
func (t *Toolbox) carrierFor(ctx context.Context, spec Spec, src *tagSource) (carrier, error) {
	switch {
	case spec.Container == "flac":
		return t.newFLACCarrier(ctx, spec, src)
	case spec.Container == "ogg":
		return t.newOggCarrier(ctx, spec, src)
	case spec.Container == "mp4":
		if src != nil && src.kind.container == "mp4" {
			if c, err := mp4.Read(src.f, src.size); err == nil {
				return mp4Carrier{c}, nil
			}
		}
		s, err := t.sheetOf(ctx, src)
		return mp4SheetCarrier{sheet: s}, err
	case src != nil && src.kind.container == "mp3":
		return newMP3Carrier(src)
	}
	s, err := t.sheetOf(ctx, src)
	return sheetMP3Carrier(s), err
}

// ffmpegCarrier leaves it to FFmpeg, whose options say so elsewhere: films are written with all that is in them.
type ffmpegCarrier struct{}

func (ffmpegCarrier) args() []string        { return nil }
func (ffmpegCarrier) finish(*os.File) error { return nil }
