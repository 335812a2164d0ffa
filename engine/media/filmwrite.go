package media

import (
	"context"
	"fmt"
	"math"
	"os"
	"slices"
	"strconv"
	"strings"
	"time"

	"evenshelf/engine/audio"
)

const slowDisk = 20_000_000 // bytes a second that are read at the least

// filmWriter has FFmpeg encode one sound track and put it among the packets of all others, which are copied.
type filmWriter struct {
	*ffWriter
	tool    *Toolbox
	ctx     context.Context // of the look at what was written
	silence int             // frames to send in front
	expect  []expected
	covers  []attachedCover
}

// newFilmWriter starts FFmpeg. What it reads from the pipe is input 0; the film is opened several times (see filmInputs).
func (t *Toolbox) newFilmWriter(ctx context.Context, f *os.File, spec Spec, tags *tagSource) (*filmWriter, error) {
	p, err := t.runProbe(ctx, tags.f, tags.kind)
	if err != nil {
		return nil, err
	}
	source, _, err := p.choose(spec.Film.Track)
	if err != nil {
		return nil, err
	}
	at, err := t.firstSound(ctx, tags.f, tags.kind, spec.Film.Track, source.Codec)
	if err != nil {
		return nil, err
	}
	o := &filmOptions{t: t, ctx: ctx, src: tags, spec: spec, source: source, at: at.seconds(), same: spec.Container == tags.kind.container}
	if !o.same {
		o.begin = p.start() // FFmpeg does so if it is not told to keep them
		o.at -= o.begin
	}
	w := &filmWriter{tool: t, ctx: ctx}
	args, err := o.build(p)
	w.covers = o.covers
	if err != nil {
		w.closeCovers()
		return nil, err
	}
	pcm := Spec{Format: spec.Format, BitDepth: spec.BitDepth, Float: spec.Float, Plain: spec.Plain, Shaped: spec.Shaped}
	if _, isLossy := filmLossy(spec.Codec); isLossy {
		pcm.BitDepth, pcm.Float = 32, true
	}
	if pcm.Format.Layout.Mask == 0 {
		pcm.Format.Layout = audio.UsualLayout(pcm.Format.Layout.Channels)
	}
	if _, ours := lossyCodecs[spec.Codec]; ours { // AC-3 calls its surrounds what the source does
		pcm.Format.Layout = encoderLayout(pcm.Format.Layout)
	}
	files := []*os.File{tags.f, f}
	for _, c := range o.covers {
		files = append(files, c.f)
	}
	c, err := startChild(ctx, false, files, t.ffmpeg, args...)
	if err != nil {
		w.closeCovers()
		return nil, err
	}
	// What has no packets for long is looked for through all of the film before any sound is taken.
	c.stall += time.Duration(tags.size/slowDisk) * time.Second
	w.ffWriter = &ffWriter{child: c, pack: newPacker(pcm), f: f, carry: ffmpegCarrier{}}
	w.silence, w.expect = o.entry.silence, o.expect
	err = w.send(streamHead(pcm))
	if err == nil && w.silence > 0 {
		err = w.send(make([]byte, w.silence*pcm.Format.Layout.Channels*pcm.BitDepth/8))
	}
	if err != nil {
		w.abort()
		return nil, w.refused(err)
	}
	return w, nil
}

func (w *filmWriter) write(src audio.Block) error { return w.refused(w.ffWriter.write(src)) }

// refused marks what FFmpeg says about a track that a container has no room for: trying again cannot help.
func (w *filmWriter) refused(err error) error {
	if err == nil {
		return nil
	}
	if said := err.Error(); strings.Contains(said, "Could not write header") || strings.Contains(said, "not currently supported in container") {
		return fmt.Errorf("%w: the film cannot be written: %w", ErrUnsupported, err)
	}
	return err
}

func (w *filmWriter) finish() error {
	defer w.closeCovers()
	if err := w.refused(w.ffWriter.finish()); err != nil {
		return err
	}
	return w.check()
}

func (w *filmWriter) abort() {
	w.ffWriter.abort()
	w.closeCovers()
}

func (w *filmWriter) closeCovers() {
	for _, c := range w.covers {
		c.f.Close()
	}
	w.covers = nil
}

// expected is a track as it has to be found in the film that was written.
type expected struct {
	kind, codec string
	start       float64 // s; NaN: not looked at
	slack       float64
}

// check looks at what was written: pictures and sound must begin when they did, each, or they are not beside each other.
func (w *filmWriter) check() error {
	k, err := sniff(w.f)
	if err != nil {
		return err
	}
	p, err := w.tool.runProbe(w.ctx, w.f, k)
	if err != nil {
		return err
	}
	found := slices.DeleteFunc(slices.Clone(p.Streams), func(s probeStream) bool { return !s.timed() })
	if len(found) != len(w.expect) {
		return fmt.Errorf("%w: the film came out with %d tracks instead of %d", ErrUnsupported, len(found), len(w.expect))
	}
	for i, e := range w.expect {
		s := found[i]
		start, err := strconv.ParseFloat(s.Start, 64)
		if s.Type != e.kind || s.Codec != e.codec || err == nil && math.Abs(start-e.start) > e.slack {
			return fmt.Errorf("%w: track %d of the film came out as %s beginning at %s s instead of %s at %.3f s", ErrUnsupported, i+1, s.Codec, s.Start, e.codec, e.start)
		}
	}
	return nil
}
