package level

import (
	"cmp"
	"math"
	"slices"

	"evenshelf/engine/audio"
)

const (
	orderBlock = 3 * audio.StepsPerSecond  // steps of which the order is looked at
	orderLeast = 60 * audio.StepsPerSecond // under a minute there are too few
)

// treatmentOf sums up what a rendering did to the sound of a recording.
func treatmentOf(before *Analysis, r rendering) *Treatment {
	t := &Treatment{}
	over := func(limit float32) audio.Ratio {
		n, heard := 0, 0
		for i, on := range before.Timeline.Active {
			if !on {
				continue
			}
			heard++
			if i < len(r.work.Limited.Mean) && r.work.Limited.Mean[i] > limit {
				n++
			}
		}
		return audio.Ratio(float64(n) / max(1, float64(heard)))
	}
	t.Limited1, t.Limited3, t.Limited6 = over(1), over(3), over(6)
	depth, step := deepest(r.work.Limited)
	t.Deepest, t.DeepestAt = depth, seconds(step)
	t.Order = order(before.Timeline.ShortTerm, r.timeline.ShortTerm, before.Integrated)
	return t
}

func seconds(step int) audio.Seconds { return audio.Seconds(step) / audio.StepsPerSecond }

// order is Spearman's rank correlation of the short-term loudness of blocks of 3 s before and after, without what is
// silent or lies 20 LU under the integrated loudness, where noise is; undefined for recordings under a minute.
func order(before, after []float32, integrated audio.LUFS) audio.Ratio {
	n := min(len(before), len(after))
	if n < orderLeast {
		return audio.Ratio(audio.Undefined)
	}
	var a, b []float64
	for i := orderBlock - 1; i < n; i += orderBlock {
		if x, y := float64(before[i]), float64(after[i]); x > max(-70, float64(integrated)-20) && y > -70 {
			a, b = append(a, x), append(b, y)
		}
	}
	return audio.Ratio(correlation(ranks(a), ranks(b)))
}

// ranks returns the place of each value among all; equal ones share theirs.
func ranks(x []float64) []float64 {
	at := make([]int, len(x))
	for i := range at {
		at[i] = i
	}
	slices.SortFunc(at, func(i, j int) int { return cmp.Compare(x[i], x[j]) })
	r := make([]float64, len(x))
	for i := 0; i < len(at); {
		k := i + 1
		for k < len(at) && x[at[k]] == x[at[i]] {
			k++
		}
		for _, m := range at[i:k] {
			r[m] = float64(i+k-1) / 2
		}
		i = k
	}
	return r
}

// correlation is Pearson's; NaN where either does not vary.
func correlation(a, b []float64) float64 {
	var ma, mb float64
	for i := range a {
		ma, mb = ma+a[i]/float64(len(a)), mb+b[i]/float64(len(b))
	}
	var ab, aa, bb float64
	for i := range a {
		x, y := a[i]-ma, b[i]-mb
		ab, aa, bb = ab+x*y, aa+x*x, bb+y*y
	}
	return ab / math.Sqrt(aa*bb)
}
