package meter

import (
	"math"
	"math/cmplx"
)

// K-weighting (BS.1770 Annex 1) is two second-order sections: a shelf that lifts what a head lifts, and
// a high-pass. The standard prints both at 48 kHz and asks every other rate for the same response. The
// high-pass turns so low that a bilinear transform of its analogue prototype gives it at any rate. The
// shelf is fitted to what is then still missing, because a bilinear shelf drifts away from the printed
// one (0.01 dB at 32 kHz, 0.3 dB at 8 kHz). The pair stays within 0.0001 dB of the printed response
// from 32 kHz up and within 0.01 dB at 8 kHz, over 20 Hz to 0.45 of the rate.

// biquad is (b0 + b1/z + b2/z²) / (1 + a1/z + a2/z²).
type biquad struct{ b0, b1, b2, a1, a2 float64 }

// The printed sections: BS.1770-5 Annex 1, Tables 1 and 2, 48 kHz.
var (
	printedShelf = biquad{1.53512485958697, -2.69169618940638, 1.19839281085285, -1.69065929318241, 0.73248077421585}
	printedPass  = biquad{1, -2, 1, -1.99004745483398, 0.99007225036621}
)

// The analogue prototype behind the printed high-pass, as in many public implementations.
const (
	passFrequency = 38.13547087602444  // Hz
	passQ         = 0.5003270373238773 //
	passScale     = 1.0049948987146884 // makes the numerator (1, −2, 1) at 48 kHz, as printed
)

// gain returns the squared magnitude of the response at w radians a sample.
func (q biquad) gain(w float64) float64 {
	z := cmplx.Rect(1, -w)
	h := (complex(q.b0, 0) + z*(complex(q.b1, 0)+z*complex(q.b2, 0))) / (1 + z*(complex(q.a1, 0)+z*complex(q.a2, 0)))
	return real(h)*real(h) + imag(h)*imag(h)
}

// printedGain returns the squared magnitude of the standard's own response at a frequency in Hz.
func printedGain(hz float64) float64 {
	w := 2 * math.Pi * hz / 48000
	return printedShelf.gain(w) * printedPass.gain(w)
}

// design returns both stages for a rate in Hz.
func design(rate float64) (shelf, pass biquad) {
	if rate == 48000 {
		return printedShelf, printedPass
	}
	pass = highPass(rate)
	return fitShelf(rate, pass), pass
}

// highPass is the bilinear transform of the high-pass prototype.
func highPass(rate float64) biquad {
	k := math.Tan(math.Pi * passFrequency / rate)
	d := 1 + k/passQ + k*k
	g := passScale / d
	return biquad{b0: g, b1: -2 * g, b2: g, a1: 2 * (k*k - 1) / d, a2: (1 - k/passQ + k*k) / d}
}

// fitShelf returns the section that, followed by pass, comes nearest to the printed response between
// 20 Hz and 0.47 of the rate.
//
// With p = sin²(ω/2) the squared magnitude of a section is a ratio N(p)/D(p) of two quadratics, and
// N − T·(D − 1) = T is linear in their five free coefficients, T being the wanted value. Dividing each
// equation by the last round's T·D turns its error into a relative one; a few rounds settle it.
func fitShelf(rate float64, pass biquad) biquad {
	const points, rounds = 64, 5
	var wanted, at [points]float64 // T and p
	top := 0.47 * min(rate, 48000)
	for i := range points {
		hz := 20 * math.Pow(top/20, float64(i)/(points-1))
		w := 2 * math.Pi * hz / rate
		wanted[i] = printedGain(hz) / pass.gain(w)
		at[i] = math.Pow(math.Sin(w/2), 2)
	}
	num, den := [3]float64{}, [3]float64{1, 0, 0}
	for range rounds {
		var a [5][6]float64 // normal equations, right-hand side in the last column
		for i, t := range wanted {
			p := at[i]
			last := t * (den[0] + p*(den[1]+p*den[2]))
			row := [6]float64{1, p, p * p, -t * p, -t * p * p, t}
			for r := range a {
				for c := range a[r] {
					a[r][c] += row[r] * row[c] / (last * last)
				}
			}
		}
		s := solve(a)
		num, den = [3]float64{s[0], s[1], s[2]}, [3]float64{1, s[3], s[4]}
	}
	b0, b1, b2 := factor(num)
	a0, a1, a2 := factor(den)
	return biquad{b0 / a0, b1 / a0, b2 / a0, a1 / a0, a2 / a0}
}

// factor returns the minimum-phase c0 + c1/z + c2/z² whose squared magnitude is q[0] + q[1]·p + q[2]·p²:
// its values at z = 1 and z = −1 are c0 + c1 + c2 and c0 − c1 + c2, and q[2] is 16·c0·c2.
func factor(q [3]float64) (c0, c1, c2 float64) {
	sum, alternating := math.Sqrt(q[0]), math.Sqrt(q[0]+q[1]+q[2])
	outer := (sum + alternating) / 2
	c0 = (outer + math.Sqrt(outer*outer-q[2]/4)) / 2
	return c0, (sum - alternating) / 2, outer - c0
}

// solve returns x of the symmetric positive definite system a[:, :5]·x = a[:, 5], by elimination.
func solve(a [5][6]float64) (x [5]float64) {
	for i := range a {
		for r := i + 1; r < len(a); r++ {
			f := a[r][i] / a[i][i]
			for c := i; c < len(a[r]); c++ {
				a[r][c] -= f * a[i][c]
			}
		}
	}
	for i := len(a) - 1; i >= 0; i-- {
		x[i] = a[i][5]
		for c := i + 1; c < len(x); c++ {
			x[i] -= a[i][c] * x[c]
		}
		x[i] /= a[i][i]
	}
	return x
}
