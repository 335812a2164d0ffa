package faults

import (
	"fmt"
	"math"
	"slices"

	"evenshelf/engine/audio"
)

// Clipping cuts the tops off a waveform and leaves plateaus at the highest value the converter, the
// mixer or a decoder could give. A later gain moves that value but keeps the plateaus where they are: at
// the extreme of what was recorded together. So they are looked for at the extreme of every window,
// separately in each channel and direction.
//
// Three neighbours of one value are not enough: the top of a deep note is that flat by itself. But the
// top of a wave is round, so that one sample further on it has fallen little, while a cut wave drops at
// once. A plateau therefore counts only if it ends abruptly on both sides; and if it lies below the
// extreme of the whole recording, only if others lie at the same height, which must come from other waves: a
// passage that is played again has its flat tops at the same height too.
//
// A square wave, such as a chip plays, is flat without ever having been cut. It jumps from one extreme to the
// other, which a cut wave hardly ever does from one sample to the next.
const (
	flatSamples = 3    // neighbours at the extreme; common practice is 3 to 7
	flatWithin  = 8e-5 // of full scale, how far they may differ: dither of 16 bits after a change of gain
	// What the next sample must have dropped by. A parabola that stays within flatWithin over three
	// samples has dropped by no more than 4·flatWithin one further on.
	abrupt      = 5e-4      // of full scale
	abruptRatio = 1e-3      // of the extreme
	abruptSteps = 4         // of the recording's own steps, for 8-bit recordings
	coarsest    = 1.0 / 128 // of full scale: 8 bits; there are no coarser steps
	plateauLow  = 0.02      // of full scale: lower ones are not looked for
	sameHeight  = 5         // plateaus below the recording's extreme
	jump        = 0.9       // of the window's swing between two samples: not the slope of a cut wave
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
	sides    []side  // two of each channel: its tops, its bottoms
	sounding int64   // windows
}

// side is one end of a channel's swing, turned so that it is up.
type side struct {
	extreme  float32     // of the recording
	ceilings [16]ceiling // heights at which there are plateaus
	run      int         // samples of a plateau that reaches into the next window
	level    float32     // its height
	entry    float32     // the sample before it
	swing    float32     // of the window, from its level to the opposite extreme
}

// ceiling is a height at which waves were cut, unless chance made it so.
type ceiling struct {
	level    float32
	plateaus int64
	flat     int64                  // samples on them
	first    int64                  // frame of the first
	waves    int                    // plateaus with other samples beside them than those before, sameHeight at most
	beside   [sameHeight][2]float32 // their entries and exits
	inWindow int64                  // samples on plateaus that ended in this window
	bad      int64                  // windows
}

func newClipped(f audio.Format) *clipped {
	return &clipped{step: coarsest, sides: make([]side, 2*f.Layout.Channels)}
}

func (k *clipped) look(w window) {
	start := w.wide.Frames() - w.Frames()
	for c, x := range w.wide {
		k.learnStep(x[start:min(start+64, len(x))])
		swing := w.top[c] + w.bottom[c]
		k.sides[2*c].look(x, 1, w.top[c], swing, w.tops[c], start, w.from, k.step)
		k.sides[2*c+1].look(x, -1, w.bottom[c], swing, w.bottoms[c], start, w.from, k.step)
	}
	if float64(slices.Max(w.peak)) > audio.DB(soundingPeak).Linear() {
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

// look takes a window that begins at index start of x, at a frame, and when multiplied by sign rises to top, each of
// its parts to one of tops, and falls swing below it. Of three neighbours one is met with even if only every third
// sample is looked at.
//
//go:norace
func (s *side) look(x []float32, sign, top, swing float32, tops []float32, start int, from int64, step float32) {
	s.extreme = max(s.extreme, top)
	done := start
	if s.run > 0 {
		for done < len(x) && sign*x[done] >= s.level-flatWithin && sign*x[done] <= s.level+flatWithin {
			done++
		}
		s.run += done - start
		if done == len(x) {
			return
		}
		s.plateau(s.run, sign*x[done], from+int64(done-start-s.run), step)
		s.run = 0
	}
	floor := top - flatWithin
	for p, t := range tops {
		if t < floor || top < plateauLow {
			continue
		}
		end := start + part(p+1, len(x)-start)
		for i := max(done, start+part(p, len(x)-start)); i < end; i += flatSamples {
			if sign*x[i] < floor {
				continue
			}
			first := i
			for first > 1 && sign*x[first-1] >= floor {
				first--
			}
			for i < len(x) && sign*x[i] >= floor {
				i++
			}
			s.level, s.entry, s.swing, done = top, sign*x[first-1], swing, i
			if i == len(x) {
				s.run = i - first
				break
			}
			s.plateau(i-first, sign*x[i], from+int64(first-start), step)
		}
	}
	for i := range s.ceilings {
		c := &s.ceilings[i]
		if float64(c.inWindow) >= badWindow*float64(len(x)-start) {
			c.bad++
		}
		c.inWindow = 0
	}
}

// plateau judges a run of samples that lie at level, exit is the sample behind them.
func (s *side) plateau(run int, exit float32, at int64, step float32) {
	drop := max(abrupt, abruptRatio*s.level, abruptSteps*step)
	in, out := s.level-s.entry, s.level-exit
	if run < flatSamples || in < drop || out < drop || in > jump*s.swing || out > jump*s.swing {
		return
	}
	c := s.ceiling()
	if c.plateaus == 0 {
		c.level, c.first = s.level, at
	}
	c.plateaus++
	c.flat += int64(run)
	c.inWindow += int64(run)
	if wave := [2]float32{s.entry, exit}; c.waves < sameHeight && !slices.Contains(c.beside[:c.waves], wave) {
		c.beside[c.waves] = wave
		c.waves++
	}
}

// ceiling returns the one at level, or makes room for it: the least confirmed has to go, but not the highest.
func (s *side) ceiling() *ceiling {
	var least, highest *ceiling
	for i := range s.ceilings {
		c := &s.ceilings[i]
		if c.plateaus > 0 && float32(math.Abs(float64(c.level-s.level))) <= flatWithin {
			return c
		}
		if highest == nil || c.level > highest.level {
			highest = c
		}
	}
	for i := range s.ceilings {
		if c := &s.ceilings[i]; (least == nil || c.plateaus < least.plateaus) && (c != highest || c.plateaus == 0) {
			least = c
		}
	}
	*least = ceiling{}
	return least
}

func (k *clipped) faults(e extent) []Fault {
	var plateaus, flat, bad int64
	first := e.frames
	for _, s := range k.sides {
		var inSide int64
		for _, c := range s.ceilings {
			if c.plateaus == 0 || c.level < s.extreme-flatWithin && c.waves < sameHeight {
				continue
			}
			plateaus += c.plateaus
			flat += c.flat
			first = min(first, c.first)
			inSide += c.bad
		}
		bad = max(bad, inSide)
	}
	if plateaus == 0 {
		return nil
	}
	at, share := e.Seconds(first), min(1, float64(bad)/float64(max(1, k.sounding)))
	f := Fault{Code: "clipped", Severity: Note, At: at, Length: e.Seconds(min(flat, e.frames))}
	f.Words = fmt.Sprintf("clipped %s, first at %s", times(plateaus), audio.Clock(at))
	if bad >= seriousLeast && share >= seriousBad {
		f.Severity = Serious
		f.Words += fmt.Sprintf(", badly in %.0f %% of the time", 100*share)
	}
	return []Fault{f}
}
