package ride

import "math"

// perDB is what one dB is in natural logarithms of power.
const perDB = math.Ln10 / 10

// smoother finds the slow level of stretches of a course. It keeps its memory from one to the next.
type smoother struct {
	pen, lower    [3][]float64 // the penalty's band and that of its factor: main diagonal first
	right, weight []float64    // of the equation to solve
}

// level writes to s the slow level, in dB, of a stretch: the minimum over s of
//
//	Σ w·(p·10^(−s/10) + c·s)/c² + ½·μ·Σ(Δs)² + ½·λ·Σ(Δ²s)²,  c = ln10/10, μ = (τ/Δ)², λ = (τ/Δ)⁴, Δ a step.
//
// The first sum is the likelihood of a Gamma law, by which s fits the mean power, which is what loudness is,
// and not the mean of decibels. The penalty on slopes keeps short stretches from having one of their own.
// p is power, w the weight of a step, 0 or more, tau is in s. Where no step has a weight, s becomes NaN.
//
// The problem is convex; it is solved by Newton's method with the weight of a step not below that of Fisher
// scoring, which bounds a stride to 1/c dB.
func (m *smoother) level(s, p, w []float64, tau float64) {
	n := len(s)
	m.penalty(n, tau*StepsPerSecond)
	m.right, m.weight = sized(m.right, n), sized(m.weight, n)
	total := 0.0
	for i, v := range w {
		total += v
		m.right[i] = 0
		if v > 0 {
			m.right[i] = v * decibels(p[i])
		}
	}
	if total == 0 {
		fill(s, math.NaN())
		return
	}
	m.solve(s, w)
	for range mostStrides {
		for i, v := range w {
			m.weight[i], m.right[i] = 0, 0
			if v > 0 {
				ratio := min(p[i]*math.Exp(-perDB*s[i]), 1e6)
				m.weight[i] = v * max(1, ratio)
				m.right[i] = m.weight[i]*s[i] + v*(ratio-1)/perDB
			}
		}
		if m.improve(s) < strideEnough {
			return
		}
	}
}

const (
	mostStrides  = 60
	strideEnough = 0.002 // dB
)

// improve replaces s by the solution for the right side and returns how far it moved, dB.
func (m *smoother) improve(s []float64) float64 {
	m.factor(m.weight)
	m.substitute()
	furthest := 0.0
	for i, v := range m.right {
		furthest = max(furthest, math.Abs(v-s[i]))
		s[i] = v
	}
	return furthest
}

// solve writes to s the penalised least squares (W + μD¹ᵀD¹ + λD²ᵀD²)⁻¹ times the right side.
func (m *smoother) solve(s, w []float64) {
	m.factor(w)
	m.substitute()
	copy(s, m.right)
}

// penalty sets up μD¹ᵀD¹ + λD²ᵀD² for n steps and a time constant in steps.
func (m *smoother) penalty(n int, tau float64) {
	mu := tau * tau
	lambda := mu * mu
	for k := range m.pen {
		m.pen[k] = sized(m.pen[k], n)
		clear(m.pen[k])
		m.lower[k] = sized(m.lower[k], n)
	}
	add := func(i int, weight float64, row ...float64) { // row is a row of D from column i on
		for a := range row {
			for b := a; b < len(row); b++ {
				m.pen[b-a][i+b] += weight * row[a] * row[b]
			}
		}
	}
	for i := range n {
		if i+1 < n {
			add(i, mu, -1, 1)
		}
		if i+2 < n {
			add(i, lambda, 1, -2, 1)
		}
	}
}

// factor writes LDLᵀ of the penalty with weights on its diagonal to lower. It is positive definite once one
// weight is not 0.
func (m *smoother) factor(weights []float64) {
	d, l1, l2 := m.lower[0], m.lower[1], m.lower[2]
	for i, v := range weights {
		d[i] = m.pen[0][i] + v
		if i >= 2 {
			l2[i] = m.pen[2][i] / d[i-2]
			d[i] -= l2[i] * m.pen[2][i]
		}
		if i >= 1 {
			off := m.pen[1][i]
			if i >= 2 {
				off -= l2[i] * d[i-2] * l1[i-1]
			}
			l1[i] = off / d[i-1]
			d[i] -= l1[i] * off
		}
	}
}

// substitute turns the right side into the solution.
func (m *smoother) substitute() {
	d, l1, l2, x := m.lower[0], m.lower[1], m.lower[2], m.right
	for i := range x {
		if i >= 1 {
			x[i] -= l1[i] * x[i-1]
		}
		if i >= 2 {
			x[i] -= l2[i] * x[i-2]
		}
	}
	for i := len(x) - 1; i >= 0; i-- {
		x[i] /= d[i]
		if i+1 < len(x) {
			x[i] -= l1[i+1] * x[i+1]
		}
		if i+2 < len(x) {
			x[i] -= l2[i+2] * x[i+2]
		}
	}
}
