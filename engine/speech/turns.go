package speech

import "math"

const (
	turnSearch = 2.5 * framesPerSecond // frames to either side of where the windows put a turn
	turnReach  = 4 * framesPerSecond   // frames to either side that are looked at
	turnLeast  = framesPerSecond / 2   // frames that each of the two parts has at least
	aspects    = 8
)

// placeTurns moves the steps at which speech begins or ends, which windows of three seconds see blurred, to where
// the frames change most: where two normal distributions, one before and one after, fit them best (S. Chen,
// P. Gopalakrishnan, "Speaker, environment and channel change detection and clustering via the Bayesian
// information criterion", DARPA Broadcast News Workshop 1998; here with independent aspects).
func placeTurns(p []float32, frames []frame) {
	var w turnWork
	last := 0 // step of the turn before
	for i := 1; i < len(p); i++ {
		if (p[i] >= Likely) == (p[i-1] >= Likely) {
			continue
		}
		next := i + 1
		for next < len(p) && (p[next] >= Likely) == (p[i] >= Likely) {
			next++
		}
		from := max(last*framesPerStep, i*framesPerStep-turnReach)
		to := min(next*framesPerStep, i*framesPerStep+turnReach)
		t := i
		if at := w.split(frames[from:to], i*framesPerStep-from); at > 0 {
			t = (from + at + framesPerStep/2) / framesPerStep
		}
		for k := min(i, t); k < max(i, t); k++ {
			p[k] = 1 - p[k]
		}
		last = t
		i = max(i, t)
	}
}

// turnWork is room to work in: sums over the first frames, of each aspect and its square.
type turnWork struct {
	sums [2*turnReach + 1][aspects][2]float64
}

// split returns the frame at which the second of two parts begins, near a frame; 0 where there is no room for two.
//
//go:norace
func (w *turnWork) split(frames []frame, middle int) int {
	top := int16(silent)
	for _, k := range frames {
		top = max(top, k.level)
	}
	for i, k := range frames {
		level := max(-deepest, float64(int(k.level)-int(top))/64)
		for a, v := range [aspects]float64{level, float64(k.part[0]) / 2, float64(k.part[1]) / 2, float64(k.part[2]) / 2,
			float64(k.part[3]) / 2, float64(k.centroid) / 8, float64(k.detail[0]) / 8, float64(k.voiced) / 8} {
			s := w.sums[i][a]
			w.sums[i+1][a] = [2]float64{s[0] + v, s[1] + v*v}
		}
	}
	n := len(frames)
	best, at := math.Inf(1), 0
	for t := max(turnLeast, middle-turnSearch); t <= min(n-turnLeast, middle+turnSearch); t++ {
		cost := 0.0
		for a := range aspects {
			s, all := w.sums[t][a], w.sums[n][a]
			cost += float64(t)*decibels(variance(s[0], s[1], float64(t))) +
				float64(n-t)*decibels(variance(all[0]-s[0], all[1]-s[1], float64(n-t)))
		}
		if cost < best {
			best, at = cost, t
		}
	}
	return at
}

// variance is that of n numbers with a sum and a sum of squares, and a little more: that of rounding.
func variance(sum, squares, n float64) float64 {
	return max(0, squares/n-sum/n*sum/n) + 0.1
}
