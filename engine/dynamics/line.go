package dynamics

import (
	"math"

	"evenshelf/engine/audio"
)

// line delays planar sound by a fixed number of frames and hands it out as if it did not: the silence that
// would come out first is swallowed, and silence is fed in at the end until all sound is out.
type line struct {
	frames int         // of delay
	buf    audio.Block // frames of memory, followed by room for one block
	out    audio.Block
	view   audio.Block
	quiet  audio.Block
	owed   int // frames that still have to be swallowed before output starts
	inside int // frames put in and not yet come out
}

func newLine(channels, frames int) line {
	return line{
		frames: frames,
		buf:    audio.NewBlock(channels, frames+audio.BlockFrames),
		out:    audio.NewBlock(channels, audio.BlockFrames),
		view:   make(audio.Block, channels),
		quiet:  audio.NewBlock(channels, audio.BlockFrames),
		owed:   frames,
	}
}

// tail returns the next block of silence that brings out what is still inside; nil if nothing is.
func (l *line) tail() audio.Block {
	if l.inside == 0 {
		return nil
	}
	return l.quiet.Cut(l.view, 0, min(audio.BlockFrames, l.inside+l.owed))
}

// push takes a block and returns one as long, delayed; it may be written to until the next push. What is
// not a finite number becomes silence.
func (l *line) push(b audio.Block) audio.Block {
	n := b.Frames()
	for c, x := range b {
		kept, out := l.buf[c], l.out[c]
		clean(kept[l.frames:l.frames+n], x)
		copy(out, kept[:n])
		copy(kept, kept[n:n+l.frames])
	}
	return l.out.Cut(l.view, 0, n)
}

// ready returns which of so many frames that push returned are sound.
func (l *line) ready(frames int) (from, to int) {
	from = min(l.owed, frames)
	l.owed -= from
	n := min(frames-from, l.inside)
	l.inside -= n
	return from, from + n
}

// clean copies src to dst, which is as long, with silence for what is not a finite number.
func clean(dst, src []float32) {
	const infinite = 0x7f800000
	copy(dst, src)
	for i, v := range src {
		if math.Float32bits(v)&infinite == infinite {
			dst[i] = 0
		}
	}
}
