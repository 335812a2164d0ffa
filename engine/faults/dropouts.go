package faults

import (
	"fmt"
	"math"

	"evenshelf/engine/audio"
)

// A dropout is a hole of exact zeros in sounding programme, in all channels at once, left by a lost packet
// or a damaged disk. Music and speech fall silent too, but gradually and seldom to exact zero; so the sound
// must be there up to the last sample before the hole and again from the first one after it.
// Common practice, no source.
const (
	shortestHole = 0.002 // seconds
	longestHole  = 1.0   // seconds: longer ones are pauses somebody made
	besideHole   = 0.005 // seconds of sound looked at before and after
	besideLevel  = -46.0 // dBFS rms that they must have
	cutShort     = 0.1   // of that rms: what the samples at the edges must have
)

// dropouts finds such holes. It looks at every frame only where it has hit upon zeros.
type dropouts struct {
	least, most  int64       // frames of a hole
	beside       int64       // frames of sound looked at on each side
	level        float64     // rms they must have
	tail         audio.Block // the least + beside frames before the window
	hole         hole        // under way, or waiting for the sound after it
	count, total int64       // holes found and their frames
	first, long  hole        // the first and the longest one found
}

// hole is a run of silent frames and the sound beside it.
type hole struct {
	from, frames int64
	closed       bool
	before, edge float64 // rms before, and magnitude of the last frame before
	after, onset float64 // sum of squares after, and magnitude of the first frame after
	heard        int64   // frames in after
}

func newDropouts(f audio.Format) *dropouts {
	rate := float64(f.Rate)
	d := &dropouts{
		least:  max(2, int64(shortestHole*rate)),
		most:   int64(longestHole * rate),
		beside: max(1, int64(besideHole*rate)),
		level:  linear(besideLevel),
	}
	d.tail = audio.NewBlock(f.Layout.Channels, int(d.least+d.beside))
	return d
}

func (d *dropouts) look(w window) {
	if d.hole.frames > 0 || d.suspicious(w) {
		i := 0
		if d.hole.frames == 0 { // it may have begun before
			for -i < int(d.least) && d.magnitude(w, i-1) == 0 {
				i--
			}
		}
		for ; i < w.Frames(); i++ {
			d.take(w, i)
		}
	}
	for c, x := range w.Block {
		t := d.tail[c]
		kept := copy(t, t[min(len(x), len(t)):])
		copy(t[kept:], x[max(0, len(x)-len(t)):])
	}
}

// suspicious reports whether half a hole or more may lie in w.
func (d *dropouts) suspicious(w window) bool {
	for i := 0; i < w.Frames(); i += int(d.least / 2) {
		if d.magnitude(w, i) == 0 {
			return true
		}
	}
	return false
}

// magnitude returns the largest magnitude of frame i, which may lie in the tail before w.
func (d *dropouts) magnitude(w window, i int) (m float64) {
	for c, x := range w.Block {
		if i < 0 {
			t := d.tail[c]
			m = max(m, math.Abs(float64(t[len(t)+i])))
			continue
		}
		m = max(m, math.Abs(float64(x[i])))
	}
	return m
}

// take follows the hole by one frame.
func (d *dropouts) take(w window, i int) {
	h, m := &d.hole, d.magnitude(w, i)
	switch {
	case h.closed:
		h.after += m * m
		h.heard++
		if h.heard == d.beside {
			d.judge()
		}
	case m == 0:
		if h.frames == 0 {
			h.from = w.from + int64(i)
		}
		h.frames++
		if h.frames == d.least {
			h.before, h.edge = d.soundBefore(w, i+1-int(d.least))
		}
	case h.frames >= d.least && h.frames <= d.most && h.before >= d.level:
		h.closed, h.onset, h.after, h.heard = true, m, m*m, 1
	default:
		*h = hole{}
	}
}

// soundBefore returns the rms of the sound before frame i and the magnitude of its last frame.
func (d *dropouts) soundBefore(w window, i int) (rms, edge float64) {
	for j := i - int(d.beside); j < i; j++ {
		edge = d.magnitude(w, j)
		rms += edge * edge
	}
	return math.Sqrt(rms / float64(d.beside)), edge
}

// judge counts the hole if there is sound after it too and both break off.
func (d *dropouts) judge() {
	h := d.hole
	d.hole = hole{}
	after := math.Sqrt(h.after / float64(d.beside))
	if after < d.level || h.edge < cutShort*h.before || h.onset < cutShort*after {
		return
	}
	if d.count == 0 {
		d.first = h
	}
	if h.frames > d.long.frames {
		d.long = h
	}
	d.count++
	d.total += h.frames
}

func (d *dropouts) faults(e extent) []Fault {
	if d.count == 0 {
		return nil
	}
	at := e.Seconds(d.first.from)
	return []Fault{{
		Code: "dropouts", Severity: Doubt, At: at, Length: e.Seconds(d.total),
		Words: fmt.Sprintf("the sound breaks off %s, first at %s; the longest hole lasts %.0f ms",
			times(d.count), audio.Clock(at), 1000*e.Seconds(d.long.frames)),
	}}
}
