package speech

import (
	"math"

	"evenshelf/engine/audio"
)

const (
	lowestRate = 8000 // Hz; the rate of analysis is at least this and less than twice this
	passEdge   = 3500 // Hz up to which the analysis hears: what a telephone passes, so that every recording has it
	stopband   = 40   // dB by which a decimator keeps down what would fold back into the band
)

// halfband halves the sampling rate. It is a linear-phase FIR whose every other coefficient is zero: a windowed
// sinc (J. Kaiser's window and his formula for its length) that is as long as its rate asks for.
type halfband struct {
	taps []float64 // one side of the coefficients that are not zero, the outermost first
	line []float64 // the samples still needed, then those of the chunk
	out  []float64
}

// newHalfband returns a decimator for sound of a rate in Hz.
func newHalfband(rate float64) *halfband {
	width := 2 * math.Pi * (rate/2 - 2*passEdge) / rate
	side := (stopband - 8) / 2.285 / width / 2
	n := int(side/2) + 1
	if n > 2 {
		n = (n + 3) / 4 * 4 // halve works on two, or four at a time
	}
	taps := make([]float64, n)
	beta, reach := 0.1102*(stopband-8.7), float64(2*len(taps))
	sum := 0.0
	for i := range taps {
		x := reach - 1 - 2*float64(i) // distance from the centre, odd
		taps[i] = math.Sin(math.Pi*x/2) / (math.Pi * x) * audio.Bessel0(beta*math.Sqrt(1-x*x/reach/reach))
		sum += taps[i]
	}
	for i := range taps {
		taps[i] *= 0.25 / sum // with the centre's half: a gain of one
	}
	return &halfband{taps: taps}
}

// prepare makes room for chunks of n samples.
func (h *halfband) prepare(n int) {
	h.line = make([]float64, 4*len(h.taps)-2+n)
	h.out = make([]float64, n/2)
}

// halve takes a chunk and returns one of half the length, which is good until the next call.
//
//go:norace
func (h *halfband) halve(in []float64) []float64 {
	past := len(h.line) - len(in)
	copy(h.line[past:], in)
	if len(h.taps) == 2 {
		outer, inner := h.taps[0], h.taps[1]
		line := h.line
		for n := range h.out {
			w := (*[7]float64)(line[2*n:])
			h.out[n] = outer*(w[0]+w[6]) + inner*(w[2]+w[4]) + 0.5*w[3]
		}
	} else {
		for n := range h.out {
			w := h.line[2*n : 2*n+past+1]
			y := 0.5 * w[past/2]
			for i := 0; i+4 <= len(h.taps); i += 4 {
				t := (*[4]float64)(h.taps[i:])
				a, b := (*[7]float64)(w[2*i:]), (*[7]float64)(w[past-2*i-6:])
				y += t[0]*(a[0]+b[6]) + t[1]*(a[2]+b[4]) + (t[2]*(a[4]+b[2]) + t[3]*(a[6]+b[0]))
			}
			h.out[n] = y
		}
	}
	copy(h.line, h.line[len(in):])
	return h.out
}
