package faults

import (
	"fmt"
	"math"

	"evenshelf/engine/audio"
)

// A dropout is a hole of exact zeros in sounding programme, left by a lost packet or a damaged disk, in all
// channels at once or in one while another sounds on. Music and speech fall silent too, but gradually and
// seldom to exact zero; so the sound must be there up to the last sample before the hole and again from the
// first one after it. And there must be much more sound than silence: time-signal pips, keyed Morse, whose pauses
// are no shorter than a third of its signs, and gated sounds are meant to stop. Common practice, no source.
const (
	holeSounds   = 4     // times the length of a hole: the sound there must be since the one before
	shortestHole = 0.002 // seconds
	longestHole  = 1.0   // seconds: longer ones are pauses somebody made
	besideHole   = 0.005 // seconds of sound looked at before and after
	besideLevel  = -46.0 // dBFS rms that they must have, and the channel that sounds on
	cutShort     = 0.1   // of that rms: what the samples at the edges must have
	longPause    = 2.0   // seconds of exact silence amid sound that are worth a note
)

// dropouts finds such holes, and long pauses.
type dropouts struct{ holes []*holes }

func newDropouts(f audio.Format) *dropouts {
	d := &dropouts{[]*holes{newHoles(f, -1)}}
	for c := 0; f.Layout.Channels > 1 && c < f.Layout.Channels; c++ {
		d.holes = append(d.holes, newHoles(f, c))
	}
	return d
}

func (d *dropouts) look(w window) {
	for _, h := range d.holes {
		h.look(w)
	}
}

func (d *dropouts) faults(e extent) (found []Fault) {
	for _, h := range d.holes {
		if h.count > 0 {
			what, at := "the sound", e.Seconds(h.first.from)
			if h.channel >= 0 {
				what = channelName(e.Layout, h.channel)
			}
			found = append(found, Fault{Code: "dropouts", Severity: Doubt, At: at, Length: e.Seconds(h.total),
				Words: fmt.Sprintf("%s breaks off %s, first at %s; the longest hole lasts %.0f ms",
					what, times(h.count), audio.Clock(at), 1000*e.Seconds(h.long))})
		}
		if h.pauses > 0 {
			at := e.Seconds(h.pause)
			found = append(found, Fault{Code: "silence-inside", Severity: Note, At: at, Length: e.Seconds(h.paused),
				Words: fmt.Sprintf("complete silence inside %s, first at %s, %.1f s in all", times(h.pauses), audio.Clock(at), e.Seconds(h.paused))})
		}
	}
	return found
}

// holes follows one channel, or all as one. It looks at every frame only where it has hit upon zeros.
type holes struct {
	channel      int     // −1 for all
	least, most  int64   // frames of a hole
	pauseLeast   int64   // frames of a pause
	beside       int     // frames of sound looked at on each side
	level        float64 // rms they must have
	ended        int64   // frame at which the last hole or pause ended
	hole         hole    // under way, or waiting for the sound after it
	count, total int64   // holes found and their frames
	first        hole    // found
	long         int64   // frames of the longest
	sounded      bool    // there has been sound in a window before
	pauses       int64
	pause        int64 // frame of the first
	paused       int64 // frames
}

// hole is a run of silent frames and the sound beside it.
type hole struct {
	from, frames int64
	sounded      int64 // frames since the hole or pause before
	closed       bool
	before, edge float64 // rms before, and magnitude of the last frame before
	after, onset float64 // sum of squares after, and magnitude of the first frame after
	heard        int     // frames in after
	others       float64 // sum of squares of the other channels meanwhile
}

func newHoles(f audio.Format, channel int) *holes {
	rate := float64(f.Rate)
	return &holes{
		channel:    channel,
		least:      int64(shortest(f.Rate)),
		most:       int64(longestHole * rate),
		pauseLeast: max(2, int64(longPause*rate)),
		beside:     max(1, int(besideHole*rate)),
		level:      audio.DB(besideLevel).Linear(),
	}
}

