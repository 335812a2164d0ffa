package meter

import (
	"math"
	"slices"

	"evenshelf/engine/audio"
)

// The slow meter: the standards' sentences, one after the other, with nothing shared with the fast one
// but the K-filter's coefficients, which design_test.go checks on their own.

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

type naiveReading struct{ integrated, equalBlocks, lra, maxMomentary, maxShortTerm float64 }

// naiveEdge returns the frame nearest to k hops of which a second has so many.
func naiveEdge(k, rate, perSecond int) int {
	return int(math.Round(float64(k) * float64(rate) / float64(perSecond)))
}

// naiveMeasure reads a programme with equal weights.
func naiveMeasure(b audio.Block, rate int) naiveReading {
	followed := b.Frames() + 2*rate // Tech 3342: ≥ 1.5 s of silence after the file
	total := make([]float64, followed+1)
	for _, x := range b {
		y := naiveWeighted(append(slices.Clone(x), make([]float32, 2*rate)...), rate)
		sum := 0.0
		for i, v := range y {
			sum += v * v
			total[i+1] += sum
		}
	}
	levels := func(end, width, perSecond int) (l []float64) { // of every full window of width hops
		for k := width; naiveEdge(k, rate, perSecond) <= end; k++ {
			from, to := naiveEdge(k-width, rate, perSecond), naiveEdge(k, rate, perSecond)
			l = append(l, -0.691+10*math.Log10((total[to]-total[from])/float64(to-from)))
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
	gated := func(blocks []float64) float64 {
		blocks = keep(blocks, func(v float64) bool { return v > -70 })
		gate := meanPower(blocks) - 10
		return meanPower(keep(blocks, func(v float64) bool { return v > gate }))
	}
	var equal []float64 // blocks of one length, every 100 ms to the nearest sample
	for k, length := 0, naiveEdge(4, rate, 10); naiveEdge(k, rate, 10)+length <= n; k++ {
		from := naiveEdge(k, rate, 10)
		equal = append(equal, -0.691+10*math.Log10((total[from+length]-total[from])/float64(length)))
	}
	steps := 0
	for naiveEdge(steps+1, rate, 10) <= n {
		steps++
	}
	short := keep(levels(naiveEdge(steps+15, rate, 10), 30, 10), func(v float64) bool { return v >= -70 })
	floor := meanPower(short) - 20
	short = keep(short, func(v float64) bool { return v >= floor })
	slices.Sort(short)
	rank := func(p float64) float64 { return short[int(math.Round(float64(len(short)-1)*p/100+1))-1] }
	return naiveReading{
		integrated:   gated(levels(n, 4, 10)),
		equalBlocks:  gated(equal),
		lra:          rank(95) - rank(10),
		maxMomentary: slices.Max(levels(n, 40, 100)),
		maxShortTerm: slices.Max(levels(n, 300, 100)),
	}
}

// naiveAt interpolates x at a position between samples: a sinc under a Kaiser window (β = 9) that
// reaches 200 samples to each side, six times as far as anything in the engine.
//
//go:norace
func naiveAt(x []float32, position float64) float64 {
	const half = 200
	sum, norm := 0.0, 1/audio.Bessel0(9)
	middle := int(math.Floor(position))
	for i := max(0, middle-half+1); i <= min(len(x)-1, middle+half); i++ {
		d := position - float64(i)
		window := audio.Bessel0(9*math.Sqrt(1-d*d/(half*half))) * norm
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
