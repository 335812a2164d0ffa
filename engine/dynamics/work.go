package dynamics

import (
	"math"

	"evenshelf/engine/audio"
)

// Work is what was taken off a recording, dB, 0 or more, step by step of a tenth of a second: value i is that
// of the frames from audio.Boundary(i) to audio.Boundary(i+1) of what came out. A last step that is not whole
// counts what there is of it.
type Work struct {
	Mean    []float32 // mean over the step
	Deepest []float32 // the most in the step
}

// nothing is the least gain that is told from silence: −240 dB.
const nothing = 1e-12

// tally makes Work out of gains.
type tally struct {
	rate    int64
	frame   int64 // the next one
	end     int64 // of the step under way
	begun   int64 // where it began
	least   float64
	product float64 // of the gains since the last logarithm
	factors int
	sum     float64 // of the gains' logarithms to base 2
	work    Work
}

func newTally(rate int) tally {
	t := tally{rate: int64(rate), least: 1, product: 1}
	t.end = audio.Boundary(1, audio.StepsPerSecond, t.rate)
	return t
}

// idle counts frames with a gain of 1.
func (t *tally) idle(frames int) {
	for frames > 0 {
		n := int(min(int64(frames), t.end-t.frame))
		frames -= n
		t.pass(n)
	}
}

// add counts frames with the gains given. Logarithms are slow: one does for the product of several gains.
func (t *tally) add(gains []float64) {
	for len(gains) > 0 {
		n := int(min(int64(len(gains)), t.end-t.frame))
		least, product, factors := t.least, t.product, t.factors
		for _, g := range gains[:n] {
			g = max(g, nothing)
			least = min(least, g)
			product *= g
			if factors++; factors == 16 {
				t.sum += math.Log2(product)
				product, factors = 1, 0
			}
		}
		t.least, t.product, t.factors = least, product, factors
		gains = gains[n:]
		t.pass(n)
	}
}

// pass moves n frames on, to the end of the step at the most, and closes the step there.
func (t *tally) pass(n int) {
	t.frame += int64(n)
	if t.frame < t.end {
		return
	}
	mean, deepest := t.step()
	t.work.Mean, t.work.Deepest = append(t.work.Mean, mean), append(t.work.Deepest, deepest)
	t.begun, t.least, t.product, t.factors, t.sum = t.frame, 1, 1, 0, 0
	for t.end <= t.frame {
		t.end = audio.Boundary(int64(len(t.work.Mean))+1, audio.StepsPerSecond, t.rate)
	}
}

// step returns what the step under way has so far.
func (t *tally) step() (mean, deepest float32) {
	const perOctave = 20 * math.Ln2 / math.Ln10 // dB
	sum := t.sum + math.Log2(t.product)
	return float32(max(0, -perOctave*sum/float64(max(1, t.frame-t.begun)))), float32(-audio.ToDB(t.least) + 0)
}

// result returns the work so far.
func (t *tally) result() Work {
	w := Work{append([]float32(nil), t.work.Mean...), append([]float32(nil), t.work.Deepest...)}
	if t.frame > t.begun {
		mean, deepest := t.step()
		w.Mean, w.Deepest = append(w.Mean, mean), append(w.Deepest, deepest)
	}
	return w
}
