package media

import (
	"context"
	"errors"
	"fmt"
	"io/fs"

	"evenshelf/engine/audio"
)

var (
	// ErrUnsupported is wrapped when a file is of a kind that cannot be read or written here, perhaps
	// because FFmpeg is missing. Trying again cannot help.
	ErrUnsupported = errors.New("not supported")
	// ErrKilled is wrapped when FFmpeg was ended from outside, as by a system short of memory. That says
	// nothing about the file; trying again may help.
	ErrKilled = errors.New("FFmpeg was killed from outside")
	// ErrEmpty is wrapped when a file has no bytes at all.
	ErrEmpty = errors.New("the file is empty")
)

// FormatError says that a file breaks the rules of its own format, and where.
type FormatError struct {
	Offset int64  // bytes from the start of the file; −1 if the place is not known
	Reason string // in words
}

func (e *FormatError) Error() string {
	if e.Offset < 0 {
		return e.Reason
	}
	return fmt.Sprintf("%s (at byte %d)", e.Reason, e.Offset)
}

const needFFmpeg = "FFmpeg was not found: install the Debian package ffmpeg"

// about puts the file's path in front of an error and drops the repetition of it that package os adds.
func about(path string, err error) error {
	var pe *fs.PathError
	if errors.As(err, &pe) {
		err = fmt.Errorf("cannot %s: %w", pe.Op, pe.Err)
	}
	return fmt.Errorf("%s: %w", path, err)
}

// Limits on what a header may claim. They are far outside anything recorded and keep buffers small.
const (
	maxChannels = 64
	minRate     = 1_000
	maxRate     = 768_000
)

// checkFormat refuses a channel count or sampling rate that no recording has.
func checkFormat(f audio.Format, offset int64) error {
	switch {
	case f.Layout.Channels < 1 || f.Layout.Channels > maxChannels:
		return &FormatError{offset, fmt.Sprintf("its header claims %d channels; 1 to %d can be read", f.Layout.Channels, maxChannels)}
	case f.Rate < minRate || f.Rate > maxRate:
		return &FormatError{offset, fmt.Sprintf("its header claims a sampling rate of %d Hz; %d to %d can be read", f.Rate, minRate, maxRate)}
	}
	return nil
}

// ended returns why a context ended, with the path of what was being read, or nil while it has not.
func ended(path string, stopped func() error) error {
	if err := stopped(); err != nil {
		return about(path, err)
	}
	return nil
}

// stopped returns the reason a context ended, or nil while it has not. Readers and sinks keep this
// function instead of the context: it is all they need, once a block.
func stopped(ctx context.Context) func() error {
	return func() error {
		if ctx.Err() == nil {
			return nil
		}
		return context.Cause(ctx)
	}
}
