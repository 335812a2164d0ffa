package dynamics

import (
	"math"
	"math/bits"

	"evenshelf/engine/audio"
)

// chunk is how many frames a stage looks at between two times that it sets its reader's floor.
const chunk = 256

// stage is one of the two passes of a Ceiling.
type stage struct {
	reader PeakReader
	limit  float64 // a whole float32
	alpha  float64
	// Reductions are whole numbers of 1/unit: so the boxes run for ever without rounding drift, and the gain
	// is exactly 1 or 0 where it should be.
	unit  float64
	whole int64 // unit · m²

	window *slidingMax
	held   int64 // released reduction r, in units
	box1   box
	box2   box
	calm   int     // frames since the last reduction was held
	lasts  float64 // the share of what is held now that the release leaves while a peak read next has a say
	lost   float64 // and what rounding may take of it

	line  line
	part  audio.Block // scratch
	late  int         // frames by which sound comes out after its peak was read
	peaks []float32   // of the last so many frames, and room for a block
	gains []float64
	seen  []float32
}

// levelled is what a stage made: sound, and for each of its frames the gain it was given and the true peak it had.
type levelled struct {
	sound  audio.Block
	gains  []float64
	peaks  []float32
	moving bool // some gain may differ from 1; else the peaks are exact where they are within reach of the limit
}

// newStage returns a stage that keeps true peaks under a limit.
func newStage(f audio.Format, limit audio.DBTP, t Timing, reader PeakReader) *stage {
	frames := func(seconds float64) int { return int(math.Round(min(positive(seconds), 1) * float64(f.Rate))) }
	half := max(1, frames(t.LookAhead))
	m := half + 1 // two boxes of m frames reach half frames to either side
	// One frame more on either side: a peak between two frames is the work of both.
	ahead, behind := half+1, half+1+frames(t.Hold)
	s := &stage{
		reader: reader,
		limit:  float64(below(limit.Linear())),
		alpha:  math.Exp(-1 / (positive(t.Release) * float64(f.Rate))),
		unit:   float64(int64(1) << min(36, 62-2*bits.Len(uint(m)))),
		window: newSlidingMax(ahead + behind + 1),
		box1:   newBox(m),
		box2:   newBox(m),
		line:   newLine(f.Layout.Channels, reader.Delay()+ahead+half),
		part:   make(audio.Block, f.Layout.Channels),
		late:   ahead + half,
		peaks:  make([]float32, ahead+half+audio.BlockFrames),
		gains:  make([]float64, audio.BlockFrames),
		seen:   make([]float32, audio.BlockFrames),
	}
	s.whole = int64(s.unit) * int64(m) * int64(m)
	s.calm = s.memory()
	// A peak has a say for as long as the window is, and is read up to the reader's delay and two chunks
	// after the floor was set.
	span := float64(s.window.size + reader.Delay() + 2*chunk)
	s.lasts = math.Pow(s.alpha, span)
	s.lost = span/s.unit + 1e-6 // the second for the rounding of peaks to float32
	return s
}

// positive returns v, or 0 if it is less or not a number.
func positive(v float64) float64 {
	if v > 0 {
		return v
	}
	return 0
}

// below returns the largest float32 that is not above v.
func below(v float64) float32 {
	f := float32(v)
	if float64(f) > v {
		f = math.Nextafter32(f, 0)
	}
	return f
}

// memory is how many frames a reduction is felt after the last one was held.
func (s *stage) memory() int { return s.window.size + len(s.box1.ring) + len(s.box2.ring) }

// idle reports whether no reduction is felt.
func (s *stage) idle() bool { return s.held == 0 && s.calm >= s.memory() }

// floor returns a magnitude under which no peak that is read next can change the gain: the release alone, of what
// is held now, takes off more than it needs for as long as it has a say. With nothing held it
// is what the second stage wants to know (see wide).
func (s *stage) floor() float64 {
	if s.held == 0 {
		return s.limit * within
	}
	return s.limit / (1 - max(0, s.lasts*float64(s.held)/s.unit-s.lost))
}

// process takes the next block and returns what is ready.
func (s *stage) process(b audio.Block) levelled {
	s.line.inside += b.Frames()
	return s.run(b)
}

func (s *stage) run(b audio.Block) (out levelled) {
	n := b.Frames()
	gains := s.gains[:n]
	for at := 0; at < n; at += chunk {
		end := min(at+chunk, n)
		peaks := s.peaks[s.late+at : s.late+end]
		s.reader.SetFloor(s.floor())
		s.reader.Process(peaks, b.Cut(s.part, at, end))
		if s.reductions(gains[at:end], peaks) {
			out.moving = true
		}
	}
	sound := s.line.push(b)
	if out.moving {
		for _, x := range sound {
			for i, g := range gains {
				x[i] = float32(float64(x[i]) * g)
			}
		}
	}
	copy(s.seen, s.peaks[:n])
	copy(s.peaks, s.peaks[n:n+s.late])
	from, to := s.line.ready(n)
	out.sound, out.gains, out.peaks = sound.Cut(sound, from, to), gains[from:to], s.seen[from:to]
	return out
}

// reductions turns peaks into gains, both in time order, and reports whether any gain may differ from 1.
func (s *stage) reductions(gains []float64, peaks []float32) bool {
	limit := float32(s.limit)
	if s.idle() && !anyOver(peaks, limit) {
		for i := range gains {
			gains[i] = 1
		}
		return false
	}
	whole := float64(s.whole)
	for i, p := range peaks {
		var need int64
		if p > limit {
			need = int64(math.Ceil((1 - s.limit/float64(p)) * s.unit))
		}
		h := s.window.push(need)
		s.held = max(h, int64(float64(s.held)*s.alpha))
		s.calm++
		if s.held != 0 {
			s.calm = 0
		}
		gains[i] = float64(s.whole-s.box2.push(s.box1.push(s.held))) / whole
	}
	return true
}

func anyOver(peaks []float32, limit float32) bool {
	for _, p := range peaks {
		if p > limit {
			return true
		}
	}
	return false
}
