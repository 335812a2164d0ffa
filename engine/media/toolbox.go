package media

import (
	"context"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"syscall"
	"time"
)

// Toolbox knows which tools this machine has. It is safe for concurrent use; one serves the program.
type Toolbox struct {
	ffmpeg, ffprobe string // paths; both are set or neither is
	version         string
	encoders        func() map[string]bool // asked of FFmpeg once, when first needed
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
// no FFmpeg; neither is there one if the two cannot be run.
func New(ffmpegPath string) *Toolbox {
	t := &Toolbox{encoders: func() map[string]bool { return nil }}
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
	first, err := ask(ffmpeg, "-version")
	if err != nil {
		return t
	}
	t.ffmpeg, t.ffprobe, t.version = ffmpeg, probe, versionIn(first)
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
func (t *Toolbox) FFmpeg() string { return t.ffmpeg }

// Version returns the version of the FFmpeg in use, e.g. "5.1.6", or "".
func (t *Toolbox) Version() string { return t.version }

// ask runs one of FFmpeg's tools for a short answer.
func ask(tool string, args ...string) (string, error) {
	ctx, cancel := context.WithTimeout(context.Background(), 10*time.Second)
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
	if err := stopped(ctx)(); err != nil {
		return nil, about(path, err)
	}
	f, size, err := openRegular(path)
	if err != nil {
		return nil, about(path, err)
	}
	r, err := t.open(ctx, f, size, path)
	if err != nil {
		f.Close()
		return nil, about(path, err)
	}
	return r, nil
}

func (t *Toolbox) open(ctx context.Context, f *os.File, size int64, path string) (Reader, error) {
	k, err := sniff(f)
	if err != nil {
		return nil, err
	}
	if k.container == "wav" {
		h, err := parseWAV(f, size)
		if err != nil {
			return nil, err
		}
		if h.native() {
			return newWAVReader(ctx, f, path, h)
		}
	}
	switch {
	case t.ffmpeg != "":
		return t.openFFmpeg(ctx, f, path, k)
	case k.container == "mp3":
		return newMP3Reader(ctx, f, path, k.start)
	case k.container == "flac":
		return newFLACReader(ctx, f, path, k.start)
	default:
		return nil, fmt.Errorf("%w: reading %s needs FFmpeg, and %s", ErrUnsupported, k.container, needFFmpeg)
	}
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

// blockStream turns interleaved frames of one encoding into planar blocks. It is the heart of every
// reader here; after it is made nothing is allocated.
type blockStream struct {
	r       io.Reader
	unpack  unpacker
	align   int // bytes a frame
	raw     []byte
	left    int64 // frames still to come; math.MaxInt64 if only the end of r tells
	partial int   // bytes of an incomplete last frame, once the end was met
}

func newBlockStream(r io.Reader, unpack unpacker, align int, frames int64) *blockStream {
	return &blockStream{r: r, unpack: unpack, align: align, raw: make([]byte, align*max(1, 1<<16/align)), left: frames}
}

// read fills dst as far as one buffer reaches. It returns io.EOF with or after the last frame and
// io.ErrUnexpectedEOF if r ended before left frames had come.
func (s *blockStream) read(dst [][]float32) (n int, err error) {
	if s.left == 0 {
		return 0, io.EOF
	}
	if len(dst) == 0 || len(dst[0]) == 0 {
		return 0, nil
	}
	want := min(int64(len(dst[0])), int64(len(s.raw)/s.align), s.left)
	m, err := io.ReadFull(s.r, s.raw[:int(want)*s.align])
	n = m / s.align
	s.unpack(dst, s.raw[:n*s.align], n)
	s.left -= int64(n)
	if err == io.EOF || err == io.ErrUnexpectedEOF {
		s.partial = m % s.align
		err = io.ErrUnexpectedEOF
	}
	return n, err
}
