package faults

import (
	"math"

	"evenshelf/engine/audio"
)

// decimator brings the mixture of all channels down to about humRate: first by sums of a few samples, to twice
// that, then by a filter.
type decimator struct {
	first, second int       // factors
	rate          float64   // that comes out, Hz
	held          int       // frames of the window before that no sum has had
	mixture       []float64 // weight of each channel
	taps          []float64
	sums          []float64 // of one channel
	line          []float64 // sums, the newest last, that the filter has not done with
	out           []float64
}

func newDecimator(f audio.Format) *decimator {
	d := &decimator{first: max(1, f.Rate/(2*humRate)), mixture: mixture(f.Layout)}
	d.second = max(1, int(math.Round(float64(f.Rate)/float64(d.first)/humRate)))
	d.rate = float64(f.Rate) / float64(d.first*d.second)
	// A Hann-windowed ideal low-pass filter with its edge at 0.45 of the new rate.
	d.taps = hann(8*d.second + 1)[1:]
	total := 0.0
	for i := range d.taps {
		if x := 0.9 * math.Pi * (float64(i) - float64(len(d.taps)-1)/2) / float64(d.second); x != 0 {
			d.taps[i] *= math.Sin(x) / x
		}
		total += d.taps[i]
	}
	for i := range d.taps {
		d.taps[i] /= total * float64(d.first)
	}
	d.sums = make([]float64, f.Rate/10/d.first+2)
	d.line = make([]float64, len(d.taps)-1, len(d.taps)+len(d.sums))
	d.out = make([]float64, 0, f.Rate/10/(d.first*d.second)+2)
	return d
}

// take returns what comes out for a window, which is overwritten by the next call, and sets the window's sums.
//
//go:norace
func (d *decimator) take(w window) []float64 {
	start := w.wide.Frames() - w.Frames()
	n := (d.held + w.Frames()) / d.first
	before := len(d.line)
	d.line = d.line[:before+n]
	clear(d.line[before:])
	for c, x := range w.wide {
		x = x[start-d.held:]
		w.sums[c] = sumUp(d.sums[:n], x, d.first) + sum(x[n*d.first:]) - sum(x[:d.held])
		for i, v := range d.sums[:n] {
			d.line[before+i] += d.mixture[c] * v
		}
	}
	d.held += w.Frames() - n*d.first
	d.out = d.out[:0]
	at := 0
	for ; at+len(d.taps) <= len(d.line); at += d.second {
		even, odd, x := 0.0, 0.0, d.line[at:at+len(d.taps)] // two lanes; the taps are even in number
		for i := 1; i < len(d.taps); i += 2 {
			even += d.taps[i-1] * x[i-1]
			odd += d.taps[i] * x[i]
		}
		d.out = append(d.out, even+odd)
	}
	d.line = d.line[:copy(d.line, d.line[at:])]
	return d.out
}

// sumUp sets dst to the sums of n samples each of x, and returns the sum of all of them.
//
//go:norace
func sumUp(dst []float64, x []float32, n int) (total float64) {
	for i := range dst {
		var a, b float64
		s := x[:n]
		x = x[n:]
		for ; len(s) >= 2; s = s[2:] {
			a += float64(s[0])
			b += float64(s[1])
		}
		for _, v := range s {
			a += float64(v)
		}
		dst[i] = a + b
		total += a + b
	}
	return total
}
