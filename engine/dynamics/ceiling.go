// Package dynamics holds what changes the level of sound from moment to moment.
//
// The ceiling is a look-ahead limiter that works on true peaks and adds no delay: the whole recording
// is at hand, so the gain falls before a peak arrives. For every frame n let d[n] ≥ 0 be the reduction
// (1 − gain) that the peak at n needs. The gain is made in three steps:
//
//	h[n] = max d[n−a … n+b]            a sliding maximum, b the look-ahead, a = b + hold
//	r[n] = max(h[n], α·r[n−1])         an exponential release
//	g[n] = 1 − Σ c[k]·r[n−k], |k| < b  two centred box filters, c ≥ 0, Σc = 1
//
// Every r the filter averages over covers n, so g[n] never exceeds the gain that n needs: the smoothing
// cannot overshoot. What is left are the tiny intersample peaks that the gain's own movement makes;
// NewCeiling therefore puts two such stages in a row, and the second sees almost nothing.
package dynamics

import (
	"math"

	"evenshelf/engine/audio"
)

// PeakReader gives the true-peak envelope of a stream: dst[i] is the largest |amplitude|, over all
// channels, between input frames i−Delay() and i−Delay()+1. What stays under the floor need not be exact.
type PeakReader interface {
	SetFloor(amplitude float64)
	Process(dst []float32, src audio.Block)
	Delay() int
}

// Timing of a ceiling, in seconds. Long times keep low notes clean, short ones touch less of the sound.
type Timing struct {
	LookAhead, Hold, Release float64
}

// ForMusic leaves a 60 Hz tone undistorted: its half period of 8.3 ms is shorter than the hold.
var ForMusic = Timing{LookAhead: 0.005, Hold: 0.010, Release: 0.120}

// margin is how far below the ceiling, dB, a stage aims, so that rounding to the delivered word length
// does not carry a peak over it.
const margin = 0.02

// Ceiling keeps the true peaks of a stream under a limit. Use Process for every block, then Flush.
type Ceiling struct{ first, second *stage }

// NewCeiling returns a ceiling at the given true peak. newReader is called for each of the two stages.
func NewCeiling(f audio.Format, at audio.DBTP, t Timing, newReader func() PeakReader) *Ceiling {
	return &Ceiling{newStage(f, at, t, newReader()), newStage(f, at, t, newReader())}
}

// Process takes the next block and returns sound that is ready, in order; at the start that is less than
// was put in. The block returned is valid until the next call. Blocks may have up to audio.BlockFrames frames.
func (c *Ceiling) Process(b audio.Block) audio.Block { return c.second.process(c.first.process(b)) }

// Flush returns, block by block, what the ceiling still holds back; nil when there is nothing left.
// After that as many frames have come out as went in.
func (c *Ceiling) Flush() audio.Block {
	if b := c.first.flush(); b != nil {
		return c.second.process(b)
	}
	return c.second.flush()
}

// unit is the fixed-point step of a reduction: whole numbers let the box filters run for ever without
// rounding drift, and make an idle ceiling's gain exactly 1.
const unit = 1 << 36

type stage struct {
	reader PeakReader
	limit  float64
	alpha  float64

	window *slidingMax
	held   int64 // released reduction r, in units
	box1   box
	box2   box
	scale  float64 // 1 / (unit · m²)

	delay   delayLine
	latency int // frames between going in and coming out
	owed    int // frames that still have to be swallowed before output starts
	inside  int // frames put in and not yet come out
	calm    int // frames since the last reduction went in

	peaks []float32
	gains []float64
	quiet audio.Block
}

func newStage(f audio.Format, at audio.DBTP, t Timing, reader PeakReader) *stage {
	half := max(1, int(math.Round(t.LookAhead*float64(f.Rate))))
	hold := int(math.Round(t.Hold * float64(f.Rate)))
	m := half + 1 // two boxes of m frames reach half frames to either side
	// One frame more on either side: a peak between two frames is the work of both.
	ahead, behind := half+1, half+1+hold
	s := &stage{
		reader:  reader,
		limit:   (at - margin).Linear(),
		alpha:   math.Exp(-1 / (t.Release * float64(f.Rate))),
		window:  newSlidingMax(ahead + behind + 1),
		box1:    newBox(m),
		box2:    newBox(m),
		scale:   1 / (float64(unit) * float64(m) * float64(m)),
		latency: reader.Delay() + ahead + half,
		peaks:   make([]float32, audio.BlockFrames),
		gains:   make([]float64, audio.BlockFrames),
		quiet:   audio.NewBlock(f.Layout.Channels, audio.BlockFrames),
	}
	reader.SetFloor(s.limit)
	s.owed = s.latency
	s.calm = math.MaxInt / 2
	s.delay = newDelayLine(f.Layout.Channels, s.latency)
	return s
}

func (s *stage) process(b audio.Block) audio.Block {
	s.inside += b.Frames()
	return s.run(b)
}

// flush feeds silence until everything that went in has come out.
func (s *stage) flush() audio.Block {
	if s.inside == 0 {
		return nil
	}
	view := make(audio.Block, len(s.quiet))
	return s.run(s.quiet.Cut(view, 0, min(audio.BlockFrames, s.inside+s.owed)))
}

func (s *stage) run(b audio.Block) audio.Block {
	n := b.Frames()
	peaks, gains := s.peaks[:n], s.gains[:n]
	s.reader.Process(peaks, b)
	moving := s.reductions(gains, peaks)
	out := s.delay.push(b)
	if moving {
		for _, x := range out {
			for i, g := range gains {
				x[i] = float32(float64(x[i]) * g)
			}
		}
	}
	skip := min(s.owed, n)
	s.owed -= skip
	ready := min(n-skip, s.inside)
	s.inside -= ready
	return out.Cut(out, skip, skip+ready)
}

// reductions turns peaks into gains, both in time order, and reports whether any gain differs from 1.
func (s *stage) reductions(gains []float64, peaks []float32) bool {
	loud := false
	for _, p := range peaks {
		if float64(p) > s.limit {
			loud = true
			break
		}
	}
	if !loud && s.held == 0 && s.calm > s.window.size+2*len(s.box1.ring) {
		s.calm += len(peaks)
		return false
	}
	for i, p := range peaks {
		var need int64
		if x := float64(p); x > s.limit {
			need = int64(math.Ceil((1 - s.limit/x) * unit))
			s.calm = 0
		} else if s.held == 0 {
			s.calm++
		}
		h := s.window.push(need)
		s.held = max(h, int64(float64(s.held)*s.alpha))
		reduction := float64(s.box2.push(s.box1.push(s.held))) * s.scale
		gains[i] = 1 - reduction
	}
	return true
}
