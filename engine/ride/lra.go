package ride

import (
	"math"
	"slices"
)

const (
	window = 3 * StepsPerSecond     // short-term loudness
	tail   = 3 * StepsPerSecond / 2 // silence that follows before the last value is taken
)

// ranger foresees loudness ranges. It keeps its memory from one to the next.
type ranger struct{ kept []float64 }

// of returns the loudness range, LU, of the powers of steps, as EBU Tech 3342 has it: short-term powers over 3 s,
// followed by 1.5 s of silence, gated at −70 LUFS and at 20 LU below the mean of what is left; from the 10th to
// the 95th percentile by nearest rank. It is NaN under 3 s and where nothing passes the gate.
func (r *ranger) of(powers []float64) float64 {
	if len(powers) < window {
		return math.NaN()
	}
	r.kept = r.kept[:0]
	sum, total := 0.0, 0.0
	least := power(gate)
	for i := range len(powers) + tail {
		if i < len(powers) {
			sum += powers[i]
		}
		if i >= window {
			sum -= powers[i-window]
		}
		if p := sum / window; i >= window-1 && p >= least {
			r.kept = append(r.kept, p)
			total += p
		}
	}
	least = 0.01 * total / float64(len(r.kept))
	r.kept = slices.DeleteFunc(r.kept, func(p float64) bool { return p < least })
	if len(r.kept) == 0 {
		return math.NaN()
	}
	at := func(share float64) float64 {
		return decibels(ranked(r.kept, int(math.Round(float64(len(r.kept)-1)*share))))
	}
	return at(0.95) - at(0.10)
}

// ranked returns the value that k others come before once they are in order, and puts the values in an order in which
// it lies there (C. Hoare, "Find", Comm. ACM 4(7), 1961). Should that go badly it sorts what is left.
func ranked(v []float64, k int) float64 {
	const rounds = 60
	left := v
	for range rounds {
		if len(left) < 3 {
			break
		}
		a, b, c := left[0], left[len(left)/2], left[len(left)-1]
		pivot := max(min(a, b), min(max(a, b), c))
		i, j := 0, len(left)-1
		for i <= j {
			for left[i] < pivot {
				i++
			}
			for left[j] > pivot {
				j--
			}
			if i <= j {
				left[i], left[j] = left[j], left[i]
				i, j = i+1, j-1
			}
		}
		switch {
		case k <= j:
			left = left[:j+1]
		case k >= i:
			left, k = left[i:], k-i
		default:
			return left[k]
		}
	}
	slices.Sort(left)
	return left[k]
}

// integrated returns the loudness, LUFS, of the powers of steps as BS.1770 gates it, in blocks of four steps one
// step apart; NaN if nothing passes the gate.
func integrated(powers []float64) float64 {
	const block = 4
	r := sums(powers)
	mean := func(least float64) float64 {
		sum, n := 0.0, 0
		for i := block; i < len(r); i++ {
			if p := r.mean(i-block, i); p > least {
				sum, n = sum+p, n+1
			}
		}
		return sum / float64(n)
	}
	first := mean(power(gate))
	if math.IsNaN(first) {
		return first
	}
	return decibels(mean(max(power(gate), first/10)))
}
