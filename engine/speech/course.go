package speech

import "math"

// How log-odds of neighbouring windows are believed. They share nearly all of their sound, so each counts as a
// fraction of what it says.
const (
	evidence   = 0.15  // that fraction
	mostOdds   = 8.0   // of a window, either way, that counts towards the likelihood
	changeover = 0.003 // chance that speech begins or ends from one step to the next
	overPause  = 0.05  // the same in a long pause
)

// logOdds are the natural log-odds of speech by the features of a window.
func logOdds(f *features) float64 {
	units := hidden[featureCount]
	for i, v := range f {
		for u, w := range hidden[i] {
			units[u] += w * v
		}
	}
	odds := outer[hiddenUnits]
	for u, v := range units {
		odds += outer[u] * math.Tanh(v)
	}
	return odds
}

// likelihoods turns the log-odds of windows into the likelihood of speech by the whole recording: the posterior of a
// Markov chain with the two states speech and other, forward and backward (L. Rabiner, Proc. IEEE 77(2), 1989).
func likelihoods(odds []float32) []float32 {
	p := make([]float32, len(odds)) // first the log-odds by what comes before a step
	state := 0.0
	for i, o := range odds {
		state = passed(state, o == 0) // there is no window in a long pause
		p[i] = float32(state)
		state += counted(o)
	}
	state = 0
	for i := len(odds) - 1; i >= 0; i-- {
		state += counted(odds[i])
		p[i] = float32(1 / (1 + math.Exp(-state-float64(p[i]))))
		state = passed(state, odds[i] == 0)
	}
	return p
}

// counted is what the log-odds of a window count for.
func counted(odds float32) float64 {
	return evidence * min(mostOdds, max(-mostOdds, float64(odds)))
}

// passed are the log-odds one step on, when speech may have begun or ended.
func passed(odds float64, pause bool) float64 {
	q := changeover
	if pause {
		q = overPause
	}
	p := 1 / (1 + math.Exp(-odds))
	return math.Log((p*(1-q) + (1-p)*q) / (p*q + (1-p)*(1-q)))
}
