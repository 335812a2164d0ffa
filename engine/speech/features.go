package speech

import "math"

// The features of a window, each divided so that it is of the order of one. Levels in dB are cut off deepest below the loudest frame of the window, so that
// none depends on how loud the recording is or on what noise a pause has.
const (
	centroidSpread  = iota // standard deviation of the spectral centroid, loud frames
	centroidMotion         // mean change of the centroid over near frames
	lowEnergy              // share of frames below half the mean rms
	levelRange             // P95 − P15 of the level
	levelCrest             // P95 − median of the level
	levelSpread            // standard deviation of the level
	wholeModulation        // log rms of the level between about 2.5 and 7 Hz, the rate of syllables
	partModulation         // the same of the four parts of the spectrum
	_
	_
	_
	modulationShare // log share of those in all changes of the level
	onsets          // rises by 6 dB within 40 ms, a second
	changeMean      // mean changes of the spectrum: bands near, bands far, bins near, bins far
	_
	_
	_
	changeSpread // their standard deviations
	_
	_
	_
	flatness       // mean flatness, loud frames
	flatnessSpread // its standard deviation
	togetherness   // correlation of the lowest and the highest part's levels
	hisses         // share of loud frames that are much flatter than the mean: consonants between vowels
	topHeavy       // share of loud frames with more in the highest part than in the lowest
	partSpread     // standard deviations of the parts' shares
	_
	_
	_
	voicing       // mean of how far the partials stand out, loud frames
	voicingSpread // its standard deviation
	voicedShare   // share of loud frames with a pitch
	pitchSpread   // standard deviation of the pitch, octaves
	pitchHeld     // share of pairs of near frames with the same pitch
	pitchGlides   // share of them with a pitch that has moved by less than a whole tone
	rhythm        // most of the rises that comes again after the same time, within five seconds
	featureCount
)

type features [featureCount]float64

const (
	windowSteps = 3 * StepsPerSecond // a window is three seconds
	windowLong  = windowSteps * framesPerStep
	windowHop   = 2    // steps from one window to the next: they differ little
	deepest     = 45.0 // dB
	rhythmSteps = 5 * StepsPerSecond
	rhythmHop   = 4    // steps after which the rhythm is looked at again
	loudRange   = 30.0 // dB below the loudest frame in which a frame counts as loud
)

// analyst computes the features of windows. It is room to work in.
type analyst struct {
	level [1 + parts][windowLong]float64 // of the whole and the parts, dB re the loudest frame
	sums  [windowLong + 1]float64
	rises [rhythmSteps * framesPerStep]float64
}

// eachWindow calls yield with the features of the three seconds around every hop of the programme and the steps
// [from, to) of that. A window does not reach over a pause of a second or more, since what comes after one may be
// something else.
func (d *Detector) eachWindow(active []bool, hop int, yield func(from, to int, f *features)) {
	var a analyst
	var f features
	stretches(active, func(from, to int) {
		beat := 0.0
		for i := from; i < to; i += hop {
			first := max(from, min(i-windowSteps/2, to-windowSteps))
			last := min(to, first+windowSteps)
			a.compute(&f, d.framer.frames[first*framesPerStep:last*framesPerStep])
			if (i-from)%rhythmHop == 0 {
				first := max(from, min(i-rhythmSteps/2, to-rhythmSteps))
				beat = a.rhythm(d.framer.frames[first*framesPerStep : min(to, first+rhythmSteps)*framesPerStep])
			}
			f[rhythm] = beat
			yield(i, min(to, i+hop), &f)
		}
	})
}

// compute describes up to windowLong frames.
//
//go:norace
func (a *analyst) compute(f *features, frames []frame) {
	top := int16(silent)
	for _, k := range frames {
		top = max(top, k.level)
	}
	*f = features{}
	if top == silent {
		return
	}
	a.levels(f, frames, top)
	var centroid, flat, voiced, pitch series
	var changes [4]series
	var shares [parts]series
	var motion, hiss, high, pairs, held, glides float64
	for i, k := range frames {
		if a.level[0][i] < -loudRange {
			continue
		}
		centroid.add(float64(k.centroid))
		flat.add(float64(k.flatness))
		for j := range 2 {
			changes[j].add(float64(k.shape[j]))
			changes[2+j].add(float64(k.detail[j]))
		}
		for p, v := range k.part {
			shares[p].add(float64(min(v, 80)))
		}
		if k.part[parts-1] < k.part[0] {
			high++
		}
		voiced.add(float64(k.voiced))
		if k.voiced >= voicedEnough {
			pitch.add(float64(k.pitch))
		}
		if i < near {
			continue
		}
		was := frames[i-near]
		motion += math.Abs(float64(k.centroid) - float64(was.centroid))
		if k.voiced >= voicedEnough && was.voiced >= voicedEnough {
			pairs++
			switch moved := int(k.pitch) - int(was.pitch); {
			case moved == 0:
				held++
			case -5 < moved && moved < 5:
				glides++
			}
		}
	}
	for i, k := range frames {
		if a.level[0][i] >= -loudRange && float64(k.flatness) < flat.mean()-24 {
			hiss++
		}
	}
	f[centroidSpread] = math.Log(1 + centroid.spread())
	f[centroidMotion] = math.Log(1 + motion/centroid.n)
	for j := range changes {
		f[changeMean+j], f[changeSpread+j] = changes[j].mean()/64, changes[j].spread()/64
	}
	for p := range shares {
		f[partSpread+p] = shares[p].spread() / 16
	}
	f[flatness], f[flatnessSpread] = flat.mean()/64, flat.spread()/32
	f[hisses], f[topHeavy] = hiss/flat.n, high/flat.n
	f[voicing], f[voicingSpread] = voiced.mean()/64, voiced.spread()/64
	f[voicedShare], f[pitchSpread] = pitch.n/voiced.n, pitch.spread()/perOctave
	f[pitchHeld], f[pitchGlides] = held/(pairs+5), glides/(pairs+5)
}

// series sums up numbers.
type series struct{ n, x, xx float64 }

func (s *series) add(v float64) { s.n++; s.x += v; s.xx += v * v }

func (s *series) mean() float64 { return s.x / s.n }

func (s *series) spread() float64 {
	if s.n == 0 {
		return 0
	}
	m := s.mean()
	return math.Sqrt(max(0, s.xx/s.n-m*m))
}
