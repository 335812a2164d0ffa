package level

import (
	"math"
	"slices"

	"evenshelf/engine/audio"
	"evenshelf/engine/dynamics"
	"evenshelf/engine/meter"
	"evenshelf/engine/profile"
)

// rendering is how a plan came out, or will.
type rendering struct {
	meter.Reading
	timeline meter.Timeline
	anchored audio.LUFS // the loudness of the plan's anchor
	work     Work
	copies   int // that were made for it; 0 if it is only foreseen
}

func (j *turn) rendering(r meter.Reading, t meter.Timeline, w Work) rendering {
	return rendering{r, t, j.plan.anchoredIn(j.before, r.Integrated, t), w, 0}
}

// shifted is the source with a steady gain, as it is encoded.
func (j *turn) shifted(gain audio.DB) rendering {
	r, t := louder(j.before.Reading, j.before.Timeline.Timeline, gain+j.encoder.Gain)
	return j.rendering(r, t, Work{})
}

// louder is a rendering of the plan with a steady gain added that the ceiling does not meet.
func (j *turn) louder(r rendering, gain audio.DB) rendering {
	reading, t := louder(r.Reading, r.timeline, gain)
	return j.rendering(reading, t, r.work)
}

// louder is a reading, and its timeline, with a steady gain.
func louder(r meter.Reading, source meter.Timeline, gain audio.DB) (meter.Reading, meter.Timeline) {
	if gain == 0 {
		return r, source
	}
	for _, l := range []*audio.LUFS{&r.MaxMomentary, &r.MaxShortTerm, &r.ShortTerm10, &r.ShortTerm50, &r.ShortTerm95, &r.NoiseFloor} {
		*l += audio.LUFS(gain)
	}
	r.TruePeak += audio.DBTP(gain)
	r.SamplePeak += audio.DBFS(gain)
	r.RMS += audio.DBFS(gain)
	t := source.Ridden(func(int) float64 { return float64(gain) })
	t.Peak = slices.Clone(source.Peak)
	for i := range t.Peak {
		t.Peak[i] += float32(gain)
	}
	// Integrated loudness and range change with the gate; what the grid does not see of them stays as it was read.
	r.Integrated += audio.LUFS(meter.Together(t).Sub(meter.Together(source)))
	r.Range += t.Range() - source.Range()
	return r, t
}

// ridden is the timeline of a recording after the plan's ride.
func (plan Plan) ridden(a *Analysis) meter.Timeline {
	g := plan.Ride.Gain
	return a.Timeline.Timeline.Ridden(func(i int) float64 { return (float64(g[i]) + float64(g[i+1])) / 2 })
}

// anchoredIn is the loudness of the plan's anchor in a rendering of the recording, by its integrated loudness and timeline.
func (plan Plan) anchoredIn(a *Analysis, integrated audio.LUFS, t meter.Timeline) audio.LUFS {
	if plan.Anchor == profile.Speech {
		return speechLoudness(a.Timeline.Course, t)
	}
	return integrated
}

// moved is what a rendering did to the level in each of n steps, dB.
func (w Work) moved(n int) []float32 {
	moved := make([]float32, n)
	for _, part := range []dynamics.Work{w.Compressed, w.Limited} {
		for i, v := range part.Mean[:min(n, len(part.Mean))] {
			moved[i] -= v
		}
	}
	return moved
}

// deepest is the most that was taken off, dB, and the step in which.
func deepest(w dynamics.Work) (depth audio.DB, step int) {
	for i, v := range w.Deepest {
		if audio.DB(v) > depth {
			depth, step = audio.DB(v), i
		}
	}
	return depth, step
}

// slope is how much of a little more gain comes out, by what the ceiling took off: nothing until the gain with which it
// began, and from there on about as the square of what was added.
func (r rendering) slope() float64 {
	depth, _ := deepest(r.work.Limited)
	if depth == 0 {
		return 1
	}
	var with, without float64
	for i, taken := range r.work.Limited.Mean[:min(len(r.work.Limited.Mean), len(r.timeline.Level))] {
		p := math.Pow(10, float64(r.timeline.Level[i])/10)
		with, without = with+p, without+p*math.Pow(10, float64(taken)/10)
	}
	return 1 - 2*10*math.Log10(without/with)/float64(depth)
}

// spreadWhere is the standard deviation of the values where something is heard.
func spreadWhere(x []float32, active []bool) float64 {
	var n, sum, squares float64
	for i, on := range active {
		if on {
			v := float64(x[i])
			n, sum, squares = n+1, sum+v, squares+v*v
		}
	}
	if n == 0 {
		return 0
	}
	return math.Sqrt(max(0, squares/n-sum/n*sum/n))
}
