package level_test

import (
	"math"
	"slices"
	"testing"
)

func mean(x []float64) float64 {
	sum := 0.0
	for _, v := range x {
		sum += v
	}
	return sum / float64(len(x))
}

// deviation is the standard deviation of all there is.
func deviation(x []float64) float64 {
	m, sum := mean(x), 0.0
	for _, v := range x {
		sum += (v - m) * (v - m)
	}
	return math.Sqrt(sum / float64(len(x)))
}

// quantile is the value at a share of the sorted values, the nearest rank.
func quantile(x []float64, share float64) float64 {
	if len(x) == 0 {
		return math.NaN()
	}
	s := slices.Sorted(slices.Values(x))
	return s[int(math.Round(share*float64(len(s)-1)))]
}

// ranks are 1 for the least; equal values share the mean of theirs.
func ranks(x []float64) []float64 {
	order := make([]int, len(x))
	for i := range order {
		order[i] = i
	}
	slices.SortFunc(order, func(a, b int) int {
		switch {
		case x[a] < x[b]:
			return -1
		case x[a] > x[b]:
			return 1
		}
		return 0
	})
	out := make([]float64, len(x))
	for i := 0; i < len(order); {
		j := i
		for j < len(order) && x[order[j]] == x[order[i]] {
			j++
		}
		for _, k := range order[i:j] {
			out[k] = float64(i+j+1) / 2
		}
		i = j
	}
	return out
}

// spearman is the rank correlation of two series: Pearson's of their ranks.
func spearman(x, y []float64) float64 {
	rx, ry := ranks(x), ranks(y)
	mx, my := mean(rx), mean(ry)
	var xy, xx, yy float64
	for i := range rx {
		a, b := rx[i]-mx, ry[i]-my
		xy, xx, yy = xy+a*b, xx+a*a, yy+b*b
	}
	return xy / math.Sqrt(xx*yy)
}

// The textbook figures: Spearman's ρ = 1 − 6Σd²/(n³ − n) without ties, worked by hand; with a tie by Pearson of the ranks.
func TestEvaluationNumbers(t *testing.T) {
	if got := spearman([]float64{1, 2, 3, 4, 5}, []float64{10, 9, 30, 20, 50}); math.Abs(got-(1-6.0*4/120)) > 1e-12 {
		t.Errorf("ρ = %v, want 0.8", got)
	}
	if got := ranks([]float64{5, 1, 5}); !slices.Equal(got, []float64{2.5, 1, 2.5}) {
		t.Errorf("ranks with a tie: %v", got)
	}
	if got := quantile([]float64{3, 1, 2}, 0.5); got != 2 {
		t.Errorf("the median of 1, 2, 3 is %v", got)
	}
	if got := deviation([]float64{2, 4, 4, 4, 5, 5, 7, 9}); got != 2 {
		t.Errorf("deviation %v, want 2", got)
	}
}
