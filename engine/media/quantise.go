package media

import (
	"math"
	"math/bits"
)

// quantiser rounds one channel of float samples to integers of so many bits with triangular dither, or plainly.
//
// Rounding alone makes an error that depends on the signal: distortion. Adding noise before it, the sum
// of two independent uniform variables of ±½ LSB, makes the error's mean and power independent of the
// signal: a steady hiss of power Δ²/4 (Δ = 1 LSB), 4.77 dB above the Δ²/12 of plain rounding (Lipshitz,
// Wannamaker, Vanderkooy, J. Audio Eng. Soc. 40(5), 1992).
//
// A sample that already is a whole number of LSB has no error to hide and passes unchanged. So digital
// silence stays silence, and integers that met no gain come out bit for bit.
//
// The noise is drawn from one generator, of which each channel has a stretch of 2^40 draws, one a sample whether used
// or not: the same sound always makes the same bytes, however it is cut into blocks. A sample that is the first
// channel's gets the first channel's noise: one voice in two channels stays one, also to a codec, which would else
// have to code the difference of two noises.
//
// It counts in fixed point, units of 2^−30 LSB: exact, the same on every machine, and without a branch that
// depends on the sample.
type quantiser struct {
	scale     float64 // units in full scale, 2^(bits−1+30)
	low, high int64   // the least and the greatest integer
	plain     bool
	noise     uint64  // the generator's count
	apart     uint64  // how far that is ahead of the first channel's
	shaper    *shaper // nil: the noise is white
}

const (
	fraction = 30 // bits of a sample, or of a half of the dither, after the point
	oneLSB   = 1 << fraction
	halfLSB  = oneLSB / 2
)

func newQuantisers(spec Spec) []quantiser {
	q := make([]quantiser, spec.Format.Layout.Channels)
	full := int64(1) << (spec.BitDepth - 1)
	var weights []int64
	if spec.Shaped && !spec.Plain {
		weights = shape(spec.Format.Rate)
	}
	for c := range q {
		q[c] = quantiser{scale: float64(full) * oneLSB, low: -full, high: full - 1, plain: spec.Plain, noise: uint64(c) << 40 * stride, apart: uint64(c) << 40 * stride}
		if weights != nil {
			q[c].shaper = newShaper(weights)
		}
	}
	return q
}

// quantise writes the integers for src to dst, which must be as long, as must first, the first channel at the same
// time. Values past full scale, after dither, are clipped to it. NaN becomes 0.
func (q *quantiser) quantise(dst []int32, src, first []float32) {
	switch {
	case q.shaper != nil:
		q.shaped(dst, src, first)
	case q.plain:
		q.rounded(dst, src)
	default:
		q.dithered(dst, src, first)
	}
}

//go:norace
func (q *quantiser) dithered(dst []int32, src, first []float32) {
	dst, first = dst[:len(src)], first[:len(src)]
	state, apart, scale, low, high := q.noise, q.apart, q.scale, q.low, q.high
	for i, x := range src {
		state += stride
		if outside(x) {
			dst[i] = clipped(x, low, high)
			continue
		}
		fixed := int64(float64(x) * scale)
		draw := state
		if x == first[i] {
			draw -= apart
		}
		noise := triangle(draw) + halfLSB
		if fixed&(oneLSB-1) == 0 {
			noise = 0
		}
		dst[i] = int32(min(max((fixed+noise)>>fraction, low), high))
	}
	q.noise = state
}

// rounded rounds to the nearest integer, halves to the even one.
func (q *quantiser) rounded(dst []int32, src []float32) {
	dst = dst[:len(src)]
	for i, x := range src {
		if outside(x) {
			dst[i] = clipped(x, q.low, q.high)
			continue
		}
		fixed := int64(float64(x) * q.scale)
		whole := (fixed + halfLSB - 1 + fixed>>fraction&1) >> fraction
		dst[i] = int32(min(max(whole, q.low), q.high))
	}
}

// outside reports whether a sample is at ±2 of full scale or past it, where fixed point has no room at 32 bits, or is
// not a number. The bits of both are greater than those of all others, but for the sign.
func outside(x float32) bool { return math.Float32bits(x)<<1 >= math.Float32bits(2)<<1 }

// clipped is the integer for a sample that is outside.
//
//go:noinline
func clipped(x float32, low, high int64) int32 {
	switch {
	case x > 0:
		return int32(high)
	case x < 0:
		return int32(low)
	default: // not a number
		return 0
	}
}

// The generator counts in steps of the golden section and folds the count's product with a changed self, 128 bits, to
// 64: two instructions on most machines, and no draw waits for the one before. The key is the fraction of π.
const (
	stride = 0x9E3779B97F4A7C15
	key    = 0x243F6A8885A308D3
)

// triangle makes the dither of a draw: the sum of two uniform variables, triangular within ±1 LSB.
func triangle(state uint64) int64 {
	high, low := bits.Mul64(state, state^key)
	draw := high ^ low
	return int64(draw>>(64-fraction)) + int64(draw&(oneLSB-1)) - oneLSB
}
