package level

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/dynamics"
	"evenshelf/engine/meter"
	"evenshelf/engine/profile"
	"evenshelf/engine/ride"
	"evenshelf/engine/speech"
)

// harmless is a minute and a half of speech in a film, and a rendering of it with which nothing is wrong.
func harmless(t *testing.T) (profile.Profile, *Analysis, Plan, rendering) {
	const steps = 900
	p := named(t, "film")
	before := reading(-27, -8)
	before.Duration, before.Range = steps/10, 14
	before.ActiveTime, before.SpeechTime, before.SpeechLoudness = steps/10, steps/10, -27
	curves := func(lufs float32) meter.Timeline {
		tl := meter.Timeline{Step: 0.1}
		for i := range steps {
			wave := float32(5 * math.Sin(float64(i)/40))
			tl.Level, tl.Momentary, tl.ShortTerm = append(tl.Level, lufs), append(tl.Momentary, lufs), append(tl.ShortTerm, lufs+wave)
		}
		return tl
	}
	before.Timeline.Timeline = curves(-27)
	before.Timeline.Course = speech.Course{Active: make([]bool, steps), Speech: make([]float32, steps)}
	for i := range steps {
		before.Timeline.Active[i], before.Timeline.Speech[i] = true, 0.99
	}
	plan := Plan{Anchor: profile.Speech, Anchored: -27, Aim: p.Target, Gain: 4, Limit: true, Ride: &Ride{Most: 2, Gain: make([]float32, steps+1)}}
	after := reading(p.Target, -3).Reading
	after.Duration, after.Range = before.Duration, 8
	r := rendering{Reading: after, timeline: curves(-23), anchored: p.Target, work: Work{
		Limited: dynamics.Work{Mean: make([]float32, steps), Deepest: make([]float32, steps)},
	}}
	return p, before, plan, r
}

