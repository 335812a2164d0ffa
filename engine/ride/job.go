package ride

import (
	"math"
	"slices"
)

// job is what is known of a course before a time constant is chosen.
type job struct {
	Settings
	level    []float64 // as it will be without a ride: with what compressor and limiter move
	power    []float64 // of level
	plain    []float64 // power without knocks: what is followed
	loudness float64   // gated
	spoken   []bool
	active   []bool
	heard    []bool // active, and no fade
	fades    []Span
	body     Span // between fades: what the range is told by
	phrases  []phrase
	seams    []seam
	voices   []Span // between steps of the gain
	smoother smoother
}

func newJob(c Course, s Settings) *job {
	n := len(c.Level)
	j := &job{Settings: s, level: make([]float64, n), power: make([]float64, n)}
	source := make([]float64, n) // what is heard is decided before anything is moved
	sourcePower := make([]float64, n)
	for i, l := range c.Level {
		source[i] = clamp(float64(l), silence, loudest)
		j.level[i] = source[i]
		if i < len(c.Moved) {
			if m := float64(c.Moved[i]); math.Abs(m) < 100 {
				j.level[i] = max(silence, source[i]+m)
			}
		}
		j.power[i], sourcePower[i] = power(j.level[i]), power(source[i])
	}
	loudness := integrated(sourcePower)
	j.loudness = integrated(j.power)
	j.spoken = spokenParts(c.Speech, n, s.Speech)
	if s.Step == 0 && !s.Speech {
		clear(j.spoken)
	}
	j.active = make([]bool, n)
	if !math.IsNaN(loudness) {
		j.active = listen(source, sums(sourcePower), loudness, j.spoken, s.Speech)
	}
	j.heard, j.body = slices.Clone(j.active), Span{0, n}
	if !s.Fades && !math.IsNaN(loudness) {
		j.fades = fadesOf(sourcePower)
		for _, f := range j.fades {
			clear(j.heard[f.From:f.To])
		}
		if !slices.Contains(j.heard, true) { // nothing but fades: there is no level to stand still at
			j.fades, j.heard = nil, slices.Clone(j.active)
		}
		for _, f := range j.fades {
			if f.From == 0 {
				j.body.From = f.To
			} else {
				j.body.To = f.From
			}
		}
	}
	if s.Speech {
		j.background()
	}
	j.withoutKnocks(source)
	cut := j.findVoices()
	j.seams = seams(j.phrases, cut, s.Silence)
	j.voices = between(j.seams, n)
	return j
}

// background takes what is no speech, softer than it and not long, such as applause, for what is behind the speech: it
// keeps the gain of what is beside it.
func (j *job) background() {
	const longest = 30 * StepsPerSecond
	var speech []float64
	for i, on := range j.heard {
		if on && j.spoken[i] {
			speech = append(speech, j.power[i])
		}
	}
	limit := power(integrated(speech))
	r := sums(j.power)
	runs(j.spoken, func(from, to int, spoken bool) {
		if !spoken && to-from < longest && r.mean(from, to) < limit {
			clear(j.heard[from:to])
		}
	})
}

// findVoices finds the phrases, and returns which of them begin with a step of the gain. What was cut out as a voice but
// is none is not heard, and the rest is cut again.
func (j *job) findVoices() (cut []bool) {
	const rounds = 3
	for range rounds {
		j.phrases = phrases(j.plain, j.heard, j.spoken, j.Step > 0)
		if j.Step == 0 {
			cut = make([]bool, len(j.phrases))
			for i, p := range j.phrases {
				cut[i] = p.after
			}
			return cut
		}
		cut = held(j.phrases, voicesApart(j.phrases, j.Step))
		none := scraps(j.phrases, cut)
		if len(none) == 0 {
			return cut
		}
		for _, s := range none {
			clear(j.heard[s.From:s.To])
		}
	}
	j.phrases = phrases(j.plain, j.heard, j.spoken, true)
	return held(j.phrases, voicesApart(j.phrases, j.Step))
}

// trial is a ride with one time constant.
type trial struct {
	anchor, kept float64
	before, lra  float64   // the range there was and that is left, fades apart, LU
	order        float64   // how much of the order of loud and soft is left; 1 where speech goes first
	level        []float64 // the slow level
	curve        []float64 // the gain, dB, on the edges of steps
}

const (
	orderly     = 0.97 // with less, the order of loud and soft is lost
	inaudible   = 45.0 // dB under the anchor, nobody hears the noise of a pause
	worthFaster = 0.3  // LU, that a faster ride has to narrow the range by where none is enough
)

// good reports whether no faster ride is needed.
func (t trial) good(most float64) bool { return t.met(most) && t.order >= orderly }

func (t trial) met(most float64) bool { return t.lra <= most+rangeSlop }

// better reports whether a faster ride is better than a slower one.
func (t trial) better(slower trial, most float64) bool {
	switch {
	case t.met(most) && slower.met(most):
		return t.order > slower.order
	case t.met(most) != slower.met(most):
		return t.met(most)
	}
	return t.lra < slower.lra-worthFaster
}

