package meter

import (
	"math"

	"evenshelf/engine/audio"
)

// Envelope gives the true peak of every sample interval: for frame n the largest magnitude of any
// channel from frame n to frame n+1, both included, on the grid Meter reads true peaks on. A limiter
// follows it. Make one with NewEnvelope. It is not safe for concurrent use.
type Envelope struct {
	lanes  []lane // of one new stretch each
	kernel *kernel
	floor  float64
	filled int              // frames waiting in the lanes
	ready  [stretch]float32 // of the stretch searched last
	best   [stretch]float64 // scratch
}

// Delay is how many frames what Envelope gives lies behind what it takes.
const Delay = 2*stretch - 1

// NewEnvelope returns an Envelope for a number of channels; it works at any rate.
func NewEnvelope(channels int) *Envelope {
	e := &Envelope{lanes: make([]lane, channels), kernel: interpolator()}
	for c := range e.lanes {
		e.lanes[c] = newLane(stretch)
	}
	return e
}

// SetFloor says below which magnitude the envelope need not be exact: an interval that stays under it
// may be given as anything from its samples' magnitude to its own, which saves most of the work. A
// limiter sets it to its ceiling. It holds from the next stretch of 32 frames on; 0, as at the start,
// asks for exact values everywhere.
func (e *Envelope) SetFloor(linear float64) { e.floor = linear }

// Delay returns the constant Delay.
func (e *Envelope) Delay() int { return Delay }

// Reset makes the past silence and keeps the floor.
func (e *Envelope) Reset() {
	for c := range e.lanes {
		e.lanes[c].reset()
	}
	clear(e.ready[:])
	e.filled = 0
}

// Process takes a block of any length and puts into dst, which must be as long, the envelope of the
// frames Delay earlier; before the first frame lies silence. Feed Delay frames of silence to get the
// last ones out. Samples that are not finite numbers count as silence. Process does not allocate.
func (e *Envelope) Process(dst []float32, src audio.Block) {
	for at, n := 0, src.Frames(); at < n; {
		take := min(n-at, stretch-e.filled)
		for c := range e.lanes {
			copy(e.lanes[c].raw[e.filled:], src[c][at:at+take])
		}
		copy(dst[at:at+take], e.ready[e.filled+1:])
		at += take
		e.filled += take
		if e.filled == stretch {
			e.work()
			dst[at-1] = e.ready[0]
		}
	}
}

// work searches the stretch before the one that has been filled.
func (e *Envelope) work() {
	clear(e.best[:])
	for c := range e.lanes {
		l := &e.lanes[c]
		l.load()
		l.envelope(&e.best, e.kernel, e.floor)
		l.advance()
	}
	for i, v := range e.best {
		e.ready[i] = float32(v)
	}
	e.filled = 0
}

// envelope raises best to the true peak of each interval of stretch 1, where that lies above floor.
func (l *lane) envelope(best *[stretch]float64, k *kernel, floor float64) {
	bend := l.sharpest(1)
	slack := k.slack[0] * bend
	for j := range best {
		i := stretch + j
		x, y := math.Abs(l.x[i]), math.Abs(l.x[i+1])
		best[j] = max(best[j], x, y)
		known := max(best[j], floor)
		if max(x, y)+slack <= known {
			continue
		}
		if v := k.search(l.window(i), bend, known); v > known {
			best[j] = v
		}
	}
}