// Every limit of harm holds a copy in words, with the moment to listen to where there is one, and lets it pass where the
// profile allows it. The figures are worked out by hand.
func TestLimitsOfHarm(t *testing.T) {
	limit := func(r *rendering, from, to int, db float32) {
		for i := from; i < to; i++ {
			r.work.Limited.Mean[i], r.work.Limited.Deepest[i] = db, db+1
		}
		r.work.Limited.Deepest[from+7] = db + 2
	}
	for _, c := range []struct {
		code, words string
		at          audio.Seconds // −1: none
		harm        func(before *Analysis, plan *Plan, r *rendering)
		allow       func(p *profile.Profile)
	}{
		{"limiting", "more than 1 dB in 56 %", 10.7,
			func(_ *Analysis, _ *Plan, r *rendering) { limit(r, 100, 600, 1.2) },
			func(p *profile.Profile) { p.Harm.Over1 = 0.6 }},
		{"limiting", "more than 3 dB in 33 %", 20.7,
			func(_ *Analysis, _ *Plan, r *rendering) { limit(r, 200, 500, 3.5) },
			func(p *profile.Profile) { p.Harm.Over3 = 0.4 }},
		{"limiting", "more than 6 dB in 11 %", 30.7,
			func(_ *Analysis, _ *Plan, r *rendering) { limit(r, 300, 400, 6.5) },
			func(p *profile.Profile) { p.Harm.Over6 = 0.2 }},
		{"lifted", "lifted by 41.0 dB", 70,
			func(_ *Analysis, plan *Plan, _ *rendering) {
				plan.Gain, plan.Ride.Most, plan.Ride.Gain[700] = 30, 11, 11
			},
			func(p *profile.Profile) { p.Harm.Lift = 42 }},
		{"floor", "lifted 7.5 dB", 42,
			func(_ *Analysis, plan *Plan, _ *rendering) { plan.Ride.FloorLift, plan.Ride.FloorAt = 7.5, 42 },
			func(p *profile.Profile) { p.Harm.Floor = 8 }},
		{"order", "rank correlation", 54,
			func(_ *Analysis, _ *Plan, r *rendering) {
				for i := range r.timeline.ShortTerm {
					r.timeline.ShortTerm[i] = -46 - r.timeline.ShortTerm[i]
				}
			},
			func(p *profile.Profile) { p.Harm.Order = -1 }},
		{"range", "went down to 1.5 LU", 33.3,
			func(_ *Analysis, plan *Plan, r *rendering) { r.Range, plan.Ride.Gain[333] = 1.5, -9 },
			func(p *profile.Profile) { p.Harm.RangeLost = 7 }},
		{"speech", "only 5 %", 0,
			func(before *Analysis, _ *Plan, _ *rendering) { before.SpeechTime = 4.5 },
			func(p *profile.Profile) { p.Harm.SpeechShare = 0.04 }},
		{"speech", "not certain", 0,
			func(before *Analysis, _ *Plan, r *rendering) {
				r.Integrated = -20
				for i := range before.Timeline.Speech {
					before.Timeline.Speech[i] = 0.7
				}
			},
			func(p *profile.Profile) { p.Harm.SpeechLikelihood = 0.6 }},
		{"target", "no more than 10.0 dB", 88,
			func(_ *Analysis, _ *Plan, r *rendering) { r.anchored, r.work.Limited.Deepest[880] = -24, 10 },
			func(p *profile.Profile) { p.Tolerance = 1.5 }},
		{"ceiling", "0.20 dB over the ceiling", -1,
			func(_ *Analysis, _ *Plan, r *rendering) { r.TruePeak = -1.8 },
			func(p *profile.Profile) { p.Ceiling = -1 }},
	} {
		p, before, plan, r := harmless(t)
		p.Harm.Order = 0.9
		if v := judge(p, before, plan, r, treatmentOf(before, r)); v.State != Done {
			t.Fatalf("nothing is wrong, yet it is held: %s", v.Reason)
		}
		c.harm(before, &plan, &r)
		v := judge(p, before, plan, r, treatmentOf(before, r))
		if v.State != Held || len(v.Doubts) != 1 || v.Doubts[0].Code != c.code || !strings.Contains(v.Reason, c.words) {
			t.Errorf("%s, %q: %s, %+v", c.code, c.words, v.State, v.Doubts)
			continue
		}
		switch at := v.Doubts[0].At; {
		case (at != nil) != (c.at >= 0):
			t.Errorf("%s: a moment is missing, or should be: %v", c.code, at)
		case at != nil && math.Abs(float64(*at-c.at)) > 0.05:
			t.Errorf("%s: listen at %.1f s, want %.1f", c.code, *at, c.at)
		case at != nil && !strings.Contains(v.Reason, "listen at "+audio.Clock(float64(*at))):
			t.Errorf("%s: the moment is not in the words: %s", c.code, v.Reason)
		}
		c.allow(&p)
		if v := judge(p, before, plan, r, treatmentOf(before, r)); v.State != Done {
			t.Errorf("%s: the profile allows it, yet it is held: %s", c.code, v.Reason)
		}
	}
}

// Ranks with ties and the correlation of them, against scipy.stats.spearmanr (SciPy 1.10, Debian).
func TestOrderAgainstScipy(t *testing.T) {
	for _, c := range []struct {
		a, b []float64
		want float64
	}{
		{[]float64{1, 2, 3, 4, 5}, []float64{5, 6, 7, 8, 7}, 0.8207826816681233},
		{[]float64{-20, -31.5, -18, -18, -25, -40}, []float64{-22, -25, -21, -20, -25, -26}, 0.9705882352941178},
	} {
		if got := correlation(ride.Ranks(c.a), ride.Ranks(c.b)); math.Abs(got-c.want) > 1e-12 {
			t.Errorf("%v, %v: %.16f, want %.16f", c.a, c.b, got, c.want)
		}
	}
	if got := correlation(ride.Ranks([]float64{1, 1}), ride.Ranks([]float64{2, 3})); !math.IsNaN(got) {
		t.Errorf("what does not vary has an order of %g", got)
	}
	short := make([]float32, orderLeast-1)
	for i := range short {
		short[i] = float32(-20 - rand.Float64())
	}
	if got, _ := order(short, short, -20); audio.Defined(got) {
		t.Errorf("under a minute the order is %g", got)
	}
}
