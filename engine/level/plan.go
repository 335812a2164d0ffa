package level

import (
	"errors"
	"fmt"

	"evenshelf/engine/audio"
	"evenshelf/engine/profile"
)

const (
	// peakTolerance is how far a true peak may read over the ceiling, dB: the meter's own error.
	peakTolerance = 0.05
	// peakAim is how far over the ceiling a peak may be before another rendering is worth while, dB: only
	// a lossy encoder gets there.
	peakAim = 0.01
	// leastGain is the smallest gain worth a new file, dB.
	leastGain = 0.05
	// anotherRender is the change of gain from which on another rendering is worth while, dB: what a lossy
	// encoder answers to less is as likely to be a jump away as a step closer.
	anotherRender = 0.1
)

// MakePlan decides what to do to a recording so that it comes out as the profile asks. It is an error,
// in words for a person, if the recording has no loudness to go by.
func MakePlan(p profile.Profile, a *Analysis) (Plan, error) {
	if !audio.Defined(a.Integrated) {
		if !audio.Defined(a.SamplePeak) {
			return Plan{}, errors.New("nothing to level: the recording is silent")
		}
		if a.Duration < 0.4 {
			return Plan{}, fmt.Errorf("nothing to level: %.2f s is too short, loudness needs at least 0.4 s", a.Duration)
		}
		return Plan{}, errors.New("nothing to level: nothing in it is louder than −70 LUFS")
	}
	headroom := headroom(p, a)
	wanted := audio.DB(p.Target - a.Integrated)
	plan := Plan{Gain: min(wanted, headroom+p.Limiter.Most), Ceiling: p.Ceiling}
	switch {
	case headroom >= -peakTolerance && audio.LU(abs(wanted)) <= p.Tolerance:
		plan = Plan{Ceiling: p.Ceiling, Untouched: true, Reason: "already within the profile"}
	case headroom >= -peakTolerance && abs(plan.Gain) < leastGain:
		plan = Plan{Ceiling: p.Ceiling, Untouched: true, Reason: "already as loud as its peaks allow"}
	default:
		plan.Limit = plan.Gain > headroom
		plan.Reason = plan.words(p, headroom)
	}
	return plan, nil
}

// headroom is how much gain the true peak leaves under the ceiling; negative if it is over already.
func headroom(p profile.Profile, a *Analysis) audio.DB { return audio.DB(p.Ceiling - a.TruePeak) }

func (plan Plan) words(p profile.Profile, headroom audio.DB) string {
	s := fmt.Sprintf("lift by %.1f dB", plan.Gain)
	if plan.Gain < 0 {
		s = fmt.Sprintf("lower by %.1f dB", -plan.Gain)
	}
	switch {
	case plan.Limit:
		s += fmt.Sprintf(", peaks held %.1f dB lower to stay under %s dBTP", plan.Gain-headroom, audio.Number(float64(p.Ceiling), 1))
	case p.Limiter.Most == 0 && plan.Gain == headroom:
		s += ", as far as the peaks allow"
	}
	return s
}

func abs[F ~float64](v F) F {
	if v < 0 {
		return -v
	}
	return v
}

// again returns the plan for another rendering, given how the last one came out; ok is false if another
// would not come closer. Encoders move loudness and peaks, and even a plain gain can miss: it lifts quiet
// passages over the −70 LUFS gate.
func (plan Plan) again(p profile.Profile, before, after *Analysis) (next Plan, ok bool) {
	next = plan
	over := audio.DB(after.TruePeak - p.Ceiling)
	if over > peakAim {
		next.Ceiling = plan.Ceiling - audio.DBTP(over) - 0.02
	}
	room := audio.DB(next.Ceiling - before.TruePeak)
	next.Gain = min(plan.Gain+audio.DB(p.Target-after.Integrated), room+p.Limiter.Most)
	next.Limit = next.Gain > room
	next.Reason = next.words(p, headroom(p, before))
	return next, abs(next.Gain-plan.Gain) > anotherRender || next.Ceiling != plan.Ceiling
}

// closer reports whether one rendering came out closer to the profile than another: first by how far its
// peaks pass the ceiling, then by its distance from the target.
func closer(p profile.Profile, a, b *Analysis) bool {
	over := func(x *Analysis) audio.DB { return max(0, audio.DB(x.TruePeak-p.Ceiling)-peakAim) }
	if over(a) != over(b) {
		return over(a) < over(b)
	}
	return abs(p.Target.Sub(a.Integrated)) < abs(p.Target.Sub(b.Integrated))
}
