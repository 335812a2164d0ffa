package ride

import (
	"math"
	"slices"
)

// What counts as being heard, in dB and steps.
const (
	overFloor   = 6.0  // speech is at least this far over the noise
	underLocal  = 12.0 // a pause is at least this far below what is loud around it
	local       = 15   // steps to either side that are around
	hidden      = 8    // a pause this long may hide someone much softer
	layers      = 3    // how often it is looked for
	ending      = 5    // what is no longer than this right beside someone louder, and cut off from the rest, is a sound of theirs
	calmSpread  = 1.6  // between the quartiles of a pause that hides nobody, but is too short for steadySteps
	musicUnder  = 40.0 // music goes down to this far below the programme
	soundUnder  = 20.0 // and what only accompanies speech to this
	steadySteps = 12   // what is steady over so many is noise
)

// steadiness is how little the level of noise moves, dB, and how far it is at least below the programme. White noise has an
// SD of 0.1 dB in levels of a tenth of a second, a fan up to 1.0, read speech 1.9 and more, and held chords as little as
// 0.4, so that music has to be told by its level too.
type steadiness struct{ sd, under float64 }

var (
	besideSpeech = steadiness{1.2, 8}
	besideMusic  = steadiness{0.5, 20}
)

// listen finds out where programme is heard. spoken says where it is speech, whose pauses are short and deep;
// talk is whether what is not speech only accompanies it.
func listen(level []float64, power running, loudness float64, spoken []bool, talk bool) []bool {
	active := make([]bool, len(level))
	under := musicUnder
	if talk {
		under = soundUnder
	}
	least := max(gate, loudness-under)
	noise := besideMusic.noise(level, loudness)
	for i := range level {
		active[i] = !noise[i] && decibels(power.mean(i-2, i+3)) > least
	}
	if !slices.Contains(spoken, true) {
		return active
	}
	noise = besideSpeech.noise(level, loudness)
	voices := voices(level, power, noiseFloor(level, power, noise), noise)
	for i, s := range spoken {
		if s {
			active[i] = voices[i]
		}
	}
	return active
}

// noise finds what neither speaks nor plays: it is steady, and soft.
func (s steadiness) noise(level []float64, loudness float64) []bool {
	steady := make([]bool, len(level))
	var sum, squares float64
	for i, v := range level {
		v = max(v, gate-30) - loudness // small numbers, so that squares keep their digits
		sum, squares = sum+v, squares+v*v
		if i >= steadySteps {
			old := max(level[i-steadySteps], gate-30) - loudness
			sum, squares = sum-old, squares-old*old
		}
		mean := sum / steadySteps
		if i >= steadySteps-1 && mean < -s.under && squares/steadySteps-mean*mean < s.sd*s.sd {
			fill(steady[i+1-steadySteps:i+1], true)
		}
	}
	return steady
}

// noiseFloor returns the noise floor of every step: the median of the steady steps within a quarter of a minute or
// so around. Where there are none, since pauses are short, it is the softest third of a second there.
func noiseFloor(level []float64, power running, steady []bool) []float64 {
	const block, breath = 10 * StepsPerSecond, 3
	floor := make([]float64, len(level))
	var around []float64
	for at := 0; at < len(level); at += block {
		around = around[:0]
		softest := math.Inf(1)
		from, to := max(0, at-block), min(len(level), at+2*block)
		for i := from; i < to; i++ {
			if steady[i] {
				around = append(around, level[i])
			}
			if i+breath <= to {
				softest = min(softest, decibels(power.mean(i, i+breath)))
			}
		}
		median := softest
		if len(around) > 0 {
			slices.Sort(around)
			median = around[len(around)/2]
		}
		fill(floor[at:min(len(level), at+block)], median)
	}
	return floor
}

