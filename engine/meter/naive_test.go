package meter

import (
	"math"
	"slices"

	"evenshelf/engine/audio"
)

// The slow meter: the standards' sentences, one after the other, with nothing shared with the fast one
// but the K-filter's coefficients, which design_test.go checks on their own. Rates must be multiples of 100.

// naiveWeighted returns x through both sections in the textbook form.
func naiveWeighted(x []float32, rate int) []float64 {
	y := make([]float64, len(x))
	for i, v := range x {
		y[i] = float64(v)
	}
	shelf, pass := design(float64(rate))
	for _, q := range []biquad{shelf, pass} {
		at := func(s []float64, i int) float64 {
			if i < 0 {
				return 0
			}
			return s[i]
		}
		in := slices.Clone(y)
		for i := range y {
			y[i] = q.b0*in[i] + q.b1*at(in, i-1) + q.b2*at(in, i-2) - q.a1*at(y, i-1) - q.a2*at(y, i-2)
		}
	}
	return y
}

type naiveReading struct{ integrated, lra, maxMomentary, maxShortTerm float64 }

// naiveMeasure reads a programme with equal weights.
func naiveMeasure(b audio.Block, rate int) naiveReading {
	followed := b.Frames() + 3*rate/2 // Tech 3342: ≥ 1.5 s of silence after the file
	total := make([]float64, followed+1)
	for _, x := range b {
		y := naiveWeighted(append(slices.Clone(x), make([]float32, 3*rate/2)...), rate)
		sum := 0.0
		for i, v := range y {
			sum += v * v
			total[i+1] += sum
		}
	}
	levels := func(end, window, hop int) (l []float64) {
		for from := 0; from+window <= end; from += hop {
			l = append(l, -0.691+10*math.Log10((total[from+window]-total[from])/float64(window)))
		}
		return l
	}
	meanPower := func(l []float64) float64 {
		sum := 0.0
		for _, v := range l {
			sum += math.Pow(10, (v+0.691)/10)
		}
		return -0.691 + 10*math.Log10(sum/float64(len(l)))
	}
	keep := func(l []float64, ok func(float64) bool) []float64 {
		return slices.DeleteFunc(slices.Clone(l), func(v float64) bool { return !ok(v) })
	}
	n := b.Frames()
	blocks := keep(levels(n, 4*rate/10, rate/10), func(v float64) bool { return v > -70 })
	gate := meanPower(blocks) - 10
	blocks = keep(blocks, func(v float64) bool { return v > gate })
	short := keep(levels(n/(rate/10)*(rate/10)+3*rate/2, 3*rate, rate/10), func(v float64) bool { return v >= -70 })
	floor := meanPower(short) - 20
	short = keep(short, func(v float64) bool { return v >= floor })
	slices.Sort(short)
	rank := func(p float64) float64 { return short[int(math.Round(float64(len(short)-1)*p/100+1))-1] }
	return naiveReading{
		integrated:   meanPower(blocks),
		lra:          rank(95) - rank(10),
		maxMomentary: slices.Max(levels(n, 4*rate/10, rate/100)),
		maxShortTerm: slices.Max(levels(n, 3*rate, rate/100)),
	}
}

// naiveAt interpolates x at a position between samples: a sinc under a Kaiser window (β = 9) that
// reaches 200 samples to each side, four times as far as anything in the engine.
func naiveAt(x []float32, position float64) float64 {
	const half = 200
	sum := 0.0
	middle := int(math.Floor(position))
	for i := max(0, middle-half+1); i <= min(len(x)-1, middle+half); i++ {
		d := position - float64(i)
		window := bessel0(9*math.Sqrt(1-d*d/(half*half))) / bessel0(9)
		if d != 0 {
			window *= math.Sin(math.Pi*d) / (math.Pi * d)
		}
		sum += window * float64(x[i])
	}
	return sum
}

// naiveTruePeak reads x on a grid of 64 points a sample with silence around it.
func naiveTruePeak(x []float32) float64 {
	const grid, around = 64, 40
	peak := 0.0
	for i := -around * grid; i < (len(x)+around)*grid; i++ {
		peak = max(peak, math.Abs(naiveAt(x, float64(i)/grid)))
	}
	return peak
}

// gridPeaks computes every grid point the engine may skip: the magnitude at point p after sample n, as
// [n+reach][p], from reach samples before x to as many after it.
func gridPeaks(x []float32) [][phases]float64 {
	padded := make([]float64, len(x)+4*reach)
	for i, v := range x {
		padded[2*reach+i] = float64(v)
	}
	grid := make([][phases]float64, len(x)+2*reach)
	for i := range grid {
		for p := range phases {
			grid[i][p] = interpolator().at(p, (*[taps]float64)(padded[i+1:]))
		}
	}
	return grid
}
