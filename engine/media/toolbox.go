package media

import (
	"context"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"syscall"
)

// Toolbox knows which tools this machine has. It is safe for concurrent use; one serves the program.
//
// FFmpeg is asked about itself once, when an answer is first needed: starting it takes as long as decoding
// a minute of sound, and who measures WAV files does not need it.
type Toolbox struct {
	ffmpeg, ffprobe string                 // paths; both are set or neither is
	version         func() string          // "" if FFmpeg cannot be run
	encoders        func() map[string]bool // by name
}

// Find returns a toolbox with the FFmpeg that is on PATH, if there is one.
func Find() *Toolbox {
	path, err := exec.LookPath("ffmpeg")
	if err != nil {
		path = ""
	}
	return New(path)
}

// New returns a toolbox that uses the FFmpeg at a path, with the ffprobe beside it or on PATH. "" means
// no FFmpeg; neither is there one if the two cannot be run, which is tried when FFmpeg is first needed.
func New(ffmpegPath string) *Toolbox {
	t := &Toolbox{version: func() string { return "" }, encoders: func() map[string]bool { return nil }}
	if ffmpegPath == "" {
		return t
	}
	ffmpeg, err := filepath.Abs(ffmpegPath) // the child runs in another folder
	if err != nil {
		return t
	}
	probe := filepath.Join(filepath.Dir(ffmpeg), "ffprobe"+filepath.Ext(ffmpeg))
	if _, err := os.Stat(probe); err != nil {
		if probe, err = exec.LookPath("ffprobe"); err != nil {
			return t
		}
	}
	t.ffmpeg, t.ffprobe = ffmpeg, probe
	t.version = sync.OnceValue(func() string {
		first, err := ask(ffmpeg, "-version")
		if err != nil {
			return ""
		}
		return versionIn(first)
	})
	t.encoders = sync.OnceValue(func() map[string]bool {
		list, err := ask(ffmpeg, "-v", "error", "-encoders")
		if err != nil {
			return nil
		}
		known := map[string]bool{}
		for line := range strings.Lines(list) {
			if f := strings.Fields(line); len(f) > 1 && strings.HasPrefix(f[0], "A") {
				known[f[1]] = true
			}
		}
		return known
	})
	return t
}

// FFmpeg returns the path of the FFmpeg in use, or "".
func (t *Toolbox) FFmpeg() string {
	if t.version() == "" {
		return ""
	}
	return t.ffmpeg
}

// Version returns the version of the FFmpeg in use, e.g. "5.1.6", or "".
func (t *Toolbox) Version() string { return t.version() }

// ask runs one of FFmpeg's tools for a short answer.
func ask(tool string, args ...string) (string, error) {
	ctx, cancel := context.WithTimeout(context.Background(), stallLimit)
	defer cancel()
	cmd := exec.CommandContext(ctx, tool, args...)
	cmd.Env = childEnv()
	out, err := cmd.Output()
	return string(out), err
}

// versionIn takes "5.1.6" out of "ffmpeg version 5.1.6-0+deb12u1 Copyright …".
func versionIn(s string) string {
	f := strings.Fields(s)
	if len(f) < 3 {
		return "unknown"
	}
	v, _, _ := strings.Cut(strings.TrimPrefix(f[2], "n"), "-")
	return v
}

// Open opens the recording at a path for reading. Errors name the path and wrap ErrUnsupported,
// ErrEmpty, a *FormatError, or what the system said. ctx ends the reading at any time, not only the
// opening: ReadBlock then returns its cause.
func (t *Toolbox) Open(ctx context.Context, path string) (Reader, error) {
	return t.OpenTrack(ctx, path, 0)
}

// OpenTrack opens one sound track of a file that has several, counted from 1. 0 is the one a film plays by itself:
// the first that is marked so, else the first.
func (t *Toolbox) OpenTrack(ctx context.Context, path string, track int) (Reader, error) {
	if err := stopped(ctx)(); err != nil {
		return nil, about(path, err)
	}
	f, size, err := openRegular(path)
	if err != nil {
		return nil, about(path, err)
	}
	r, err := t.open(ctx, f, size, path, track)
	if err == nil && track > 1 && r.Info().Track != track {
		r.Close()
		err = fmt.Errorf("%w: there is but one sound track in it", ErrUnsupported)
	}
	if err != nil {
		f.Close()
		return nil, about(path, err)
	}
	return r, nil
}

func (t *Toolbox) open(ctx context.Context, f *os.File, size int64, path string, track int) (Reader, error) {
	k, err := recognise(f, size)
	if err != nil {
		return nil, err
	}
	switch k.container {
	case "wav":
		h, err := parseWAV(f, size)
		if err != nil {
			return nil, err
		}
		if h.native() {
			return newWAVReader(ctx, f, path, h), nil
		}
	case "aiff":
		if k.start > 0 {
			break // an ID3 tag in front, which has no place there; FFmpeg gets past it
		}
		h, err := parseAIFF(f, size)
		if err != nil {
			return nil, err
		}
		if h.native() {
			return newAIFFReader(ctx, f, path, h), nil
		}
	}
	switch {
	case k.container == "flac":
		return t.openFLAC(ctx, f, path, k)
	case t.FFmpeg() != "":
		return t.openFFmpeg(ctx, f, path, k, track)
	case k.container == "mp3":
		return newMP3Reader(ctx, f, path, k)
	default:
		return nil, fmt.Errorf("%w: reading %s needs FFmpeg, and %s", ErrUnsupported, k.container, needFFmpeg)
	}
}

// recognise says what the first bytes of a file show and, where decoders would take what follows the sound for
// a part of it, where the sound ends.
func recognise(f *os.File, size int64) (kind, error) {
	k, err := sniff(f)
	if err != nil || k.container != "flac" && k.container != "mp3" {
		return k, err
	}
	if end, err := soundEnd(f, k.start, size, k.container == "mp3"); err != nil {
		return kind{}, err
	} else if end < size || k.container == "mp3" && k.start > 0 {
		k.end = end
	}
	return k, nil
}

// openRegular opens a file for reading and refuses what is not one: reading a pipe or a device could
// hang. O_NONBLOCK keeps the opening of a pipe itself from hanging and means nothing to a file.
func openRegular(path string) (*os.File, int64, error) {
	f, err := os.OpenFile(path, os.O_RDONLY|syscall.O_NONBLOCK, 0)
	if err != nil {
		return nil, 0, err
	}
	info, err := f.Stat()
	if err == nil && !info.Mode().IsRegular() {
		err = fmt.Errorf("%w: this is not a file but a %s", ErrUnsupported, modeWord(info.Mode()))
	}
	if err != nil {
		f.Close()
		return nil, 0, err
	}
	return f, info.Size(), nil
}

func modeWord(m os.FileMode) string {
	if m.IsDir() {
		return "folder"
	}
	return "pipe or device"
}
