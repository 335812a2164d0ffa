package level_test

import (
	"math"
	"math/rand/v2"

	"evenshelf/engine/audio"
)

// clicking is a quiet voice with clicks of one frame and of a few, far louder than it.
func clicking(r recordings) programme {
	p := alone(r, "clicks in quiet speech", 30, -40, 2)
	p.sound = amplified(p.sound, 0) // its channels share their samples
	rng := rand.New(rand.NewPCG(1, 77))
	for range 60 {
		at, size := rng.IntN(p.sound.Frames()-8), float32(0.3+0.6*rng.Float64())
		for i := range 1 + rng.IntN(3) {
			p.sound[rng.IntN(2)][at+i] = size * float32(1-2*(i%2))
		}
	}
	return p
}

// roaring is noise of the whole band, quiet and loud in turns, hard up to full scale.
func roaring() programme {
	rng := rand.New(rand.NewPCG(2, 77))
	b := audio.NewBlock(2, 12*rate)
	for _, x := range b {
		for i := range x {
			size := 0.05
			if i/rate%4 >= 2 {
				size = 0.5
			}
			x[i] = float32(max(-1, min(1, size*rng.NormFloat64())))
		}
	}
	return programme{name: "noise of the whole band", sound: b}
}

// mastered is music as loud as records are made: driven into soft clipping up to full scale.
func mastered(r recordings) programme {
	b := amplified(stretch(at(-14, r.music[2]), 40, 20), 9)
	for _, x := range b {
		for i, v := range x {
			x[i] = float32(0.99 * math.Tanh(float64(v)))
		}
	}
	return programme{name: "loud mastered music", sound: b}
}

// bursts is a tone, quiet for most of the time and loud for the last seconds, so that it stands out over what
// the whole is brought to. The loud part is the last turn.
func bursts(hz, quiet, loud float64) programme {
	const long, short = 50, 6
	b := joined(sine(hz, long, quiet), sine(hz, short, loud))
	return programme{name: "tone", sound: b, turns: []turn{{from: 0, to: long}, {from: long, to: long + short}}}
}

// sided is a voice on the left channel only.
func sided(r recordings) programme {
	p := alone(r, "speech on one side", 20, -30, 2)
	p.sound = audio.Block{p.sound[0], make([]float32, p.sound.Frames())}
	return p
}

// catalogue makes every programme that all profiles have to deal with.
var catalogue = []func(recordings) programme{
	func(r recordings) programme { return conversation(r, "two voices, 12 dB", 8, 12, 0.4, 1.5) },
	func(r recordings) programme { return ramp(r, 50) },
	func(r recordings) programme { return steps(r, 5) },
	func(r recordings) programme { return window(r, 9) },
	lecture,
	func(r recordings) programme { return buzzing(r, "speech with hum", hum) },
	func(r recordings) programme { return buzzing(r, "speech with a fan", fan) },
	func(r recordings) programme { return film(r, "film", 8, 2) },
	func(r recordings) programme { return film(r, "film in 5.1", 5, 6) },
	func(r recordings) programme { return wide(r, "music, slow changes", 0, 1, 61, 26, false) },
	func(r recordings) programme { return wide(r, "music, abrupt changes", 1, 2, 61, 24, true) },
	tutti,
	func(r recordings) programme { return faded(r, 0, 45) },
	func(r recordings) programme { return over(r, 0) },
	func(r recordings) programme { return magazine(r, 4) },
	silent, clapped, clicking,
	func(recordings) programme { return roaring() },
	mastered,
	func(r recordings) programme { return alone(r, "speech, dual mono", 20, -30, 2) },
	sided,
	func(r recordings) programme { return alone(r, "speech, mono", 62, -33, 1) },
	func(r recordings) programme { return alone(r, "2 s of speech", 2, -30, 1) },
	func(r recordings) programme { return alone(r, "20 s of speech", 20, -30, 1) },
	func(r recordings) programme {
		return programme{name: "2 s of music", sound: at(-30, stretch(r.music[0], 50, 2))}
	},
	func(r recordings) programme {
		return programme{name: "20 s of music", sound: at(-9, stretch(r.music[0], 50, 20))}
	},
	func(recordings) programme { return programme{name: "tone of 997 Hz", sound: sine(997, 8, -30)} },
}
