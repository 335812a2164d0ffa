package media

import (
	"math"
	"slices"
	"testing"

	"evenshelf/engine/audio"
)

// words asks for integers of so many bits in a number of channels.
func words(channels, bits int) Spec {
	return Spec{BitDepth: bits, Format: audio.Format{Rate: 48000, Layout: audio.UsualLayout(channels)}}
}

// quantiseAll runs one channel's quantiser over a signal given in LSB.
func quantiseAll(bits, channel int, lsb []float64) (out []int32, errs []float64) {
	return quantiseAs(words(channel+1, bits), channel, lsb)
}

// quantiseAs does it for a spec. The first channel has another sound, unless it is the one.
func quantiseAs(spec Spec, channel int, lsb []float64) (out []int32, errs []float64) {
	q := newQuantisers(spec)[channel]
	full := math.Ldexp(1, spec.BitDepth-1)
	in := make([]float32, len(lsb))
	for i, v := range lsb {
		in[i] = float32(v / full)
	}
	out = make([]int32, len(in))
	first := in
	if channel > 0 {
		first = make([]float32, len(in))
	}
	q.quantise(out, in, first)
	errs = make([]float64, len(in))
	for i := range in {
		errs[i] = float64(out[i]) - float64(in[i])*full
	}
	return out, errs
}

func moments(x []float64) (mean, variance float64) {
	for _, v := range x {
		mean += v
	}
	mean /= float64(len(x))
	for _, v := range x {
		variance += (v - mean) * (v - mean)
	}
	return mean, variance / float64(len(x))
}

// Triangular dither makes mean and power of the total error independent of the signal: 0 and Δ²/4
// (Lipshitz, Wannamaker, Vanderkooy, J. Audio Eng. Soc. 40(5), 1992). Plain rounding fails this test: a
// constant has a constant error.
func TestDitherNoiseIsConstant(t *testing.T) {
	const n = 200_000
	// Standard errors over n values: 0.5/√n for the mean, √((E[e⁴]−σ⁴)/n) ≈ 0.35/√n for the variance.
	const tol = 5 * 0.5 / 447.0
	signals := map[string]func(i int) float64{
		"constant ¼":              func(int) float64 { return 0.25 },
		"constant ½":              func(int) float64 { return 0.5 },
		"constant 0.03":           func(int) float64 { return 0.03 },
		"constant −0.77":          func(int) float64 { return -0.77 },
		"sine of 0.4 LSB":         func(i int) float64 { return 0.4 * math.Sin(float64(i)*0.01234+0.1) },
		"sine near full scale":    func(i int) float64 { return 32000 * math.Sin(float64(i)*0.0567+0.1) },
		"slow ramp through zeros": func(i int) float64 { return float64(i)/n*8 - 4 + 1e-5 },
	}
	for name, signal := range signals {
		lsb := make([]float64, n)
		for i := range lsb {
			lsb[i] = signal(i)
		}
		_, errs := quantiseAll(16, 0, lsb)
		mean, variance := moments(errs)
		if math.Abs(mean) > tol || math.Abs(variance-0.25) > tol {
			t.Errorf("%s: error has mean %.5f and power %.5f LSB², want 0 and 0.25 ± %.4f", name, mean, variance, tol)
		}
	}
}

// The noise is white and unrelated between channels: no correlation at small lags or across.
func TestDitherIsWhiteAndIndependent(t *testing.T) {
	const n = 200_000
	lsb := make([]float64, n)
	for i := range lsb {
		lsb[i] = 0.37
	}
	_, a := quantiseAll(24, 0, lsb)
	_, b := quantiseAll(24, 1, lsb)
	correlate := func(x, y []float64) float64 {
		sum := 0.0
		for i := range x {
			sum += x[i] * y[i]
		}
		return sum / float64(len(x)) / 0.25
	}
	const tol = 5 / 447.0 // five standard errors, 1/√n each
	for lag := 1; lag <= 20; lag++ {
		if r := correlate(a[lag:], a[:n-lag]); math.Abs(r) > tol {
			t.Errorf("correlation %.4f at lag %d", r, lag)
		}
	}
	if r := correlate(a, b); math.Abs(r) > tol {
		t.Errorf("correlation %.4f between two channels", r)
	}
}

func TestWholeNumbersPassUnchanged(t *testing.T) {
	for _, bits := range []int{16, 24} {
		full := math.Ldexp(1, bits-1)
		lsb := []float64{0, 0, 0, 1, -1, 0, 12345, -full, full - 1, 0}
		out, _ := quantiseAll(bits, 0, lsb)
		for i, v := range lsb {
			if out[i] != int32(v) {
				t.Errorf("%d bits: %v became %d", bits, v, out[i])
			}
		}
	}
}

func TestQuantiserClipsAtFullScale(t *testing.T) {
	inf := math.Inf(1)
	lsb := []float64{32767.9, 40000.3, 1e9, inf, -32768.9, -40000.3, -inf, math.NaN()}
	out, _ := quantiseAll(16, 0, lsb)
	for i, v := range out {
		switch {
		case i == 0 && v < 32766, i > 0 && i < 4 && v != 32767, i == 4 && v > -32767, (i == 5 || i == 6) && v != -32768, i == 7 && v != 0:
			t.Errorf("%v became %d", lsb[i], v)
		}
	}
}

func TestDitherRepeatsHoweverItIsCut(t *testing.T) {
	in := programme(1, 10_000, 24, 0.8)[0]
	whole, parts := make([]int32, len(in)), make([]int32, len(in))
	q := newQuantisers(words(1, 16))[0]
	q.quantise(whole, in, in)
	q = newQuantisers(words(1, 16))[0]
	for i := 0; i < len(in); {
		n := min(1+i%701, len(in)-i)
		q.quantise(parts[i:i+n], in[i:i+n], in[i:i+n])
		i += n
	}
	if !slices.Equal(whole, parts) {
		t.Error("the same sound in other blocks made other bytes")
	}
}

func BenchmarkQuantise(b *testing.B) {
	in, out := programme(1, 48_000, 24, 0.8)[0], make([]int32, 48_000)
	q := newQuantisers(words(1, 16))[0]
	b.ReportAllocs()
	for b.Loop() {
		q.quantise(out, in, in)
	}
	b.ReportMetric(float64(b.N)/b.Elapsed().Seconds(), "x-realtime")
}

// One voice in two channels stays one: the same in both to the last bit, with flat and with shaped noise. Where the channels
// differ their noises have nothing to do with each other.
func TestEqualChannelsStayEqual(t *testing.T) {
	one := programme(1, 20_000, 24, 0.3)[0]
	other := programme(2, 20_000, 24, 0.2)[1]
	for _, shaped := range []bool{false, true} {
		q := newQuantisers(Spec{BitDepth: 16, Shaped: shaped, Format: stereo(44100)})
		var out [3][]int32
		for c, src := range [][]float32{one, one, other} {
			out[c] = make([]int32, len(one))
			q[min(c, 1)].quantise(out[c], src, one)
		}
		if !slices.Equal(out[0], out[1]) {
			t.Errorf("shaped %v: equal channels came out different", shaped)
		}
		var product, left, right float64
		for i := range one {
			a, b := float64(out[0][i])-float64(one[i])*32768, float64(out[2][i])-float64(other[i])*32768
			product, left, right = product+a*b, left+a*a, right+b*b
		}
		if r := product / math.Sqrt(left*right); math.Abs(r) > 0.03 {
			t.Errorf("shaped %v: the errors of different channels are correlated by %.3f", shaped, r)
		}
	}
}
