package speech

import (
	"math"
	"testing"
)

// A decimator passes what the analysis hears and keeps down what would fold back into it; the response is evaluated
// from the coefficients.
func TestDecimatorResponse(t *testing.T) {
	for _, rate := range []float64{16000, 22050, 24000, 32000, 44100, 48000, 96000, 192000, 384000} {
		h := newHalfband(rate)
		response := func(hz float64) float64 {
			sum := 0.5
			for i, tap := range h.taps {
				sum += 2 * tap * math.Cos(2*math.Pi*hz/rate*float64(2*(len(h.taps)-i)-1))
			}
			return 20 * math.Log10(math.Abs(sum)+1e-12)
		}
		dip, leak := 0.0, -200.0
		for hz := 0.0; hz <= passEdge; hz += 10 {
			dip, leak = max(dip, math.Abs(response(hz))), max(leak, response(rate/2-hz))
		}
		t.Logf("%6.0f Hz: %2d pairs, within %.2f dB up to %d Hz, %.1f dB where it would fold back", rate, len(h.taps), dip, passEdge, leak)
		if dip > 0.15 || leak > -36 {
			t.Errorf("%.0f Hz: want within 0.15 dB, and −36 dB", rate)
		}
	}
}

// A tone comes out of the decimator as the same tone at half the rate, and across the seams of the chunks.
func TestDecimatorKeepsTones(t *testing.T) {
	for _, rate := range []float64{16000, 22050, 44100} {
		h := newHalfband(rate)
		h.prepare(128)
		delay := float64(2*len(h.taps) - 1)
		in := make([]float64, 128)
		for c := range 10 {
			for i := range in {
				in[i] = math.Sin(2 * math.Pi * 1000 / rate * float64(128*c+i))
			}
			for i, v := range h.halve(in) {
				want := math.Sin(2 * math.Pi * 1000 / rate * (float64(128*c+2*i) - delay))
				if c > 0 && math.Abs(v-want) > 0.02 {
					t.Fatalf("%g Hz, chunk %d, sample %d: %g, want %g", rate, c, i, v, want)
				}
			}
		}
	}
}
