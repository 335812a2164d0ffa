package level_test

import (
	"math"
	"testing"

	"evenshelf/engine/audio"
)

// sine is one channel of a tone; 0 dBFS is full scale (AES17).
func sine(hz, seconds, dBFS float64) audio.Block {
	b := audio.NewBlock(1, int(seconds*rate))
	for i := range b[0] {
		b[0][i] = float32(linear(dBFS) * math.Sin(2*math.Pi*hz*float64(i)/rate))
	}
	return b
}

// distortion is the THD+N of a tone as AES17 has it, dB: what is left when the tone is taken away, against all of it.
// The tone is taken away by least squares, which is a notch without a width; x should hold whole seconds, so that
// whole periods fit. What is above 20 kHz counts too, which AES17 would leave out.
func distortion(x []float32, hz float64) float64 {
	var re, im, dc float64
	n := float64(len(x))
	for i, v := range x {
		s, c := math.Sincos(2 * math.Pi * hz * float64(i) / rate)
		re, im, dc = re+2*float64(v)*c/n, im+2*float64(v)*s/n, dc+float64(v)/n
	}
	var rest, all float64
	for i, v := range x {
		s, c := math.Sincos(2 * math.Pi * hz * float64(i) / rate)
		e := float64(v) - re*c - im*s - dc
		rest, all = rest+e*e, all+float64(v)*float64(v)
	}
	return 10 * math.Log10(rest/all)
}

// lag is by how many frames y comes after x, by the highest cross-correlation within ±10 ms.
func lag(x, y []float32) int {
	const reach, length = rate / 50, rate / 2
	best, at := math.Inf(-1), 0
	start := max(reach, (len(x)-length)/2)
	end := min(start+length, len(x)-reach, len(y)-reach)
	for d := -reach; d <= reach; d++ {
		sum := 0.0
		for i := start; i < end; i++ {
			sum += float64(x[i]) * float64(y[i+d])
		}
		if sum > best {
			best, at = sum, d
		}
	}
	return at
}

// imageError is how far the channels of a copy are from being multiplied by one gain: the largest
// |l′·r − r′·l| against the larger of its two products, where both are above −60 dBFS.
func imageError(source, copied audio.Block) float64 {
	worst := 0.0
	for c := 1; c < len(source); c++ {
		for i, l := range source[0] {
			r := source[c][i]
			if math.Abs(float64(l)) < 0.001 || math.Abs(float64(r)) < 0.001 {
				continue
			}
			a, b := float64(copied[0][i])*float64(r), float64(copied[c][i])*float64(l)
			worst = max(worst, math.Abs(a-b)/max(math.Abs(a), math.Abs(b), 1e-12))
		}
	}
	return worst
}

// A tone with one harmonic of known level, and a sound that was moved.
func TestEvaluationTone(t *testing.T) {
	x := added(sine(997, 2, -6), sine(2991, 2, -86))[0]
	if got := distortion(x, 997); math.Abs(got+80) > 0.01 {
		t.Errorf("a harmonic 80 dB down reads %.2f dB", got)
	}
	noise := hiss(1, 2, -20, 0)[0]
	if got := lag(noise, append(make([]float32, 17), noise...)); got != 17 {
		t.Errorf("a delay of 17 reads %d", got)
	}
	pair := audio.Block{noise[:1000], noise[1000:2000]}
	moved := audio.Block{pair[0], amplified(audio.Block{pair[1]}, 0.1)[0]}
	if got := imageError(pair, moved); math.Abs(got-(1-linear(-0.1))) > 1e-6 {
		t.Errorf("0.1 dB between the channels reads %g", got)
	}
	if got := imageError(pair, amplified(pair, -6)); got > 2e-7 {
		t.Errorf("one gain reads %g", got)
	}
}
