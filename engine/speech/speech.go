// Package speech says, for every tenth of a second of a recording, whether programme is active and how
// likely it is speech.
//
// A downmix of the recording is brought to a rate from 8 to 16 kHz and cut into short frames (frames.go), of
// which 14 bytes each are kept, 2.7 MB an hour. The rest is done at the end, when the whole recording is in
// view: where it pauses (activity.go), the features of three seconds around every step (features.go), their
// log-odds of speech by a small fitted network (weights.go), the likelihoods by all of them (course.go), and
// where exactly speech begins and ends (turns.go). Every step is therefore judged from both of its sides.
//
// Speech over music counts as speech where the voice is what one follows; it is found from some 6 dB over the music
// on, and from 0 dB over music that leaves room for it. Singing is not meant to be speech, but there was little of it
// to learn from.
// A recording or a stretch between pauses that is shorter than a window is judged by what there is; of less
// than half a second that is little more than a guess.
//
// The features go back to E. Scheirer, M. Slaney, "Construction and Evaluation of a Robust Multifeature
// Speech/Music Discriminator", ICASSP 1997 (share of low-energy frames, modulation around 4 Hz, spectral
// flux and centroid and their variance), C. Panagiotakis, G. Tziritas, "A Speech/Music Discriminator Based
// on RMS and Zero-Crossings", IEEE Trans. Multimedia 7(1), 2005 (the distribution of the level), M. Kos et
// al., EURASIP J. ASP 2009, 628570 (variance of the energy in bands); smoothing the decision over time, to
// Y. Lavner, D. Ruinskiy, EURASIP J. ASMP 2009, 239892.
package speech

import "evenshelf/engine/audio"

// StepsPerSecond is the grid of a Course.
const StepsPerSecond = audio.StepsPerSecond

// Likely is the likelihood from which a step is taken for speech.
const Likely = 0.5

// Course is a recording's course on a 100 ms grid: value i describes the tenth of a second that ends at
// (i+1)/StepsPerSecond. Both slices have the same length; a last step the programme does not fill counts.
type Course struct {
	Active []bool    // programme is heard; false is a pause
	Speech []float32 // likelihood of speech, 0 … 1; 0 in a pause
}

// Detector follows one recording. Make one with New. It is not safe for concurrent use.
type Detector struct {
	weights []float64 // of the channels in the downmix
	levels  *leveler
	stages  []*halfband
	framer  *framer

	mono   []float64 // the chunk of the downmix that is being filled
	filled int
}

// chunk is how many samples at the rate of analysis are worked on at a time.
const chunk = 256

// New returns a Detector for recordings of a format.
func New(f audio.Format) *Detector {
	d := &Detector{weights: weights(f.Layout), levels: newLeveler(f.Rate)}
	rate := float64(f.Rate)
	for ; rate >= 2*lowestRate; rate /= 2 {
		d.stages = append(d.stages, newHalfband(rate))
	}
	d.mono = make([]float64, chunk<<len(d.stages))
	for i, s := range d.stages {
		s.prepare(len(d.mono) >> i)
	}
	d.framer = newFramer(rate)
	return d
}

// Write takes a block of any length. The block must have the channels of the format; it is neither kept
// nor changed. Samples that are not finite numbers count as silence.
func (d *Detector) Write(b audio.Block) {
	for at := 0; at < b.Frames(); {
		n := min(b.Frames()-at, len(d.mono)-d.filled)
		mix(d.mono[d.filled:d.filled+n], b, at, d.weights)
		at += n
		d.filled += n
		if d.filled == len(d.mono) {
			d.levels.add(d.mono)
			d.analyse()
		}
	}
}

// analyse takes the full chunk through the decimators to the frames.
func (d *Detector) analyse() {
	sound := d.mono
	for _, s := range d.stages {
		sound = s.halve(sound)
	}
	d.framer.add(sound)
	d.filled = 0
}

// end lets silence follow until all frames of the last step are there.
func (d *Detector) end() {
	d.levels.add(d.mono[:d.filled])
	d.levels.finish()
	frames := len(d.levels.levels) * framesPerStep
	for len(d.framer.frames) < frames {
		clear(d.mono[d.filled:])
		d.analyse()
	}
	d.framer.frames = d.framer.frames[:frames]
}

// Finish ends the recording and returns its course. Call it once.
func (d *Detector) Finish() Course {
	d.end()
	active := activity(d.levels.levels)
	odds := make([]float32, len(active))
	d.eachWindow(active, windowHop, func(from, to int, f *features) {
		o := float32(logOdds(f))
		for i := from; i < to; i++ {
			odds[i] = o
		}
	})
	c := Course{active, likelihoods(odds)}
	placeTurns(c.Speech, d.framer.frames)
	for i, on := range active {
		if !on {
			c.Speech[i] = 0
		}
	}
	return c
}

// Features ends the recording like Finish, but hands out what the likelihoods are made from: whether a step
// is active, and its features. It is there for fitting the coefficients. Features of steps in long pauses
// are all zero.
func (d *Detector) Features() (active []bool, steps [][]float64) {
	d.end()
	active = activity(d.levels.levels)
	steps = make([][]float64, len(active))
	for i := range steps {
		steps[i] = make([]float64, len(features{}))
	}
	d.eachWindow(active, 1, func(step, _ int, f *features) { copy(steps[step], f[:]) })
	return active, steps
}
