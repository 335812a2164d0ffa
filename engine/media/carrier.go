package media

import (
	"context"
	"os"
	"strconv"
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
	case src != nil && spec.Container == "flac" && src.kind.container == "flac":
		head, err := flacHead(spec, src)
		return flacCarrier(head), err
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

// flacCarrier is the metadata blocks that go into the room FFmpeg leaves for them.
type flacCarrier []byte

func (c flacCarrier) args() []string {
	return []string{"-map_metadata", "-1", "-metadata_header_padding", strconv.Itoa(len(c) + flacPadding)}
}

func (c flacCarrier) finish(f *os.File) error { return putHead(f, c) }
