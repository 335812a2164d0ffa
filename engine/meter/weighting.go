package meter

import (
	"math"

	"evenshelf/engine/audio"
)

// weighting is the running K-filter of one channel. Both stages are in direct form I, whose feedback
// path is one multiplication and one addition long; the constant factors of the two numerators are left
// out of the recursion and applied to the power (scale).
type weighting struct {
	b1, b2, a1, a2 float64 // stage 1, numerator over b0
	c1, c2         float64 // stage 2, numerator (1, −2, 1): two differences
	scale          float64 // the power gain left out

	past
}

// past is what the filter remembers: input, output of stage 1 and its first difference, output.
type past struct{ x1, x2, u1, u2, d1, y1, y2 float64 }

func newWeighting(rate int) weighting {
	s, p := design(float64(rate))
	return weighting{
		b1: s.b1 / s.b0, b2: s.b2 / s.b0, a1: s.a1, a2: s.a2,
		c1: p.a1, c2: p.a2,
		scale: s.b0 * s.b0 * p.b0 * p.b0,
	}
}

// add returns sum plus the squares of the weighted samples, before scale, and squares plus those of the
// samples themselves, which cost nothing while the recursion is waited for.
//
//go:norace
func (k *weighting) add(sum, squares float64, x []float64) (weighted, plain float64) {
	b1, b2, a1, a2, c1, c2 := k.b1, k.b2, k.a1, k.a2, k.c1, k.c2
	x1, x2, u1, u2, d1, y1, y2 := k.x1, k.x2, k.u1, k.u2, k.d1, k.y1, k.y2
	for len(x) >= 2 { // two at a time, so that the past changes places without being moved
		v := x[0]
		u2 = (v + b1*x1 + (b2*x2 - a2*u2)) - a1*u1
		d := u2 - u1
		y2 = (d - d1 - c2*y2) - c1*y1
		sum += y2 * y2
		x2 = x[1]
		u1 = (x2 + b1*v + (b2*x1 - a2*u1)) - a1*u2
		d1 = u1 - u2
		y1 = (d1 - d - c2*y1) - c1*y2
		sum += y1 * y1
		squares += v*v + x2*x2
		x1, x2 = x2, v
		x = x[2:]
	}
	for _, v := range x {
		u := (v + b1*x1 + (b2*x2 - a2*u2)) - a1*u1
		d := u - u1
		y := (d - d1 - c2*y2) - c1*y1
		x1, x2, u1, u2, d1, y1, y2 = v, x1, u, u1, d, y, y1
		sum += y * y
		squares += v * v
	}
	k.past = past{x1, x2, u1, u2, d1, y1, y2}
	return sum, squares
}

// addSquares returns sum plus the squares of the samples.
//
//go:norace
func addSquares(sum float64, x []float64) float64 {
	for _, v := range x {
		sum += v * v
	}
	return sum
}

// settle ends the decay in digital silence before it reaches denormal numbers, which are slow.
func (k *weighting) settle() {
	const nothing = 1e-60
	p := &k.past
	if max(math.Abs(p.x1), math.Abs(p.x2), math.Abs(p.u1), math.Abs(p.u2), math.Abs(p.d1), math.Abs(p.y1), math.Abs(p.y2)) < nothing {
		*p = past{}
	}
}

// weights returns the factor each channel's power counts with (BS.1770-5 Tables 3 to 5): 1.41 at ear
// height between 60° and 120° to the side, nothing for LFE, 1 elsewhere and where the position is not
// known. The standard speaks of angles, a file of names: a "back" pair without a "side" pair is taken
// for the one surround pair of 4.0 and 5.1 at ±110°, with a side pair for the rear pair of 7.1 at ±135°.
//
// A single channel counts once, or twice where the rule is that it will be heard from two loudspeakers.
func weights(l audio.Layout, mono audio.MonoRule) []float64 {
	if l.Channels == 1 && mono == audio.TwoLoudspeakers {
		return []float64{2}
	}
	const sides, backs = audio.SideLeft | audio.SideRight, audio.BackLeft | audio.BackRight
	surround := sides
	if l.Mask&sides == 0 {
		surround = backs
	}
	w := make([]float64, l.Channels)
	for c := range w {
		switch p := l.Position(c); {
		case p == audio.LowFrequency:
		case p&surround != 0:
			w[c] = 1.41
		default:
			w[c] = 1
		}
	}
	return w
}
