package media

import (
	"bufio"
	"bytes"
	"cmp"
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"strings"

	"evenshelf/engine/audio"
)

// decoders names FFmpeg's decoder for a codec where it is not the codec's own name. Naming it makes
// readings repeatable on a machine whose FFmpeg has several.
var decoders = map[string]string{"mp3": "mp3float", "mp2": "mp2float", "mp1": "mp1float"}

// ffReader reads whatever FFmpeg decodes.
type ffReader struct {
	f       *os.File
	path    string
	info    Info
	child   *child
	ahead   *bufio.Reader // the child's output
	stream  *blockStream
	stopped func() error
	got     int64
	promise promise
	err     error
	damage  string
}

// promise is what a header says about the length, and how far it can be believed.
type promise struct {
	frames int64 // −1 if nothing is promised
	slack  int64 // fewer by so many is not yet a cut recording
	cut    bool  // a little more, up to slack, is the codec's padding and is left out
}

// maxPacket is the longest packet of a lossy codec, in frames, with room to spare (HE-AAC: 2048).
const maxPacket = 4096

// promiseOf weighs the frame count of a container.
func promiseOf(info Info, g gapless) promise {
	p := promise{frames: info.Frames}
	switch {
	case g.trimmed: // exact
	case info.Container == "mp3":
		p.slack = 2 * 1152 // some encoders count the note itself, or leave a frame out
	case info.BitDepth == 0:
		// The length is that of the presentation; packets are whole, so the last one overshoots.
		p.slack, p.cut = maxPacket, true
	}
	return p
}

func (t *Toolbox) openFFmpeg(ctx context.Context, f *os.File, path string, k kind) (Reader, error) {
	p, err := t.runProbe(ctx, f, k)
	if err != nil {
		return nil, err
	}
	info, err := p.info(k)
	if err != nil {
		return nil, err
	}
	var g gapless
	if k.container == "mp3" && info.Codec == "mp3" {
		if _, g, err = readGapless(f, k.start); err != nil {
			return nil, err
		}
		info.Frames = g.frames
	}
	if info.Codec == "opus" && info.Container == "ogg" && info.Frames > 0 {
		skip, err := opusPreSkip(f)
		if err != nil {
			return nil, err
		}
		info.Frames -= skip
	}
	decoder := cmp.Or(decoders[info.Codec], info.Codec)
	if k.container == "flac" { // FFmpeg's versions name surround channels differently
		m, err := readFLACMeta(io.NewSectionReader(f, k.start, math.MaxInt64-k.start), false)
		if err != nil {
			return nil, &FormatError{k.start, "its FLAC header is damaged: " + err.Error()}
		}
		info.Format.Layout = m.layout()
	}
	info.Decoder = fmt.Sprintf("ffmpeg %s %s", t.version, decoder)

	args := []string{"-nostdin", "-v", "error", "-max_alloc", "268435456", "-threads", "1", "-guess_layout_max", "0"}
	args = append(append(args, guarded(k)...), "-c:a", decoder, "-i", inputFD)
	args = append(args, "-vn", "-sn", "-dn", "-map", "0:a:0", "-map_metadata", "-1", "-fflags", "+bitexact", "-c:a", "pcm_f32le", "-f", "wav", "pipe:1")
	c, err := startChild(ctx, true, []*os.File{f}, t.ffmpeg, args...)
	if err != nil {
		return nil, err
	}
	r := &ffReader{f: f, path: path, info: info, child: c, stopped: stopped(ctx)}
	if err := r.begin(g); err != nil {
		c.kill()
		return nil, err
	}
	return r, nil
}

// opusPreSkip returns how many frames an Opus decoder drops at the start (RFC 7845, 5.1). They are in
// the count that Ogg keeps.
func opusPreSkip(r io.ReaderAt) (int64, error) {
	head, err := readAt(r, 0, sniffBytes)
	if at := bytes.Index(head, []byte("OpusHead")); at >= 0 && at+12 <= len(head) {
		return int64(le16(head[at+10:])), err
	}
	return 0, err
}

