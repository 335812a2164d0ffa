package level

import (
	"math"

	"evenshelf/engine/audio"
	"evenshelf/engine/ride"
)

const (
	shortTerm  = 3 * audio.StepsPerSecond  // steps, the window of short-term loudness
	orderLeast = 60 * audio.StepsPerSecond // steps: under a minute there are too few blocks to have an order
)

// treatmentOf sums up what a rendering did to the sound of a recording.
func treatmentOf(before *Analysis, r rendering) *Treatment {
	t := &Treatment{}
	var heard, over1, over3, over6, compressed float64
	for i, on := range before.Timeline.Active {
		if !on {
			continue
		}
		heard++
		over1 += exceeds(r.work.Limited.Mean, i, 1)
		over3 += exceeds(r.work.Limited.Mean, i, 3)
		over6 += exceeds(r.work.Limited.Mean, i, 6)
		if i < len(r.work.Compressed.Mean) {
			compressed += float64(r.work.Compressed.Mean[i])
		}
	}
	heard = max(1, heard)
	t.Limited1, t.Limited3, t.Limited6 = audio.Ratio(over1/heard), audio.Ratio(over3/heard), audio.Ratio(over6/heard)
	t.Compressed = audio.DB(compressed / heard)
	depth, step := deepest(r.work.Limited)
	t.Deepest, t.DeepestAt = depth, seconds(step)
	t.Order, t.OrderAt = order(before.Timeline.ShortTerm, r.timeline.ShortTerm, before.Integrated)
	return t
}

// exceeds is 1 if a curve has a step and is over a limit there, else 0.
func exceeds(curve []float32, step int, limit float32) float64 {
	if step < len(curve) && curve[step] > limit {
		return 1
	}
	return 0
}

func seconds(step int) audio.Seconds { return audio.Seconds(step) / audio.StepsPerSecond }

// order is Spearman's rank correlation of the short-term loudness of blocks of 3 s before and after, without what is
// silent or lies 20 LU under the integrated loudness, where noise is; undefined for recordings under a minute. at is
// the block that changed its place most.
func order(before, after []float32, integrated audio.LUFS) (rho audio.Ratio, at audio.Seconds) {
	n := min(len(before), len(after))
	if n < orderLeast {
		return audio.Ratio(audio.Undefined), 0
	}
	var a, b []float64
	var begins []int
	for i := shortTerm - 1; i < n; i += shortTerm {
		if x, y := float64(before[i]), float64(after[i]); x > max(-70, float64(integrated)-20) && y > -70 {
			a, b, begins = append(a, x), append(b, y), append(begins, i+1-shortTerm)
		}
	}
	a, b = ride.Ranks(a), ride.Ranks(b)
	most := -1.0
	for i := range a {
		if moved := math.Abs(a[i] - b[i]); moved > most {
			most, at = moved, seconds(begins[i])
		}
	}
	return audio.Ratio(correlation(a, b)), at
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