// voices finds speech, in layers: whoever is much softer than those before and after is found in what they
// leave as a pause.
func voices(level []float64, power running, floor []float64, steady []bool) []bool {
	active, never := make([]bool, len(level)), slices.Clone(steady)
	smooth := make([]float64, len(level))
	pending := []Span{{0, len(level)}}
	var top []float64
	for range layers {
		for _, s := range pending {
			for i := s.From; i < s.To; i++ { // without what is beside the pause
				smooth[i] = decibels(power.mean(max(s.From, i-1), min(s.To, i+2)))
			}
			top = loudestAround(top, smooth[s.From:s.To], local)
			for i := s.From; i < s.To; i++ {
				active[i] = !never[i] && level[i] > max(gate, floor[i]+overFloor, top[i-s.From]-underLocal)
			}
			s.endings(level, active, never)
		}
		pending = pending[:0]
		runs(active, func(from, to int, on bool) {
			if !on && to-from >= hidden && !calm(level[from:to]) {
				pending = append(pending, Span{from, to})
			}
		})
	}
	return active
}

// endings takes back what was heard at either end of a pause for a moment only, far softer than what is beyond: it is how
// the word before dies away, or the breath before the next.
func (s Span) endings(level []float64, active, never []bool) {
	drop := func(at, step, end int) {
		edge := at
		for k := 0; k < ending && at != end && !active[at]; k++ { // a gap, or what was taken back before
			at += step
		}
		reach, loudest := at, silence
		for reach != end && active[reach] {
			loudest = max(loudest, level[reach])
			reach += step
		}
		beyond := silence
		for k, i := 0, edge-step; k < StepsPerSecond && i >= 0 && i < len(level); k, i = k+1, i-step {
			beyond = max(beyond, level[i])
		}
		short := max(reach-at, at-reach) <= ending && loudest < beyond-underLocal
		for k, i := 0, reach; short && k <= pause+1 && i != end; k, i = k+1, i+step {
			short = !active[i]
		}
		for i := at; short && i != reach; i += step {
			active[i], never[i] = false, true
		}
	}
	if s.From > 0 {
		drop(s.From, 1, s.To)
	}
	if s.To < len(active) {
		drop(s.To-1, -1, s.From-1)
	}
}

// calm reports whether a pause is too short to be told by steadiness, but steady.
func calm(level []float64) bool {
	if len(level) >= 2*steadySteps {
		return false
	}
	sorted := slices.Sorted(slices.Values(level))
	return sorted[len(sorted)*3/4]-sorted[len(sorted)/4] < calmSpread
}

// loudestAround returns the highest level within reach steps of each, in dst if that is long enough.
func loudestAround(dst, level []float64, reach int) []float64 {
	dst = sized(dst, len(level))
	var queue []int // levels that may still be the highest, falling
	for i := range len(level) + reach {
		if i < len(level) {
			for len(queue) > 0 && level[queue[len(queue)-1]] <= level[i] {
				queue = queue[:len(queue)-1]
			}
			queue = append(queue, i)
		}
		if at := i - reach; at >= 0 {
			for queue[0] < at-reach {
				queue = queue[1:]
			}
			dst[at] = level[queue[0]]
		}
	}
	return dst
}

// spokenParts says where a course is speech; unknown is what it is if nobody has looked. Whoever judges stretches of
// seconds sees no speech in a pause, nor in the first words of a soft voice after it: what is short between speech, and
// what is right beside it, goes by the rules for speech too.
func spokenParts(likelihood []float32, n int, unknown bool) []bool {
	const short, beside = 50, 8 // steps
	spoken := make([]bool, n)
	for i := range spoken {
		spoken[i] = unknown
		if i < len(likelihood) && !math.IsNaN(float64(likelihood[i])) {
			spoken[i] = likelihood[i] >= 0.5
		}
	}
	runs(slices.Clone(spoken), func(from, to int, speech bool) {
		switch {
		case speech || to-from == n:
		case to-from <= short:
			fill(spoken[from:to], true)
		default:
			if from > 0 {
				fill(spoken[from:from+beside], true)
			}
			if to < n {
				fill(spoken[to-beside:to], true)
			}
		}
	})
	return spoken
}
