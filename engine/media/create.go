package media

import (
	"context"
	"fmt"
	"os"
	"slices"

	"evenshelf/engine/audio"
)

const (
	flacMaxChannels = 8
	flacMaxRate     = 655_350
)

// Create writes a new file at exactly this path, whatever its name, as spec says; a file that is there
// is overwritten, except the one tags are taken from. Errors name the path and wrap ErrUnsupported if
// the spec cannot be written.
//
// Integer targets are dithered, unless spec asks for plain rounding (see quantiser), and clipped at full scale. Close finishes the headers,
// waits for a child and fsyncs; when it or anything before it fails, the file is incomplete and the
// caller's to remove. ctx ends the writing at any time: the next call returns its cause.
func (t *Toolbox) Create(ctx context.Context, path string, spec Spec) (audio.Sink, error) {
	if err := stopped(ctx)(); err != nil {
		return nil, about(path, err)
	}
	if err := t.checkSpec(spec); err != nil {
		return nil, about(path, err)
	}
	tags, err := openTags(spec.TagsFrom)
	if err != nil {
		return nil, err
	}
	if tags.is(path) {
		tags.close()
		return nil, about(path, fmt.Errorf("%w: it would overwrite the recording it is made from", ErrUnsupported))
	}
	f, err := os.OpenFile(path, os.O_RDWR|os.O_CREATE|os.O_TRUNC, 0o644)
	if err != nil {
		tags.close()
		return nil, about(path, err)
	}
	s := &sink{path: path, f: f, tags: tags, format: spec.Format, stopped: stopped(ctx)}
	riff := spec.Container == "wav" || spec.Container == "aiff"
	if riff && tags != nil && tags.kind.container != spec.Container {
		tags.said, err = t.sheetOf(ctx, tags)
	}
	switch {
	case err != nil:
	case spec.Film != nil:
		s.w, err = t.newFilmWriter(ctx, f, spec, tags)
	case spec.Container == "wav":
		s.w, err = newWAVWriter(f, spec, tags)
	case spec.Container == "aiff":
		s.w, err = newAIFFWriter(f, spec, tags)
	case spec.Container == "flac" && t.FFmpeg() == "":
		var carry *flacCarrier
		if carry, err = t.newFLACCarrier(ctx, spec, tags); err == nil {
			s.w, err = newFLACWriter(f, spec, carry)
		}
	default:
		s.w, err = t.newFFWriter(ctx, f, spec, tags)
	}
	if err != nil {
		tags.close()
		if info, e := f.Stat(); e == nil && info.Mode().IsRegular() {
			os.Remove(path)
		}
		f.Close()
		return nil, about(path, err)
	}
	return s, nil
}

// checkSpec refuses what no writer here can do.
func (t *Toolbox) checkSpec(s Spec) error {
	if err := checkFormat(s.Format, -1); err != nil {
		return err
	}
	if s.Film != nil {
		return t.checkFilm(s)
	}
	l, isLossy := lossyCodecs[s.Codec]
	var ok bool
	switch {
	case s.Container == "wav" && s.Float:
		ok = s.BitDepth == 32 || s.BitDepth == 64
	case s.Container == "wav":
		ok = slices.Contains([]int{16, 24, 32}, s.BitDepth)
	case s.Container == "flac":
		ok = (s.BitDepth == 16 || s.BitDepth == 24) && s.Format.Layout.Channels <= flacMaxChannels && s.Format.Rate <= flacMaxRate
	case s.Container == "mp4" && s.Codec == "alac":
		ok = s.BitDepth == 16 || s.BitDepth == 24
	case s.Container == "aiff":
		ok = writesAIFF(s)
	case isLossy && s.Container == l.container:
		if why := t.cannot(l.encoder, s.delivered(), l.rates, l.channels); why != "" {
			return fmt.Errorf("%w: %s cannot be written: %s", ErrUnsupported, s.Codec, why)
		}
		ok = true
	}
	switch {
	case !ok:
		return fmt.Errorf("%w: %s with %s, %d bits, %s at %d Hz cannot be written", ErrUnsupported, s.Container, s.Codec, s.BitDepth, s.Format.Layout, s.Format.Rate)
	case !slices.Contains([]string{"wav", "aiff", "flac"}, s.Container) && t.FFmpeg() == "":
		return fmt.Errorf("%w: writing %s needs FFmpeg, and %s", ErrUnsupported, s.Container, needFFmpeg)
	}
	return nil
}

// blockWriter is what a format's writer does; sink does the rest.
type blockWriter interface {
	write(src audio.Block) error
	finish() error // completes the file's content
	abort()        // ends whatever is still running; called instead of finish, or after it failed
}

// sink is the audio.Sink around every writer: it checks blocks, remembers the first error, names the
// file in it, and brings the finished file to the disk.
type sink struct {
	path    string
	f       *os.File
	tags    *tagSource
	format  audio.Format
	w       blockWriter
	stopped func() error
	err     error
	closed  bool
}

// WriteBlock implements audio.Sink.
func (s *sink) WriteBlock(src audio.Block) error {
	if s.err == nil && s.closed {
		s.err = about(s.path, os.ErrClosed)
	}
	if s.err == nil {
		s.err = s.stopped()
	}
	if s.err != nil || src.Frames() == 0 {
		return s.err
	}
	err := error(nil)
	if len(src) != s.format.Layout.Channels {
		err = fmt.Errorf("a block of %d channels was written to a file of %d", len(src), s.format.Layout.Channels)
	} else {
		err = s.w.write(src)
	}
	return s.fail(err)
}

// fail keeps the first error. What a child says because it was ended is not the reason it ended.
func (s *sink) fail(err error) error {
	if err != nil && s.err == nil {
		s.err = about(s.path, err)
		if stop := s.stopped(); stop != nil {
			s.err = stop
		}
	}
	return s.err
}

// Close implements audio.Sink. Closing again returns the first result.
func (s *sink) Close() error {
	if s.closed {
		return s.err
	}
	s.closed = true
	if s.err == nil {
		s.fail(s.stopped())
	}
	if s.err == nil {
		s.fail(s.w.finish())
	}
	if s.err != nil {
		s.w.abort()
	}
	s.tags.close()
	if s.err == nil {
		s.fail(s.f.Sync())
	}
	if err := s.f.Close(); err != nil {
		s.fail(err)
	}
	return s.err
}
