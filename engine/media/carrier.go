package media

import (
	"context"
	"os"

	"evenshelf/engine/tags/mp4"
)

// carrier puts what a source carries beside its sound into a file that FFmpeg encodes.
type carrier interface {
	args() []string          // FFmpeg's options in front of the output; the source is input 1
	finish(f *os.File) error // completes the file when FFmpeg has ended
}

// carrierFor chooses a carrier: the format's own, which keeps every byte, where source and target are of one format,
// else FFmpeg, which translates what both formats have a name for.
func (t *Toolbox) carrierFor(ctx context.Context, spec Spec, src *tagSource) (carrier, error) {
	switch {
	case spec.Container == "flac":
		if list := flacSource(src); list != nil {
			return flacHead(spec, list), nil
		}
	case src != nil && spec.Container == "ogg" && src.kind.container == "ogg":
		if own := oggHead(spec, src); own != nil {
			return own, nil
		}
	case src != nil && spec.Container == "mp4" && src.kind.container == "mp4":
		if c, err := mp4.Read(src.f, src.size); err == nil { // else it is damaged, and FFmpeg takes what it understands
			return mp4Carrier{c}, nil
		}
	case src != nil && spec.Container == "mp3" && src.kind.container == "mp3":
		return newMP3Carrier(src)
	}
	list, err := t.ffmpegTags(ctx, src, spec.Container != "ogg" && spec.Container != "aiff")
	if mask := unusualMask(spec.Format.Layout); err == nil && spec.Codec == "flac" {
		list = append(list, "-metadata", maskComment+"="+mask) // empty: none, not even the source's
	}
	if spec.Container == "mp3" {
		list = append(list, "-id3v2_version", "3") // the version old players read too
	}
	return ffmpegCarrier(list), err
}

// ffmpegCarrier leaves it to FFmpeg: it is the options that say so.
type ffmpegCarrier []string

func (c ffmpegCarrier) args() []string        { return c }
func (c ffmpegCarrier) finish(*os.File) error { return nil }