// begin waits for the head of the child's WAV stream, which says what is really being decoded.
func (r *ffReader) begin(g gapless) error {
	r.ahead = bufio.NewReaderSize(r.child, 64<<10)
	head, err := r.ahead.Peek(512)
	if err != nil && err != io.EOF {
		return err
	}
	h, err := parseWAV(bytes.NewReader(head), int64(len(head)))
	var bad *FormatError
	switch {
	case errors.As(err, &bad): // no head, no sound: the child has said why
		switch said := r.child.wait(); {
		case errors.Is(said, ErrKilled):
			return said
		case said != nil:
			return &FormatError{-1, "its sound cannot be decoded: " + said.Error()}
		}
		return &FormatError{-1, strings.TrimSuffix("its sound cannot be decoded: "+r.child.stderr.text(), ": ")}
	case err != nil:
		return err
	}
	if _, err := r.ahead.Discard(int(h.data)); err != nil {
		return err
	}
	r.ahead = bufio.NewReaderSize(r.ahead, (maxPacket+1)*h.align) // the same reader if it is large enough
	if n := h.format.Layout; n.Channels == r.info.Format.Layout.Channels && (n.Mask == 0 || r.info.Container == "flac") {
		h.format.Layout = r.info.Format.Layout
	}
	if h.format.Rate != r.info.Format.Rate {
		r.info.Frames = -1 // counted at another rate than the sound has
	}
	r.info.Format = h.format
	r.promise = promiseOf(r.info, g)
	frames := int64(math.MaxInt64)
	if r.promise.cut && r.promise.frames >= 0 {
		frames = r.promise.frames
	}
	r.stream = newBlockStream(r.ahead, unpackFloat32, h.align, frames)
	return nil
}

func (r *ffReader) Format() audio.Format { return r.info.Format }
func (r *ffReader) Info() Info           { return r.info }

// Damage implements Damaged.
func (r *ffReader) Damage() string { return r.damage }

// Close implements Reader. It ends a child that is still decoding.
func (r *ffReader) Close() error {
	r.child.kill()
	return closeOnce(&r.f)
}

// ReadBlock implements audio.Source.
func (r *ffReader) ReadBlock(dst audio.Block) (int, error) {
	if r.err == nil {
		r.err = r.stopped()
	}
	if r.err != nil {
		return 0, r.err
	}
	n, err := r.stream.read(dst)
	r.got += int64(n)
	if err == io.EOF && r.more() {
		r.stream.left, err = math.MaxInt64, nil
	}
	switch {
	case err == io.EOF || err == io.ErrUnexpectedEOF:
		err = r.finish()
	case err != nil:
		err = about(r.path, err)
	}
	if stop := r.stopped(); err != nil && stop != nil {
		err = stop
	}
	r.err = err
	return n, err
}

// more reports whether more follows what was promised than a packet's padding. Then the header is wrong
// (the last part of a chained Ogg file counts from 0 again) and everything is delivered.
func (r *ffReader) more() bool {
	extra, _ := r.ahead.Peek(int(r.promise.slack+1) * r.stream.align)
	return int64(len(extra)/r.stream.align) > r.promise.slack
}

// finish reaps the child and decides how the recording ended.
func (r *ffReader) finish() error {
	if _, err := io.Copy(io.Discard, r.ahead); err != nil { // the padding that is left out
		return about(r.path, err)
	}
	err := r.child.wait()
	switch {
	case errors.Is(err, ErrKilled):
		return about(r.path, err)
	case err != nil:
		return fmt.Errorf("%s: the recording breaks off after %.2f s: %w: %w", r.path, r.info.Format.Seconds(r.got), err, io.ErrUnexpectedEOF)
	}
	r.damage = r.child.stderr.text()
	if r.promise.frames >= 0 && r.got < r.promise.frames-r.promise.slack {
		return torn(r.path, r.info, r.got)
	}
	return io.EOF
}
