package meter

import (
	"math"
	"sync"

	"evenshelf/engine/audio"
)

// True peak is the largest magnitude the sound takes between its samples. From sample n to n+1 it is
// read on a grid of `phases` points, each a dot product of the samples around and a windowed sinc.
//
// Hardly any of these products are computed. Between two grid points whose values are known the others
// lie on the straight line between them but for a bend, and that bend is at most the largest second
// difference of the samples around times a constant of the kernel (slack). Where the ends and the bend
// together stay below the peak found so far, nothing in between matters; elsewhere the middle is
// computed and each half is judged again. The bound is exact, so the result is that of the whole grid.
const (
	taps     = 64          // samples under the kernel
	reach    = taps / 2    // how many of them lie after the interval's left end
	nearTaps = 16          // those next to the interval
	levels   = 5           // halvings of an interval
	phases   = 1 << levels // grid points an interval: a tone at 0.45 of the rate is under-read by 0.008 dB
	kaiser   = 7.0         // β of the window: ripple and images near −72 dB
)

// kernel is an interpolator on the grid.
type kernel struct {
	phase [phases + 1][taps]float64 // phase[p] gives the value p/phases after the left end
	slack [levels]float64           // bend per unit of second difference, after so many halvings
	far   float64                   // what the taps of the middle that near leaves out can add, per unit of magnitude
}

// interpolator returns the one kernel; it does not depend on the rate.
var interpolator = sync.OnceValue(func() *kernel {
	k := new(kernel)
	for p := range k.phase {
		k.phase[p] = windowedSinc(float64(p) / phases)
	}
	for level := range k.slack {
		step := phases >> level
		for left := 0; left < phases; left += step {
			for p := left + 1; p < left+step; p++ {
				k.slack[level] = max(k.slack[level], k.bend(left, p, left+step))
			}
		}
		k.slack[level] *= 1 + 1e-9 // for rounding in the dot products
	}
	for i, h := range k.phase[phases/2] {
		if i < reach-nearTaps/2 || i >= reach+nearTaps/2 {
			k.far += math.Abs(h) * (1 + 1e-9)
		}
	}
	return k
})

// windowedSinc returns the taps that interpolate at t, 0 ≤ t ≤ 1, after the left end. Truncation alters
// constants and straight lines by some 1e−4; a small multiple of the window and of its product with x
// make both exact, so that a constant reads itself and a bend needs a second difference.
func windowedSinc(t float64) (h [taps]float64) {
	if t == 0 || t == 1 {
		h[reach-1+int(t)] = 1
		return h
	}
	var window [taps]float64
	var h0, h1, w0, w1, w2 float64 // moments about t
	for i := range h {
		x := float64(i-(reach-1)) - t
		window[i] = audio.Bessel0(kaiser * math.Sqrt(1-x*x/(reach*reach)))
		h[i] = window[i] / audio.Bessel0(kaiser) * math.Sin(math.Pi*x) / (math.Pi * x)
		h0, h1 = h0+h[i], h1+h[i]*x
		w0, w1, w2 = w0+window[i], w1+window[i]*x, w2+window[i]*x*x
	}
	// a·w0 + b·w1 = 1 − h0 and a·w1 + b·w2 = −h1
	d := w0*w2 - w1*w1
	a, b := ((1-h0)*w2+h1*w1)/d, (-h1*w0-(1-h0)*w1)/d
	for i := range h {
		x := float64(i-(reach-1)) - t
		h[i] += (a + b*x) * window[i]
	}
	return h
}

// bend returns the factor b with |y(p) − the straight line from y(left) to y(right)| ≤ b · max|second
// difference|. That deviation is a weighting of the samples without sum or first moment; summed twice
// it weighs their second differences, so its absolute sum is the bound.
func (k *kernel) bend(left, p, right int) (total float64) {
	once, twice := 0.0, 0.0
	part := float64(p-left) / float64(right-left)
	for i, h := range k.phase[p] {
		once += h - (1-part)*k.phase[left][i] - part*k.phase[right][i]
		twice += once
		total += math.Abs(twice)
	}
	return total
}

// at returns the magnitude at grid point p of the interval in the middle of w.
//
//go:norace
func (k *kernel) at(p int, w *[taps]float64) float64 {
	h := &k.phase[p]
	var a, b, c, d float64
	for i := 0; i < taps; i += 4 {
		a += h[i] * w[i]
		b += h[i+1] * w[i+1]
		c += h[i+2] * w[i+2]
		d += h[i+3] * w[i+3]
	}
	return math.Abs((a + b) + (c + d))
}

// near returns the magnitude in the middle of the interval that the samples next to it, w, make.
//
//go:norace
func (k *kernel) near(w *[nearTaps]float32) float64 {
	h := (*[nearTaps]float64)(k.phase[phases/2][reach-nearTaps/2:])
	var a, b float64
	for i := 0; i < nearTaps; i += 2 {
		a += h[i] * float64(w[i])
		b += h[i+1] * float64(w[i+1])
	}
	return math.Abs(a + b)
}

// search returns the larger of best and the largest magnitude strictly inside the interval in the
// middle of w. bend bounds the second differences of w.
func (k *kernel) search(w *[taps]float64, bend, best float64) float64 {
	return k.halve(w, bend, best, 0, 0, math.Abs(w[reach-1]), math.Abs(w[reach]))
}

// halve does search for the part of the interval that starts at grid point left and spans
// phases>>level points; x and y are the magnitudes at its ends.
//
//go:norace
func (k *kernel) halve(w *[taps]float64, bend, best float64, level, left int, x, y float64) float64 {
	if level == levels || max(x, y)+k.slack[level]*bend <= best {
		return best
	}
	middle := left + phases>>(level+1)
	m := k.at(middle, w)
	best = max(best, m)
	best = k.halve(w, bend, best, level+1, left, x, m)
	return k.halve(w, bend, best, level+1, middle, m, y)
}
