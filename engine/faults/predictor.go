package faults

import "math"

// The sound beside a suspected click is described by linear prediction, each sample from those just before
// it, and the prediction is then tried on the whole of it, the click included. Voices and instruments leave
// errors of a steady size. At a click the error must be far larger than anywhere near, and that for a
// moment only.
const (
	order       = 16
	describedBy = 0.010  // seconds of sound on each side
	moment      = 0.0003 // seconds: longer than the error of a click lasts, but for what the prediction adds
)

// predictor judges the surroundings of one sample.
type predictor struct {
	order, side, moment int // frames
	corr, coeff, next   [order + 1]float64
	sound, faded        []float64
}

func newPredictor(rate int) *predictor {
	p := &predictor{side: int(describedBy * float64(rate)), moment: max(1, int(moment*float64(rate)))}
	p.order = min(order, p.side/8)
	p.sound, p.faded = make([]float64, 2*p.side+1), make([]float64, 2*p.side+1)
	return p
}

// stray returns how many times larger the error of prediction is around sample at of x than at its largest
// elsewhere, that error, and the largest magnitude beside it. There must be side frames before and after it.
//
//go:norace
func (p *predictor) stray(x []float32, at int) (ratio, height, beside float64) {
	s := p.sound
	for i := range s {
		s[i] = float64(x[at-p.side+i])
	}
	from, to := p.side-p.moment, p.side+p.moment+p.order // what the click may reach into
	p.describe(s[:from], s[to:])
	elsewhere := 0.0
	for i := p.order; i < len(s); i++ {
		e := s[i]
		for j := 1; j <= p.order; j++ {
			e -= p.coeff[j] * s[i-j]
		}
		switch e = math.Abs(e); {
		case i >= from && i < to:
			height = max(height, e)
		default:
			elsewhere = max(elsewhere, e)
			beside = max(beside, math.Abs(s[i]))
		}
	}
	return height / max(elsewhere, math.SmallestNonzeroFloat64), height, beside
}

// describe finds the coefficients that predict the parts best (autocorrelation method, Levinson's recursion).
//
//go:norace
func (p *predictor) describe(parts ...[]float64) {
	clear(p.corr[:])
	clear(p.coeff[:])
	for _, part := range parts {
		s := p.faded[:len(part)]
		for i, v := range part {
			s[i] = v * math.Sin(math.Pi*(float64(i)+0.5)/float64(len(s))) // squared in every product: a Hann window
		}
		for lag := 0; lag <= p.order; lag++ {
			sum := 0.0
			for i := lag; i < len(s); i++ {
				sum += s[i] * s[i-lag]
			}
			p.corr[lag] += sum
		}
	}
	left := p.corr[0] * (1 + 1e-9)
	for n := 1; n <= p.order && left > 0; n++ {
		k := p.corr[n]
		for j := 1; j < n; j++ {
			k -= p.coeff[j] * p.corr[n-j]
		}
		k /= left
		p.next = p.coeff
		p.next[n] = k
		for j := 1; j < n; j++ {
			p.next[j] -= k * p.coeff[n-j]
		}
		p.coeff = p.next
		left *= 1 - k*k
	}
}
