package ride

import (
	"math"
	"slices"
)

const (
	gate    = -70.0 // LUFS: nothing below it is programme (BS.1770)
	silence = -200.0
	loudest = 60.0 // LUFS; what claims to be louder is taken for that
)

// decibels of a power; silence has a level, so that it can be reckoned with.
func decibels(power float64) float64 {
	if !(power > 1e-20) {
		return silence
	}
	return 10 * math.Log10(power)
}

func power(level float64) float64 { return math.Exp(perDB * level) }

func fill[T any](s []T, v T) {
	for i := range s {
		s[i] = v
	}
}

// sized returns s with a length of n, made anew only if it has to be.
func sized(s []float64, n int) []float64 { return slices.Grow(s[:0], n)[:n] }

// running are the sums of what is before each value, so that the mean of any stretch costs nothing.
type running []float64

func sums(values []float64) running {
	r := make(running, len(values)+1)
	for i, v := range values {
		r[i+1] = r[i] + v
	}
	return r
}

// mean over [from, to), which is cut to what there is; of nothing it is 0.
func (r running) mean(from, to int) float64 {
	from, to = max(from, 0), min(to, len(r)-1)
	if from >= to {
		return 0
	}
	return max(0, (r[to]-r[from])/float64(to-from))
}

// runs calls yield with every longest stretch of one value.
func runs(values []bool, yield func(from, to int, value bool)) {
	for i := 0; i < len(values); {
		j := i + 1
		for j < len(values) && values[j] == values[i] {
			j++
		}
		yield(i, j, values[i])
		i = j
	}
}

// clamp keeps v in [low, high]; what is not a number is low.
func clamp(v, low, high float64) float64 {
	if !(v > low) {
		return low
	}
	return min(v, high)
}

// weighted is a value with a weight.
type weighted struct{ value, weight float64 }

// percentile returns the value at a share of all the weight, which it sorts; NaN if there is none.
func percentile(values []weighted, share float64) float64 {
	slices.SortFunc(values, func(a, b weighted) int {
		switch {
		case a.value < b.value:
			return -1
		case a.value > b.value:
			return 1
		}
		return 0
	})
	total := 0.0
	for _, v := range values {
		total += v.weight
	}
	left := share * total
	for _, v := range values {
		if left -= v.weight; left <= 0 {
			return v.value
		}
	}
	if len(values) > 0 {
		return values[len(values)-1].value
	}
	return math.NaN()
}
