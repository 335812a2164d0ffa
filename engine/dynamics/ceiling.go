// Package dynamics holds what changes the level of sound from moment to moment: a compressor and a ceiling.
// Neither adds delay: the whole recording is at hand, so the gain falls before the sound gets loud.
package dynamics

import "evenshelf/engine/audio"

// PeakReader gives the true-peak envelope of a stream: dst[i] is the largest |amplitude|, over all
// channels, between input frames i−Delay() and i−Delay()+1. What stays under the floor, as it was set last
// or before that, may be anything from the samples' magnitude to its own.
type PeakReader interface {
	SetFloor(amplitude float64)
	Process(dst []float32, src audio.Block)
	Delay() int
}

// Timing of a ceiling, in seconds. Long times keep low notes clean, short ones touch less of the sound. A tone
// under steady limiting stays a tone as long as half its period is not longer than twice the look-ahead and the hold
// together. What is negative or not a number counts as 0; more than 1 s of look-ahead or hold as 1 s.
type Timing struct {
	LookAhead, Hold, Release float64
}

// How far below the ceiling the two stages aim, dB. The second leaves room for the rounding to a word
// length; the first for the peaks that its own movement makes, so that hardly any are left to the second.
const (
	firstMargin  = 0.05
	secondMargin = 0.02
)

// Ceiling is a look-ahead limiter that keeps the true peaks of a stream under a limit. Use Process for every
// block, then Flush.
//
// For every frame n let d[n] ≥ 0 be the reduction (1 − gain) that the peak at n needs. The gain is made in
// three steps:
//
//	h[n] = max d[n−a … n+b]            a sliding maximum, b the look-ahead, a = b + hold
//	r[n] = max(h[n], α·r[n−1])         an exponential release
//	g[n] = 1 − Σ c[k]·r[n−k], |k| < b  two centred box filters, c ≥ 0, Σc = 1
//
// Every r the filter averages over covers n, so g[n] never exceeds the gain that n needs: the smoothing
// cannot overshoot. What is left are the tiny intersample peaks that the gain's own movement makes, and those
// that a reader of few samples does not see (see wide): there are two such stages in a row, and the second
// finds almost nothing. While the first does nothing the second does not even read.
type Ceiling struct {
	first, second *stage
	wide          *wide     // the second's reader
	gains         []float64 // of the first stage, for what is inside the second
	moved         int       // how many of them, from the start, may differ from 1
	still         int       // frames that have gone into the second stage since the first last moved
	tally         tally
}

// NewCeiling returns a ceiling at the given true peak. newReader is called for each of the two stages; the delay of
// the readers must not be over 256 frames.
func NewCeiling(f audio.Format, at audio.DBTP, t Timing, newReader func() PeakReader) *Ceiling {
	c := &Ceiling{tally: newTally(f.Rate)}
	c.wide = newWide(f.Layout.Channels, newReader(), (at - secondMargin).Linear())
	c.first = newStage(f, at-firstMargin, t, newReader())
	c.second = newStage(f, at-secondMargin, t, c.wide)
	c.gains = make([]float64, 0, c.second.line.frames+audio.BlockFrames)
	return c
}

// Process takes the next block and returns sound that is ready, in order; at the start that is less than
// was put in. The block returned is valid until the next call. Blocks may have up to audio.BlockFrames frames.
func (c *Ceiling) Process(b audio.Block) audio.Block { return c.pass(c.first.process(b)) }

// Flush returns, block by block, what the ceiling still holds back; nil when there is nothing left.
// After that as many frames have come out as went in.
func (c *Ceiling) Flush() audio.Block {
	if b := c.first.line.tail(); b != nil {
		return c.pass(c.first.run(b))
	}
	if b := c.second.line.tail(); b != nil {
		c.wide.expect(nil, false)
		return c.count(c.second.run(b))
	}
	return nil
}

// Work returns what both stages took off the sound that has come out so far.
func (c *Ceiling) Work() Work { return c.tally.result() }

// pass hands what the first stage made to the second.
func (c *Ceiling) pass(l levelled) audio.Block {
	c.gains = append(c.gains, l.gains...)
	if l.moving {
		c.moved, c.still = len(c.gains), 0
	}
	c.wide.expect(l.peaks, c.still > wideSpan)
	if !l.moving {
		c.still += len(l.gains)
	}
	return c.count(c.second.process(l.sound))
}

// count keeps account of the gain of both stages.
func (c *Ceiling) count(l levelled) audio.Block {
	n := len(l.gains)
	if l.moving || c.moved > 0 {
		for i, g := range c.gains[:n] {
			l.gains[i] *= g
		}
		c.tally.add(l.gains)
	} else {
		c.tally.idle(n)
	}
	c.gains = c.gains[:copy(c.gains, c.gains[n:])]
	c.moved = max(0, c.moved-n)
	return l.sound
}
