package media

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
// The noise is drawn from a generator with a fixed seed for each channel, one draw a sample whether used
// or not: the same sound always makes the same bytes, however it is cut into blocks.
//
// It counts in fixed point, units of 2^−30 LSB: exact, the same on every machine, and without a branch that
// depends on the sample.
type quantiser struct {
	scale     float64 // units in full scale, 2^(bits−1+30)
	low, high int64   // the least and the greatest integer
	plain     bool
	noise     uint64  // state of the generator
	shaper    *shaper // nil: the noise is white
}

const (
	fraction = 30 // bits of a sample, or of a half of the dither, after the point
	oneLSB   = 1 << fraction
	halfLSB  = oneLSB / 2
	// outside is a value that no sound has and fixed point has no room for: ±2 of full scale at 32 bits.
	outside = 1 << 62
)

func newQuantisers(spec Spec) []quantiser {
	q := make([]quantiser, spec.Format.Layout.Channels)
	full := int64(1) << (spec.BitDepth - 1)
	var weights []int64
	if spec.Shaped && !spec.Plain {
		weights = shape(spec.Format.Rate)
	}
	for c := range q {
		q[c] = quantiser{scale: float64(full) * oneLSB, low: -full, high: full - 1, plain: spec.Plain, noise: scatter(uint64(c) + 1)}
		if weights != nil {
			q[c].shaper = newShaper(weights)
		}
	}
	return q
}

// quantise writes the integers for src to dst, which must be as long. Values past full scale, after
// dither, are clipped to it. NaN becomes 0.
func (q *quantiser) quantise(dst []int32, src []float32) {
	switch {
	case q.shaper != nil:
		q.shaped(dst, src)
	case q.plain:
		q.rounded(dst, src)
	default:
		q.dithered(dst, src)
	}
}

//go:norace
func (q *quantiser) dithered(dst []int32, src []float32) {
	dst = dst[:len(src)]
	state, scale, low, high := q.noise, q.scale, q.low, q.high
	for i, x := range src {
		state += stride
		v := float64(x) * scale
		if !(v > -outside && v < outside) {
			dst[i] = q.clipped(v)
			continue
		}
		fixed := int64(v)
		noise := triangle(state) + halfLSB
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
		v := float64(x) * q.scale
		if !(v > -outside && v < outside) {
			dst[i] = q.clipped(v)
			continue
		}
		fixed := int64(v)
		whole := (fixed + halfLSB - 1 + fixed>>fraction&1) >> fraction
		dst[i] = int32(min(max(whole, q.low), q.high))
	}
}

// clipped is the integer for a value that fixed point has no room for.
func (q *quantiser) clipped(v float64) int32 {
	switch {
	case v > 0:
		return int32(q.high)
	case v < 0:
		return int32(q.low)
	default: // not a number
		return 0
	}
}

// triangle makes the dither of a draw: the sum of two uniform variables, triangular within ±1 LSB.
func triangle(state uint64) int64 {
	r := scatter(state)
	return int64(r>>(64-fraction)) + int64(r&(oneLSB-1)) - oneLSB
}

// The generator counts in steps of the golden section and scatters the count over all bits (SplitMix64: Steele, Lea,
// Flood, "Fast Splittable Pseudorandom Number Generators", OOPSLA 2014). No draw waits for the one before.
const stride = 0x9E3779B97F4A7C15

func scatter(z uint64) uint64 {
	z = (z ^ z>>30) * 0xBF58476D1CE4E5B9
	z = (z ^ z>>27) * 0x94D049BB133111EB
	return z ^ z>>31
}
