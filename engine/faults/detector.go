// Package faults finds what is wrong with a recording before anybody levels it.
//
// Each detector looks for one thing, in one file, and is a check: it sees the recording in windows of
// 100 ms and answers at the end. Detector feeds them all in one pass. A level in dBFS here is re a full
// scale of ±1.0: a peak level where it speaks of samples, an rms level where it speaks of sound.
//
// Loops over samples are marked norace: a Detector belongs to one goroutine, and tests of whole recordings
// would take twenty times as long under the race detector.
//
// A detector would rather miss a doubtful case than call a good recording damaged: what it finds may
// hold a levelled copy back until somebody has listened.
package faults

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"evenshelf/engine/audio"
)

// check is one detector.
type check interface {
	// look takes the next window. Every sample is finite; a check must not keep or change the block.
	look(w window)
	// faults says what was found in the whole recording.
	faults(e extent) []Fault
}

// window is a part of the recording: 100 ms, only the last may be shorter.
type window struct {
	audio.Block
	from int64     // its first frame
	peak []float32 // largest magnitude of each channel in it
}

// extent is the whole recording, as a check learns it at the end.
type extent struct {
	audio.Format
	frames int64
	peak   []float32 // largest magnitude of each channel
}

// silence is the level in dBFS no sample of a silent recording, or of a silent part, rises above.
const silence = -70.0

// silent reports whether nothing can be heard in the whole recording; most checks have no more to say.
func (e extent) silent() bool { return slices.Max(e.peak) <= float32(linear(silence)) }

// Detector looks for every fault in one recording. Make one with New. It is not safe for concurrent use.
type Detector struct {
	format audio.Format
	odd    nonFinite // sees the samples first and mends them for the others
	checks []check
	buf    audio.Block
	view   audio.Block
	filled int
	done   int64
	peak   []float32 // of the window
	peaks  []float32 // of the recording
}

// New returns a Detector for recordings of a format.
func New(f audio.Format) *Detector {
	f.Rate = max(1, f.Rate) // a nonsensical rate must not divide by zero
	size := max(1, f.Rate/10)
	return &Detector{
		format: f,
		buf:    audio.NewBlock(f.Layout.Channels, size),
		view:   make(audio.Block, f.Layout.Channels),
		peak:   make([]float32, f.Layout.Channels),
		peaks:  make([]float32, f.Layout.Channels),
		checks: []check{newClipped(f), newOffset(f), new(silences), newDropouts(f), newPair(f), scale{}},
	}
}

// Write looks at a block of any length. The block must have the channels of the format; it is neither
// kept nor changed.
func (d *Detector) Write(b audio.Block) {
	for at, n := 0, b.Frames(); at < n; {
		take := min(n-at, d.buf.Frames()-d.filled)
		for c := range d.buf {
			copy(d.buf[c][d.filled:], b[c][at:at+take])
		}
		at += take
		d.filled += take
		if d.filled == d.buf.Frames() {
			d.look()
		}
	}
}

// look shows the window that has been filled to every check.
func (d *Detector) look() {
	w := window{d.buf.Cut(d.view, 0, d.filled), d.done, d.peak}
	d.odd.mend(w)
	for c, x := range w.Block {
		w.peak[c] = largest(x)
		d.peaks[c] = max(d.peaks[c], w.peak[c])
	}
	for _, c := range d.checks {
		c.look(w)
	}
	d.done += int64(d.filled)
	d.filled = 0
}

// Finish returns what was found, worst first, then by time; never nil. Call it once, after the last Write.
func (d *Detector) Finish() []Fault {
	if d.filled > 0 {
		d.look()
	}
	e := extent{d.format, d.done, d.peaks}
	found := append([]Fault{}, d.odd.faults(e)...)
	for _, c := range d.checks {
		found = append(found, c.faults(e)...)
	}
	rank := map[Severity]int{Serious: 0, Doubt: 1, Note: 2}
	slices.SortStableFunc(found, func(a, b Fault) int {
		return cmp.Or(cmp.Compare(rank[a.Severity], rank[b.Severity]), cmp.Compare(a.At, b.At))
	})
	return found
}

// largest returns the largest magnitude; bit patterns without their sign order alike.
//
//go:norace
func largest(x []float32) float32 {
	var peak uint32
	for _, v := range x {
		peak = max(peak, math.Float32bits(v)<<1)
	}
	return math.Float32frombits(peak >> 1)
}

// linear returns the amplitude of a level in dBFS.
func linear(dbfs float64) float64 { return math.Pow(10, dbfs/20) }

// times writes a count as people say it.
func times(n int64) string {
	switch n {
	case 1:
		return "once"
	case 2:
		return "twice"
	}
	return fmt.Sprintf("%d times", n)
}

// channelName says which channel is meant.
func channelName(l audio.Layout, c int) string {
	switch p := l.Position(c); {
	case l.Channels == 1:
		return "the sound"
	case p == audio.FrontLeft:
		return "the left channel"
	case p == audio.FrontRight:
		return "the right channel"
	}
	return fmt.Sprintf("channel %d", c+1)
}
