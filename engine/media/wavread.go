package media

import (
	"context"
	"fmt"
	"io"
	"math"
	"os"

	"evenshelf/engine/audio"
)

// pcmReader reads the PCM and float samples of WAV and AIFF files.
type pcmReader struct {
	f       *os.File
	path    string
	info    Info
	stream  *blockStream
	stopped func() error
	err     error  // returned from now on
	unread  string // see wavHeader
}

func newWAVReader(ctx context.Context, f *os.File, path string, h *wavHeader) *pcmReader {
	info := Info{
		Container: "wav", Codec: h.codec(), Format: h.format, Frames: h.frames, BitDepth: h.depth,
		Float: h.tag == tagFloat, Decoder: "evenshelf wav",
	}
	r := newPCMReader(ctx, f, path, info, h.data, unpackerFor(h.container, info.Float), h.align)
	r.unread = h.unread
	return r
}

// newPCMReader reads samples that begin at an offset, in frames of so many bytes.
func newPCMReader(ctx context.Context, f *os.File, path string, info Info, data int64, unpack unpacker, align int) *pcmReader {
	frames := info.Frames
	if frames < 0 {
		frames = math.MaxInt64
	}
	src := io.NewSectionReader(f, data, math.MaxInt64-data)
	return &pcmReader{f: f, path: path, info: info, stream: newBlockStream(src, unpack, align, frames), stopped: stopped(ctx)}
}

func (r *pcmReader) Format() audio.Format { return r.info.Format }
func (r *pcmReader) Info() Info           { return r.info }
func (r *pcmReader) Close() error         { return closeOnce(&r.f) }

// Damage implements Damaged.
func (r *pcmReader) Damage() string {
	if r.err == nil {
		return ""
	}
	return r.unread
}

// ReadBlock implements audio.Source.
func (r *pcmReader) ReadBlock(dst audio.Block) (int, error) {
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
