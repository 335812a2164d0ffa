package meter

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

// Of any passage it still holds, a recall finds the true peak of the whole grid if that is above what is known
// already, and bounds it; a hasty search may miss it but not invent one, and its bound holds too.
func TestRecallIsTheGrid(t *testing.T) {
	k := interpolator()
	rapid.Check(t, func(t *rapid.T) {
		l, r := newLane(chunk), newRecall(2*chunk)
		feed := func(x []float32) {
			l.reset()
			for at := 0; at < len(x); at += chunk {
				copy(l.raw, x[at:])
				l.load()
				r.keep(&l, int64(at))
				l.advance()
			}
		}
		rng := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "past"), 0))
		past := make([]float32, rapid.IntRange(0, 3).Draw(t, "past chunks")*chunk)
		for i := range past {
			past[i] = float32(rng.NormFloat64())
		}
		feed(past)
		r.reset()
		x := anySound(t)
		x = append(x, make([]float32, (chunk-len(x)%chunk)%chunk)...)
		feed(x)
		oldest := max(-stretch, len(x)-r.n+2*stretch)
		from := rapid.IntRange(oldest, len(x)-lead-1).Draw(t, "from")
		to := rapid.IntRange(from+1, min(from+700, len(x)-lead)).Draw(t, "to")
		sample, whole := 0.0, 0.0
		for i := from; i < to; i++ {
			whole = max(whole, slices.Max(intervalPoints(x, i)))
			if i >= 0 {
				sample = max(sample, math.Abs(float64(x[i])))
			}
		}
		if got := r.largest(int64(max(0, from)), int64(max(0, to))); got != sample {
			t.Fatalf("largest sample %g, want %g", got, sample)
		}
		known := rapid.SampledFrom([]float64{0, 0.5, 0.9, 0.95, 0.99, 0.999999, 1, 1.01}).Draw(t, "known") * whole
		peak, bound := r.truePeak(k, int64(from), int64(to), known, 0, false)
		if want := max(known, whole); peak != want {
			t.Fatalf("true peak %.17g, of the whole grid %.17g", peak, want)
		}
		if bound < whole || bound > peak {
			t.Fatalf("bound %g is not between %g and %g", bound, whole, peak)
		}
		known = min(known, whole)
		if peak, bound := r.truePeak(k, int64(from), int64(to), known, 0, true); peak < known || peak > whole || bound < whole {
			t.Fatalf("hasty: %g, bound %g; known %g, of the whole grid %g", peak, bound, known, whole)
		}
	})
}

// When a step's turn to be searched comes, the 3 s before its end and what surrounds them are still held.
func TestRecallReachesBackFarEnough(t *testing.T) {
	for _, rate := range []int{8000, 11025, 22050, 44100, 48000, 96000, 384000} {
		for step := shortTermSteps; step < 2000; step++ {
			ready := (stepsEnd(step, rate) + lead + chunk - 1) / chunk * chunk
			first := stepsEnd(step-shortTermSteps, rate) - 2*stretch
			if held := ready - int64(recallFrames(rate)); held > first {
				t.Fatalf("at %d Hz step %d needs frame %d and the first is %d", rate, step, first, held)
			}
		}
	}
}

// What near leaves out is never more than far says, and can be that much.
func TestNearAndFar(t *testing.T) {
	k := interpolator()
	rng := rand.New(rand.NewPCG(11, 11))
	leftOut := func(w [taps]float64) float64 {
		var next [nearTaps]float32
		for i := range next {
			next[i] = float32(w[reach-nearTaps/2+i])
		}
		return math.Abs(k.at(phases/2, &w) - k.near(&next))
	}
	for range 1000 {
		var w [taps]float64
		for i := range w {
			w[i] = float64(1 - 2*rng.IntN(2))
		}
		if got := leftOut(w); got > k.far {
			t.Fatalf("%g left out of %v, at most %g", got, w, k.far)
		}
	}
	var worst [taps]float64
	for i, h := range k.phase[phases/2] {
		worst[i] = math.Copysign(1, h)
	}
	near(t, "left out at worst", leftOut(worst), k.far, 1e-6)
}
