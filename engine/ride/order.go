package ride

import (
	"cmp"
	"slices"
)

const fewestBlocks = 8 // that say something of their order

// orderIn returns Spearman's rank correlation of the loudness of blocks of 3 s, as they are and as they are ridden. It
// is 1 where they are too few, and without those of speech: voices are meant to change places with what is softer.
func (j *job) orderIn(ridden []float64) float64 {
	if j.Speech {
		return 1
	}
	var before, after []float64
	for at := 0; at+window <= len(ridden); at += window {
		said, sum, out := 0, 0.0, 0.0
		for i := at; i < at+window; i++ {
			sum, out = sum+j.power[i], out+ridden[i]
			if j.spoken[i] {
				said++
			}
		}
		if 2*said < window && sum/window > power(gate) {
			before, after = append(before, sum), append(after, out)
		}
	}
	if len(before) < fewestBlocks {
		return 1
	}
	n, sum := float64(len(before)), 0.0
	after = Ranks(after)
	for i, r := range Ranks(before) {
		sum += (r - after[i]) * (r - after[i])
	}
	return 1 - 6*sum/(n*(n*n-1))
}

// Ranks returns the place of each value among all, from 0; equal ones share theirs.
func Ranks(values []float64) []float64 {
	at := make([]int, len(values))
	for i := range at {
		at[i] = i
	}
	slices.SortFunc(at, func(a, b int) int { return cmp.Compare(values[a], values[b]) })
	ranks := make([]float64, len(values))
	for i := 0; i < len(at); {
		k := i + 1
		for k < len(at) && values[at[k]] == values[at[i]] {
			k++
		}
		for _, m := range at[i:k] {
			ranks[m] = float64(i+k-1) / 2
		}
		i = k
	}
	return ranks
}
