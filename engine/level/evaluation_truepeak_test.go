package level_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"evenshelf/engine/audio"
)

// The evaluation's own true-peak reader: the sound between the samples by a windowed sinc of 128 taps, on a grid
// of 32 points a sample, with silence before and after. Not all points have to be worked out. A band-limited
// signal that nowhere passes G keeps above G·cos(π·d) within d ≤ 1/2 sample of its highest point (a form of
// S. Bernstein's inequality, from memory), so a grid of k points a sample, of which one is no further from there
// than 1/2k, reads at least G·cos(π/2k): what reads less can be left out of the next finer grid.
const (
	peakTaps = 64 // to either side
	peakGrid = 32
)

// peakFilters are the taps of the points d/32 of a sample after a frame: filter[d][k] is for frame k − peakTaps + 1.
var peakFilters = func() (f [peakGrid][2 * peakTaps]float64) {
	for d := range f {
		sum := 0.0
		for k := range f[d] {
			at := float64(k-peakTaps+1) - float64(d)/peakGrid
			f[d][k] = kaiser(at/peakTaps, 9)
			if at != 0 {
				f[d][k] *= math.Sin(math.Pi*at) / (math.Pi * at)
			}
			sum += f[d][k]
		}
		for k := range f[d] {
			f[d][k] /= sum
		}
	}
	return f
}()

// kaiser is the Kaiser window at x, −1 … 1.
func kaiser(x, beta float64) float64 {
	if x <= -1 || x >= 1 {
		return 0
	}
	return bessel(beta*math.Sqrt(1-x*x)) / bessel(beta)
}

// bessel is I0 by its series.
func bessel(x float64) float64 {
	sum, term := 1.0, 1.0
	for k := 1.0; term > 1e-15*sum; k++ {
		term *= x * x / (4 * k * k)
		sum += term
	}
	return sum
}

// truePeak is the highest true peak of all channels, dBTP.
func truePeak(b audio.Block) float64 {
	top := 0.0
	for _, x := range b {
		for _, v := range x {
			top = max(top, math.Abs(float64(v)))
		}
	}
	for _, x := range b {
		top = channelPeak(x, top)
	}
	return 20 * math.Log10(top)
}

// channelPeak is the highest of top and of what a channel reads.
func channelPeak(sound []float32, top float64) float64 {
	x := make([]float64, len(sound)+4*peakTaps)
	for i, v := range sound {
		x[2*peakTaps+i] = float64(v)
	}
	read := func(at, d int) float64 {
		return math.Abs(product(x[at-peakTaps+1:at+peakTaps+1], peakFilters[d][:]))
	}
	// The half-way points come first, by the middle of the filter and with some room for that.
	const near, roughly = 24, 0.9
	half := peakFilters[peakGrid/2][peakTaps-near : peakTaps+near]
	spread := 0.0 // a half-way point reads at most this many times the largest sample around
	for _, v := range half {
		spread += math.Abs(v)
	}
	const block = 64
	largest := make([]float64, len(x)/block+2)
	for i, v := range x {
		largest[i/block+1] = max(largest[i/block+1], math.Abs(v))
	}
	last := 0 // frame up to which all has been looked at
	for at := peakTaps; at < len(x)-peakTaps; at++ {
		limit := roughly * math.Cos(math.Pi/4) * top
		if k := at/block + 1; spread*max(largest[k-1], largest[k], largest[min(k+1, len(largest)-1)]) < limit {
			at = k*block - 1
			continue
		}
		if math.Abs(x[at]) < limit && math.Abs(product(x[at-near+1:at+near+1], half)) < limit {
			continue
		}
		for from := max(last+1, at-1); from <= at; from++ { // the highest point may lie before the frame
			last = from
			quarter := max(read(from, 8), read(from, 16), read(from, 24), math.Abs(x[from]), math.Abs(x[from+1]))
			if top = max(top, quarter); quarter < math.Cos(math.Pi/8)*top {
				continue
			}
			for d := 1; d < peakGrid; d++ {
				top = max(top, read(from, d))
			}
		}
	}
	return top
}

func product(x, y []float64) float64 {
	var a, b, c, d float64
	y = y[:len(x)]
	for i := 0; i+3 < len(x); i += 4 {
		a += x[i] * y[i]
		b += x[i+1] * y[i+1]
		c += x[i+2] * y[i+2]
		d += x[i+3] * y[i+3]
	}
	return a + b + c + d
}

// The reader against sines, whose peaks are known, at any phase, and against working every point out.
func TestEvaluationTruePeak(t *testing.T) {
	for _, hz := range []float64{60, 997, 5000, 11999, 15000, 18000} {
		for phase := 0.0; phase < 3; phase += 0.37 {
			x := make([]float32, 4800)
			for i := range x {
				ease := math.Pow(math.Sin(math.Pi/2*min(1, float64(i)/1500, float64(4799-i)/1500)), 2)
				x[i] = float32(0.5 * ease * math.Sin(2*math.Pi*hz*float64(i-2400)/rate+math.Pi/2+phase))
			}
			if got := truePeak(audio.Block{x}); math.Abs(got+6.0206) > 0.03 {
				t.Errorf("%v Hz, phase %.2f: %.3f dBTP, want −6.02", hz, phase, got)
			}
		}
	}
	rng := rand.New(rand.NewPCG(3, 2))
	for range 20 {
		x := make([]float32, 600)
		for i := range x {
			x[i] = float32(rng.NormFloat64() * rng.Float64())
		}
		padded := make([]float32, len(x)+4*peakTaps)
		copy(padded[2*peakTaps:], x)
		want := 0.0
		for at := peakTaps; at < len(padded)-peakTaps; at++ {
			for d := range peakGrid {
				sum := 0.0
				for k, f := range peakFilters[d] {
					sum += f * float64(padded[at-peakTaps+1+k])
				}
				want = max(want, math.Abs(sum))
			}
		}
		if got := truePeak(audio.Block{x}); math.Abs(got-20*math.Log10(want)) > 1e-9 {
			t.Errorf("noise reads %.4f dBTP, every point worked out %.4f", got, 20*math.Log10(want))
		}
	}
}
