package media

import (
	"bufio"
	"bytes"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"strings"

	"evenshelf/engine/audio"
)

// ffReader reads whatever FFmpeg decodes.
type ffReader struct {
	f       *os.File
	path    string
	info    Info
	child   *child
	stream  *blockStream
	stopped func() error
	got     int64
	most    int64 // frames that there can be; 0: nobody knows
	longest int64 // seconds
	promise promise
	err     error
	damage  string
}

// promise is what a header says about the length, and how far it can be believed.
type promise struct {
	frames int64 // −1 if nothing is promised
	slack  int64 // fewer by so many is not yet a cut recording
	over   int64 // more by so many is the codec's padding and is left out
}

// maxPacket is the longest packet of a lossy codec, in frames, with room to spare (HE-AAC: 2048).
const maxPacket = 4096

// promiseOf weighs the frame count of a container.
func promiseOf(info Info, g gapless) promise {
	p := promise{frames: info.Frames}
	switch {
	case g.trimmed: // exact, but FFmpeg misses padding in the packet that its skipping ends in
		p.over = 1152
	case info.Container == "mp3":
		p.slack = 2 * 1152 // some encoders count the note itself, or leave a frame out
	case info.BitDepth == 0:
		// The length is that of the presentation; packets are whole, so the last one overshoots.
		p.slack, p.over = maxPacket, maxPacket
	}
	return p
}

// begin waits for the head of the child's WAV stream, which says what is really being decoded.
func (r *ffReader) begin(g gapless) error {
	out := bufio.NewReaderSize(r.child, ahead)
	head, err := out.Peek(512)
	if err != nil && err != io.EOF {
		return err
	}
	h, err := parseWAV(bytes.NewReader(head), int64(len(head)))
	var bad *FormatError
	switch {
	case errors.As(err, &bad): // no head, no sound: the child has said why
		switch said := r.child.wait(); {
		case errors.Is(said, ErrKilled), said != nil && r.stopped() != nil:
			return said
		case said != nil:
			return &FormatError{-1, "its sound cannot be decoded: " + said.Error()}
		}
		return &FormatError{-1, strings.TrimSuffix("its sound cannot be decoded: "+r.child.stderr.text(), ": ")}
	case err != nil:
		return err
	}
	if _, err := out.Discard(int(h.data)); err != nil {
		return err
	}
	out = bufio.NewReaderSize(out, (maxPacket+1)*h.align) // the same reader if it is large enough
	if n := h.format.Layout; n.Channels == r.info.Format.Layout.Channels && (n.Mask == 0 || r.info.Container == "flac") {
		h.format.Layout = r.info.Format.Layout
	}
	if h.format.Rate != r.info.Format.Rate {
		r.info.Frames = -1 // counted at another rate than the sound has
	}
	r.info.Format = h.format
	r.promise = promiseOf(r.info, g)
	frames := int64(math.MaxInt64)
	if r.promise.over > 0 && r.promise.frames >= 0 {
		frames = r.promise.frames
	}
	r.stream = newBlockStream(out, unpackerFor(h.container, h.tag == tagFloat), h.align, frames)
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
		r.err = ended(r.path, r.stopped)
	}
	if r.err != nil {
		return 0, r.err
	}
	n, err := r.stream.read(dst)
	r.got += int64(n)
	if err == io.EOF && r.more() {
		r.stream.left, err = math.MaxInt64, nil
	}
	if long := tooLong(r.path, r.info.Format, r.got, r.longest); long != nil {
		r.child.kill()
		r.err = long
		return 0, r.err
	}
	switch {
	case r.most > 0 && r.got > r.most: // gaps in time stamps are filled up
		err = about(r.path, &FormatError{-1, "its time stamps lead far past its end"})
	case err == io.EOF || err == io.ErrUnexpectedEOF:
		err = r.finish()
	case err != nil:
		err = about(r.path, err)
	}
	if stop := ended(r.path, r.stopped); err != nil && stop != nil {
		err = stop
	}
	r.err = err
	return n, err
}

// more reports whether more follows what was promised than a packet's padding. Then the header is wrong
// (the last part of a chained Ogg file counts from 0 again) and everything is delivered.
func (r *ffReader) more() bool {
	extra, _ := r.stream.r.Peek(int(r.promise.over+1) * r.stream.align)
	return int64(len(extra)/r.stream.align) > r.promise.over
}

// finish reaps the child and decides how the recording ended.
func (r *ffReader) finish() error {
	if _, err := io.Copy(io.Discard, r.stream.r); err != nil { // the padding that is left out
		return about(r.path, err)
	}
	err := r.child.wait()
	if errors.Is(err, ErrKilled) {
		return about(r.path, err)
	}
	r.damage = r.child.stderr.text()
	if err != nil {
		return fmt.Errorf("%s: the recording breaks off after %.2f s: %w: %w", r.path, r.info.Format.Seconds(r.got), err, io.ErrUnexpectedEOF)
	}
	if r.promise.frames >= 0 && r.got < r.promise.frames-r.promise.slack {
		return torn(r.path, r.info, r.got)
	}
	return io.EOF
}