// shortest returns the frames of the shortest hole.
func shortest(rate int) int { return max(2, int(shortestHole*float64(rate))) }

func (d *holes) look(w window) {
	start := w.wide.Frames() - w.Frames()
	if d.hole.frames > 0 || d.suspicious(w, start) {
		i := start
		if d.hole.frames == 0 { // it may have begun before
			for i > start-int(d.least) && i > 0 && d.magnitude(w, i-1) == 0 {
				i--
			}
		}
		for ; i < w.wide.Frames(); i++ {
			d.take(w, i)
		}
	}
	for _, p := range w.peak {
		d.sounded = d.sounded || float64(p) > audio.DB(silence).Linear()
	}
}

// suspicious reports whether half a hole or more may lie in w, which begins at start.
//
//go:norace
func (d *holes) suspicious(w window, start int) bool {
	for i := start; i < w.wide.Frames(); i += int(d.least / 2) {
		if d.magnitude(w, i) == 0 {
			return true
		}
	}
	return false
}

// magnitude returns the largest magnitude of frame i of w.wide.
func (d *holes) magnitude(w window, i int) (m float64) {
	if d.channel >= 0 {
		return math.Abs(float64(w.wide[d.channel][i]))
	}
	for _, x := range w.wide {
		m = max(m, math.Abs(float64(x[i])))
	}
	return m
}

// others returns the largest magnitude of the channels that are not followed.
func (d *holes) others(w window, i int) (m float64) {
	if d.channel < 0 {
		return 0
	}
	for c, x := range w.wide {
		if c != d.channel {
			m = max(m, math.Abs(float64(x[i])))
		}
	}
	return m
}

// take follows the hole by frame i of w.wide.
//
//go:norace
func (d *holes) take(w window, i int) {
	h, m := &d.hole, d.magnitude(w, i)
	switch {
	case h.closed:
		h.after += m * m
		h.heard++
		if h.heard >= d.beside {
			d.judge()
		}
	case m == 0:
		if h.frames == 0 {
			h.from = w.from + int64(i-w.wide.Frames()+w.Frames())
			h.sounded = h.from - d.ended
		}
		h.frames++
		o := d.others(w, i)
		h.others += o * o
		if h.frames == d.least {
			h.before, h.edge = d.soundBefore(w, i+1-int(d.least))
		}
	case h.frames >= d.least && h.frames <= d.most && h.before >= d.level:
		h.closed, h.onset, h.after, h.heard = true, m, m*m, 1
		d.ended = h.from + h.frames
	default:
		if d.channel < 0 && d.sounded && h.frames >= d.pauseLeast {
			if d.pauses == 0 {
				d.pause = h.from
			}
			d.pauses++
			d.paused += h.frames
		}
		if h.frames >= d.least {
			d.ended = h.from + h.frames
		}
		*h = hole{}
	}
}

// soundBefore returns the rms of the sound before frame i of w.wide and the magnitude of its last frame.
func (d *holes) soundBefore(w window, i int) (rms, edge float64) {
	for j := max(0, i-d.beside); j < i; j++ {
		edge = d.magnitude(w, j)
		rms += edge * edge
	}
	return math.Sqrt(rms / float64(d.beside)), edge
}

// judge counts the hole if there was sound enough before it, there is sound after it too, and both break off.
func (d *holes) judge() {
	h := d.hole
	d.hole = hole{}
	after := math.Sqrt(h.after / float64(d.beside))
	if h.sounded < holeSounds*h.frames || after < d.level || h.edge < cutShort*h.before || h.onset < cutShort*after {
		return
	}
	if d.channel >= 0 && math.Sqrt(h.others/float64(h.frames)) < d.level {
		return // either all channels stop, or this one alone carried the sound
	}
	if d.count == 0 {
		d.first = h
	}
	d.count++
	d.total += h.frames
	d.long = max(d.long, h.frames)
}
