package media

import (
	"context"
	"fmt"
	"io"
	"math"
	"os"

	"evenshelf/engine/audio"
)

// wavReader reads PCM and float WAV files.
type wavReader struct {
	f       *os.File
	path    string
	info    Info
	stream  *blockStream
	stopped func() error
	err     error // returned from now on
}

func newWAVReader(ctx context.Context, f *os.File, path string, h *wavHeader) (*wavReader, error) {
	info := Info{
		Container: "wav", Codec: h.codec(), Format: h.format, Frames: h.frames, BitDepth: h.depth,
		Float: h.tag == tagFloat, Decoder: "evenshelf wav",
	}
	frames := h.frames
	if frames < 0 {
		frames = math.MaxInt64
	}
	src := io.NewSectionReader(f, h.data, math.MaxInt64-h.data)
	s := newBlockStream(src, unpackerFor(h.container, info.Float), h.align, frames)
	return &wavReader{f: f, path: path, info: info, stream: s, stopped: stopped(ctx)}, nil
}

func (r *wavReader) Format() audio.Format { return r.info.Format }
func (r *wavReader) Info() Info           { return r.info }
func (r *wavReader) Close() error         { return closeOnce(&r.f) }

// ReadBlock implements audio.Source.
func (r *wavReader) ReadBlock(dst audio.Block) (int, error) {
	if r.err == nil {
		r.err = ended(r.path, r.stopped)
	}
	if r.err != nil {
		return 0, r.err
	}
	n, err := r.stream.read(dst)
	switch {
	case err == io.ErrUnexpectedEOF && r.info.Frames < 0:
		err = io.EOF
	case err == io.ErrUnexpectedEOF:
		err = torn(r.path, r.info, r.info.Frames-r.stream.left)
	case err != nil && err != io.EOF:
		err = about(r.path, err)
	}
	r.err = err
	return n, err
}

// torn is the error of a recording that ends before its header says.
func torn(path string, info Info, got int64) error {
	return fmt.Errorf("%s: the recording is cut off: %.2f s of %.2f s are there: %w", path,
		info.Format.Seconds(got), info.Format.Seconds(info.Frames), io.ErrUnexpectedEOF)
}

// closeOnce closes a file the first time and does nothing later.
func closeOnce(f **os.File) error {
	if *f == nil {
		return nil
	}
	err := (*f).Close()
	*f = nil
	return err
}
