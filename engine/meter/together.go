package meter

import "evenshelf/engine/audio"

// Together returns the integrated loudness of several programmes, one after another, as one: BS.1770's gates
// over the blocks of all of them. It is undefined if nothing is above −70 LUFS.
func Together(programmes ...Timeline) audio.LUFS {
	var powers []float64
	for _, t := range programmes {
		for i := momentarySteps - 1; i < len(t.Momentary); i++ {
			powers = append(powers, power(float64(t.Momentary[i])))
		}
	}
	return integrated(powers)
}

// Range returns the loudness range by EBU Tech 3342 of the full 3 s windows of a timeline. (A Reading's also takes in
// the silence that follows a programme.)
func (t Timeline) Range() audio.LU {
	var powers []float64
	for i := shortTermSteps - 1; i < len(t.ShortTerm); i++ {
		powers = append(powers, power(float64(t.ShortTerm[i])))
	}
	return loudnessRange(powers)
}

// Ridden returns the timeline as it will be if gain(i), dB, is applied to step i. It has no peaks.
func (t Timeline) Ridden(gain func(step int) float64) Timeline {
	n := len(t.Level)
	r := Timeline{Step: t.Step, Level: make([]float32, n), Momentary: make([]float32, n), ShortTerm: make([]float32, n)}
	powers := make([]float64, n)
	for i, l := range t.Level {
		powers[i] = power(float64(l) + gain(i))
		r.Level[i] = float32(loudness(powers[i]))
	}
	for i := range powers {
		r.Momentary[i] = float32(loudness(mean(powers[max(0, i+1-momentarySteps) : i+1])))
		r.ShortTerm[i] = float32(loudness(mean(powers[max(0, i+1-shortTermSteps) : i+1])))
	}
	return r
}

func mean(x []float64) float64 {
	sum := 0.0
	for _, v := range x {
		sum += v
	}
	return sum / float64(len(x))
}