func (j *job) solve(tau float64) trial {
	n := len(j.level)
	t := trial{level: make([]float64, n), curve: make([]float64, n+1)}
	weights := make([]float64, n)
	for _, p := range j.phrases {
		fill(weights[p.From:p.To], 1)
	}
	smooth := func(power []float64) {
		for _, v := range j.voices {
			j.smoother.level(t.level[v.From:v.To], power[v.From:v.To], weights[v.From:v.To], tau)
		}
	}
	smooth(j.plain)
	if slices.Contains(j.spoken, true) {
		j.gate(weights, t.level)
		smooth(j.tamed(t.level))
	}
	t.anchor = j.anchor(t.level)
	w := narrowing{job: j, to: rangeMap{t.anchor, j.Deadband, j.Lift, j.Cut}, slow: t.level,
		gain: make([]float64, n), curve: t.curve, ridden: make([]float64, n)}
	t.before = w.ranger.of(j.power[j.body.From:j.body.To])
	if j.Step > 0 && (t.before > j.Range+asWide || j.Even && j.apart()) {
		w.said = j.speechAround()
		w.even = slices.Max(w.said) > 0
	}
	t.kept = w.solve(j.Range)
	t.lra = w.ranger.of(w.ridden[j.body.From:j.body.To])
	t.order = j.orderIn(w.ridden)
	sum, count := 0.0, 0.0
	for i, on := range j.heard {
		if on {
			sum, count = sum+w.share(i, t.kept), count+1
		}
	}
	t.kept = sum / count
	return t
}

// gate gives each step of speech the weight it has in its loudness as BS.1770 gates it: the share of the 400 ms blocks
// over it that are less than 10 LU below the level around. So two voices of one loudness have one level, however short
// or long the gaps between their words.
func (j *job) gate(weights, slow []float64) {
	const block, under = 4, 10
	for _, v := range j.voices {
		r := sums(j.plain[v.From:v.To])
		passed := make([]float64, v.To-v.From+1) // blocks that pass among those that begin before
		for i := range v.To - v.From {
			passed[i+1] = passed[i]
			if i+block <= v.To-v.From && decibels(r.mean(i, i+block)) > max(gate, slow[v.From+i+block/2]-under) {
				passed[i+1]++
			}
		}
		if passed[len(passed)-1] == 0 {
			continue
		}
		for i := v.From; i < v.To; i++ {
			if j.spoken[i] {
				weights[i] = (passed[i-v.From+1] - passed[max(0, i-v.From+1-block)]) / block
			}
		}
	}
	for _, f := range j.fades {
		clear(weights[f.From:f.To])
	}
}

// apart reports whether voices stand so far apart that they are brought together however narrow the range is.
func (j *job) apart() bool {
	return slices.ContainsFunc(j.seams, func(s seam) bool {
		return s.step && !s.jump && j.spoken[max(0, s.From-1)] && j.spoken[min(s.To, len(j.spoken)-1)]
	})
}

// speechAround is the share of speech around each step, within one voice.
func (j *job) speechAround() []float64 {
	const reach = 3 * StepsPerSecond / 2
	around := make([]float64, len(j.spoken))
	for i, s := range j.spoken {
		if s {
			around[i] = 1
		}
	}
	for _, v := range j.voices {
		r := sums(around[v.From:v.To])
		for i := v.From; i < v.To; i++ {
			around[i] = r.mean(i-v.From-reach, i-v.From+reach+1)
		}
	}
	return around
}

// shape turns the gains of steps into a curve, whose values lie on their edges.
func (j *job) shape(g, gain []float64) {
	edges(g, gain, j.voices)
	for i, s := range j.seams {
		if s.jump {
			next := len(gain)
			if i+1 < len(j.seams) {
				next = j.seams[i+1].From
			}
			s.jumpTurn(g, gain[s.From-1], next)
			continue
		}
		a, b := g[s.From], g[s.To]
		if s.step {
			a = gain[max(0, s.From-1)]
			b = gain[min(len(gain)-1, s.To)]
		}
		s.turn(g, a, b)
	}
	hold(g, j.phrases[0].From, j.phrases[len(j.phrases)-1].To)
}

// finish turns a trial into a ride, and says what that does.
func (j *job) finish(ride *Ride, t trial) {
	for _, s := range j.seams {
		if s.step {
			ride.Steps = append(ride.Steps, s.Span)
		}
	}
	ride.Fades = j.fades
	for i, v := range t.curve {
		ride.Gain[i] = float32((math.Round(v*perHundred) + 0) / perHundred) // never −0
		t.curve[i] = float64(ride.Gain[i])
	}
	lift, at := floorLift(t.curve, j.level, j.active, t.anchor-inaudible)
	ride.FloorLift, ride.FloorAt = lift, float64(at)/StepsPerSecond
	ridden := make([]float64, len(j.power))
	for i, p := range j.power {
		ridden[i] = p * power((t.curve[i]+t.curve[i+1])/2)
	}
	ride.Range, ride.way, ride.least = new(ranger).of(ridden), 1, leastReach
	switch {
	case t.before <= j.Range:
		ride.least = leastApart
	case !(j.Even && j.apart()):
		ride.way = (t.before - t.lra) / (t.before - j.Range)
	}
	left := t.lra
	if ride.Idle() {
		left = t.before
	}
	ride.Over = max(0, left-j.Range)
}
