package faults

import (
	"fmt"
	"math"
	"slices"

	"evenshelf/engine/audio"
)

// Clipping cuts the tops off a waveform and leaves plateaus at the highest value the converter, the
// mixer or a decoder could give. A later fade or gain moves that value but keeps the plateaus at the
// recording's own extreme, which is where they are looked for, separately in each channel and direction.
//
// Three neighbours of one value are not enough: the top of a deep note is that flat by itself. But the
// top of a wave is round, so that one sample further on it has fallen little, while a cut wave drops at
// once. A plateau therefore counts only if it ends abruptly on both sides.
const (
	flatSamples = 3    // neighbours at the extreme; common practice is 3 to 7
	flatWithin  = 8e-5 // of full scale, how far they may differ: dither of 16 bits after a change of gain
	// What the next sample must have dropped by. A parabola that stays within flatWithin over three
	// samples has dropped by no more than 4·flatWithin one further on.
	abrupt      = 5e-4 // of full scale
	abruptRatio = 1e-3 // of the extreme
	abruptSteps = 4    // of the recording's own steps, for 8-bit recordings
)

// Loud masters have flat tops of a few samples at drum hits and sound as they were meant to. What is heard
// is time spent at the extreme: a voice recorded too hot is cut at every cycle. So a window is bad when a
// hundredth of it lies on plateaus (1 ms of 100), which takes several cycles, and the recording is
// damaged when a twentieth of its sounding windows are bad. Tried on three pieces of music and ten of
// speech: driven 1 dB past full scale 0 % are bad, 3 dB 0 to 5 % (15 % for one sentence), 6 dB 6 to 30 %,
// 9 dB 11 to 70 %.
const (
	badWindow    = 0.01
	seriousBad   = 0.05  // share of the sounding windows
	seriousLeast = 3     // bad windows, whatever the share
	soundingPeak = -50.0 // dBFS
)

// clipped finds clipping.
type clipped struct {
	step     float32 // smallest difference of neighbours seen: the recording's own resolution
	channels []clippedChannel
	sounding int64 // windows
}

// clippedChannel follows the two extremes of one channel.
type clippedChannel struct {
	up, down extreme
	last     float32 // sample before the window
}

// extreme is one end of a channel's swing, as magnitudes.
type extreme struct {
	level    float32 // the highest so far
	run      int64   // samples of the plateau under way
	entry    float32 // the sample before it
	plateaus int64   // counted at this level
	flat     int64   // samples on them
	first    int64   // frame of the first
	inWindow int64   // samples on plateaus that ended in this window
	bad      int64   // windows
}

func newClipped(f audio.Format) *clipped {
	return &clipped{step: math.MaxFloat32, channels: make([]clippedChannel, f.Layout.Channels)}
}

func (k *clipped) look(w window) {
	for c, x := range w.Block {
		k.learnStep(x[:min(len(x), 64)])
		ch := &k.channels[c]
		if w.peak[c] >= min(ch.up.floor(), ch.down.floor()) || ch.up.run+ch.down.run > 0 {
			k.scan(ch, x, w.from)
		}
		ch.last = x[len(x)-1]
	}
	if float64(slices.Max(w.peak)) > linear(soundingPeak) {
		k.sounding++
	}
}

// learnStep looks for the smallest difference of neighbours.
func (k *clipped) learnStep(x []float32) {
	for i := 1; i < len(x); i++ {
		if d := float32(math.Abs(float64(x[i] - x[i-1]))); d > 0 && d < k.step {
			k.step = d
		}
	}
}

// scan follows both extremes through a window. Nearly every sample is far from either.
//
//go:norace
func (k *clipped) scan(ch *clippedChannel, x []float32, from int64) {
	top, bottom := ch.up.floor(), -ch.down.floor()
	open := ch.up.run+ch.down.run > 0
	before := ch.last
	for i, v := range x {
		if v >= top || v <= bottom || open {
			ch.up.take(v, before, from+int64(i), k.step)
			ch.down.take(-v, -before, from+int64(i), k.step)
			top, bottom = ch.up.floor(), -ch.down.floor()
			open = ch.up.run+ch.down.run > 0
		}
		before = v
	}
	ch.up.endWindow(len(x))
	ch.down.endWindow(len(x))
}

// floor returns the lowest value that lies at the extreme.
func (e *extreme) floor() float32 { return e.level - flatWithin }

// take follows the extreme by one sample; before is the sample in front of it, at its frame.
func (e *extreme) take(v, before float32, at int64, step float32) {
	switch {
	case v > e.level+flatWithin: // what was counted so far did not lie at the extreme
		*e = extreme{level: v, run: 1, entry: before}
	case v >= e.floor():
		if e.run == 0 {
			e.entry = before
		}
		e.run++
	case e.run > 0:
		drop := max(abrupt, abruptRatio*e.level, abruptSteps*step)
		if e.run >= flatSamples && e.level-e.entry >= drop && e.level-v >= drop {
			if e.plateaus == 0 {
				e.first = at - e.run
			}
			e.plateaus++
			e.flat += e.run
			e.inWindow += e.run
		}
		e.run = 0
	}
}

// endWindow judges a window of a number of frames.
func (e *extreme) endWindow(frames int) {
	if float64(e.inWindow) >= badWindow*float64(frames) {
		e.bad++
	}
	e.inWindow = 0
}

func (k *clipped) faults(e extent) []Fault {
	var plateaus, flat, bad int64
	first := e.frames
	for _, ch := range k.channels {
		for _, x := range []extreme{ch.up, ch.down} {
			if x.plateaus == 0 {
				continue
			}
			plateaus += x.plateaus
			flat += x.flat
			first = min(first, x.first)
			bad = max(bad, x.bad)
		}
	}
	if plateaus == 0 {
		return nil
	}
	at, share := e.Seconds(first), float64(bad)/float64(max(1, k.sounding))
	f := Fault{Code: "clipped", Severity: Note, At: at, Length: e.Seconds(flat)}
	f.Words = fmt.Sprintf("clipped %s, first at %s", times(plateaus), audio.Clock(at))
	if bad >= seriousLeast && share >= seriousBad {
		f.Severity = Serious
		f.Words += fmt.Sprintf(", badly in %.0f%% of the time", 100*share)
	}
	return []Fault{f}
}
