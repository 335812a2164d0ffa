package faults

import (
	"math"
	"math/rand/v2"
	"testing"

	"evenshelf/engine/audio"
)

// Tones and noise that come and go as music does are no hum, do not click and have no edge: a bass on the
// notes next to the mains frequencies and their octaves, a sawtooth without treble, decaying strokes of noise.
func TestMusicalSoundsAreNotFaults(t *testing.T) {
	const rate = 44100
	rng := rand.New(rand.NewPCG(5, 6))
	for name, voice := range map[string]func(s, hz float64) float64{
		"bass": func(s, hz float64) float64 {
			return math.Exp(-s) * (math.Sin(2*math.Pi*hz*s) + 0.5*math.Sin(4*math.Pi*hz*s) + 0.3*math.Sin(6*math.Pi*hz*s))
		},
		"saw": func(s, hz float64) (v float64) {
			for k := 1.0; k <= 12; k++ {
				v += math.Sin(2*math.Pi*hz*k*s) / k
			}
			return v
		},
		"strokes": func(s, _ float64) float64 { return math.Exp(-60*s) * rng.NormFloat64() },
	} {
		for _, notes := range [][]float64{{48.999, 51.913, 58.27, 61.735}, {97.999, 103.826, 116.541, 123.471}} {
			x := make([]float32, 20*rate)
			for i := range x {
				s := float64(i) / rate
				at := math.Mod(s, 0.5)
				x[i] = float32(0.2 * min(1, at/0.01, (0.5-at)/0.01) * voice(at, notes[int(2*s)%4]))
			}
			for _, f := range look(rate, audio.Block{x}) {
				t.Errorf("%s: %+v", name, f)
			}
		}
	}
}
