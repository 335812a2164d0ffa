// Package faults finds what is wrong with a recording before anybody levels it.
//
// Each detector looks for one thing, in one file, and is a check: it sees the recording in windows of
// 100 ms and answers at the end. Detector feeds them all in one pass. A level in dBFS here is re a full
// scale of ±1.0: a peak level where it speaks of samples, an rms level where it speaks of sound.
//
// Loops over samples are marked norace: a Detector belongs to one goroutine, and tests of whole recordings
// would take twenty times as long under the race detector.
//
// Offsets, silence, missing and twin channels are measured; clicks, hum, dropouts, clipping and narrow bandwidth
// are recognised, and that can go wrong both ways: how often it does, on real recordings and on faults put into
// them, is printed and held to limits by the tests of false alarms and of detection.
//
// A detector would rather miss a doubtful case than call a good recording damaged: what it finds may
// hold a levelled copy back until somebody has listened.
package faults

import (
	"cmp"
	"slices"

	"evenshelf/engine/audio"
)

// check is one detector.
type check interface {
	// look takes the next window.
	look(w window)
	// faults says what was found in the whole recording.
	faults(e extent) []Fault
}

// measure is a check that knows part of a recording's condition. It is asked after faults, and not at all
// when the recording is empty.
type measure interface {
	measure(e extent, c *Condition)
}

// extent is the whole recording, as a check learns it at the end.
type extent struct {
	audio.Format
	frames int64
	peak   []float32 // largest magnitude of each channel
}

// silence is the level in dBFS no sample of a silent recording, or of a silent part, rises above.
const silence = -70.0

// Detector looks for every fault in one recording. Make one with New. It is not safe for concurrent use.
type Detector struct {
	format audio.Format
	odd    nonFinite // sees the samples first and mends them for the others
	checks []check
	buf    audio.Block // pastFrames and a window
	past   int
	down   *decimator
	w      window
	views  [2]audio.Block
	filled int       // frames of the window
	peak   []float32 // of the recording
}

// New returns a Detector for recordings of a format.
func New(f audio.Format) *Detector {
	f.Rate = max(1, f.Rate) // a nonsensical rate must not divide by zero
	n, size := f.Layout.Channels, max(1, f.Rate/10)
	figures := audio.NewBlock(4, n)
	down := newDecimator(f)
	return &Detector{
		format: f,
		checks: []check{newClipped(f), newOffset(f), new(silences), newDropouts(f), newPair(f), unused{}, newClicks(f), newBand(f), newHum(f, down.rate), scale{}},
		buf:    audio.NewBlock(n, pastFrames(f.Rate)+size),
		past:   pastFrames(f.Rate),
		w: window{
			top: figures[0], bottom: figures[1], peak: figures[2], sums: make([]float64, n),
			tops: audio.NewBlock(n, parts), bottoms: audio.NewBlock(n, parts),
		},
		down:  down,
		views: [2]audio.Block{make(audio.Block, n), make(audio.Block, n)},
		peak:  figures[3],
	}
}

// Write looks at a block of any length. The block must have the channels of the format; it is neither
// kept nor changed.
func (d *Detector) Write(b audio.Block) {
	for at, n := 0, b.Frames(); at < n; {
		free := d.past + d.filled
		take := min(n-at, d.buf.Frames()-free)
		for c := range d.buf {
			copy(d.buf[c][free:], b[c][at:at+take])
		}
		at += take
		d.filled += take
		if free+take == d.buf.Frames() {
			d.look()
		}
	}
}

// look shows the window that has been filled to every check.
func (d *Detector) look() {
	w := &d.w
	w.Block = d.buf.Cut(d.views[0], d.past, d.past+d.filled)
	w.wide = d.buf.Cut(d.views[1], 0, d.past+d.filled)
	for c := range w.Block {
		if w.survey(c); !finite(w.peak[c]) {
			d.odd.mend(*w)
			w.survey(c)
		}
		d.peak[c] = max(d.peak[c], w.peak[c])
	}
	w.mended = d.odd.samples > 0 && d.odd.last >= w.from-int64(d.past)
	w.low = d.down.take(*w)
	for _, c := range d.checks {
		c.look(*w)
	}
	for _, x := range d.buf {
		copy(x, x[d.filled:d.filled+d.past])
	}
	w.from += int64(d.filled)
	d.filled = 0
}

// Finish returns what was found, worst first, then by time, never nil; and the signal's condition. Call it
// once, after the last Write.
func (d *Detector) Finish() ([]Fault, Condition) {
	if d.filled > 0 {
		d.look()
	}
	e := extent{d.format, d.w.from, d.peak}
	found, state := append([]Fault{}, d.odd.faults(e)...), Unmeasured()
	for _, c := range d.checks {
		found = append(found, c.faults(e)...)
		if m, ok := c.(measure); ok && e.frames > 0 {
			m.measure(e, &state)
		}
	}
	rank := map[Severity]int{Serious: 0, Doubt: 1, Note: 2}
	slices.SortStableFunc(found, func(a, b Fault) int {
		return cmp.Or(cmp.Compare(rank[a.Severity], rank[b.Severity]), cmp.Compare(a.At, b.At))
	})
	return found, state
}
