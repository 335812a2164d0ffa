package faults

import "evenshelf/engine/audio"

// mixtureSecond is the weight in a mixture of every second channel: those of a pair are neighbours in the order
// of the channel mask, and one sound in both must not cancel where one of them is upside down.
const mixtureSecond = 0.6

// mixture returns the weights by which channels are added up for checks that follow one sound, 1 in all. An
// effects channel has no part in it, unless there is no other: it is narrow in band and deep by nature.
func mixture(l audio.Layout) []float64 {
	weights, total := make([]float64, l.Channels), 0.0
	for c := range weights {
		switch {
		case l.Channels > 1 && l.Position(c) == audio.LowFrequency:
		case c%2 == 0:
			weights[c] = 1
		default:
			weights[c] = mixtureSecond
		}
		total += weights[c]
	}
	for c := range weights {
		weights[c] /= total
	}
	return weights
}
