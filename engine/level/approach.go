package level

import (
	"context"
	"math"

	"evenshelf/engine/audio"
)

const (
	// closeEnough ends the search for the gain, LU.
	closeEnough = 0.02
	// mostTries bounds the search; deep limiting needs five to seven.
	mostTries = 10
	// movedApart is the spread, dB, of what compressor and ceiling take off from which on the ride makes up for it.
	movedApart = 0.3
	// mostRides is how often it does.
	mostRides = 2
	// unmet is how far under the ceiling true peaks have to be read, dB, to be sure that it has nothing to do.
	unmet = 0.2
)

// foresee finds the gain with which the compressor's and the ceiling's work still leave the aim, by rendering
// into a meter: each try costs a pass over the sound, but no encoding. While the ceiling has nothing to do a change of
// gain needs none: what comes out follows it. The secant's slope is bounded, since the loudness of limited sound rises by
// less than its gain, but never falls.
func (j *turn) foresee(ctx context.Context) error {
	if j.plan.Untouched || j.plan.still() && !j.plan.Limit {
		j.shift()
		return nil
	}
	plan, rides := j.plan, 0
	lastGain, last := plan.Gain, audio.LUFS(audio.Undefined)
	best := audio.LU(math.Inf(1))
	for range mostTries {
		r, err := j.predict(ctx, plan)
		if err != nil {
			return err
		}
		if ride, wider := j.rideAgain(plan, r); ride != nil && rides < mostRides {
			rides++
			plan.Ride, plan.Wider, last = ride, wider, audio.LUFS(audio.Undefined)
			continue
		}
		most := j.mostGain(plan, r)
		plan.Gain, r = j.follow(plan, r, most)
		off := plan.Aim.Sub(r.anchored)
		tooMuch := plan.Gain > most+closeEnough
		if !tooMuch && abs(off) < best {
			best, j.plan, j.foreseen = abs(off), plan, r
		}
		if !tooMuch && (!(abs(off) > closeEnough) || off > 0 && plan.Gain >= most-closeEnough) {
			break
		}
		slope := r.slope()
		if audio.Defined(last) && plan.Gain != lastGain {
			slope = float64(r.anchored-last) / float64(plan.Gain-lastGain)
		}
		lastGain, last = plan.Gain, r.anchored
		plan.Gain = stored(min(plan.Gain+audio.DB(float64(off)/min(max(slope, 0.25), 1.5)), most))
	}
	if math.IsInf(float64(best), 1) {
		var err error
		if j.foreseen, err = j.predict(ctx, plan); err != nil {
			return err
		}
		j.plan = plan
	}
	j.most = j.mostGain(j.plan, j.foreseen)
	j.plan.dropIdle(j.foreseen.work)
	j.plan.Reason = j.plan.words(j.task.Profile)
	return nil
}

// follow moves the gain of a plan towards its aim, as far as the ceiling has nothing to do with it, and returns it with
// what then comes out.
func (j *turn) follow(plan Plan, r rendering, most audio.DB) (audio.DB, rendering) {
	if depth, _ := deepest(r.work.Limited); depth > 0 {
		return plan.Gain, r
	}
	free := min(most, plan.Gain+j.room(plan, r)-unmet)
	start, gain := r, plan.Gain
	for range mostTries {
		off := audio.DB(plan.Aim.Sub(r.anchored))
		next := stored(min(plan.Gain+off, free))
		if !(abs(off) > closeEnough) || next == plan.Gain {
			break
		}
		plan.Gain = next
		r = j.louder(start, plan.Gain-gain)
	}
	return plan.Gain, r
}

// dropIdle takes out of the plan what had nothing to do: without it the same bytes are made sooner.
func (plan *Plan) dropIdle(w Work) {
	if depth, _ := deepest(w.Compressed); depth == 0 {
		plan.Compressor = nil
	}
	if depth, _ := deepest(w.Limited); depth == 0 {
		plan.Limit = false
	}
}

// shift foresees a steady gain. Loudness follows it, but for quiet passages that come over the gate at −70 LUFS.
func (j *turn) shift() {
	most := audio.DB(j.plan.Ceiling - j.before.TruePeak)
	j.most = most + j.task.Profile.Limiter.Most
	if j.mayLimit() {
		j.most += audio.DB(j.task.Profile.Ceiling - j.plan.Ceiling)
	}
	for range mostTries {
		j.foreseen = j.shifted(j.plan.Gain)
		off := audio.DB(j.plan.Aim.Sub(j.foreseen.anchored))
		if j.plan.Untouched || j.task.Shared != nil || abs(off) < closeEnough || off > 0 && j.plan.Gain >= most {
			break
		}
		j.plan.Gain = stored(min(j.plan.Gain+off, most))
		j.plan.Reason = j.plan.words(j.task.Profile)
	}
}

// mostGain is the gain with which the ceiling takes off as much as it may, by what it did in a rendering of the plan.
func (j *turn) mostGain(plan Plan, r rendering) audio.DB {
	room := j.room(plan, r)
	if deepest, _ := deepest(r.work.Limited); deepest > 0 {
		room = -deepest
	}
	most := plan.Gain + room + j.task.Profile.Limiter.Most
	if j.mayLimit() { // how much goes by the profile's ceiling: what an encoder needs lower is not held against it
		most += audio.DB(j.task.Profile.Ceiling - plan.Ceiling)
	}
	return most
}

// room is how far true peaks are under the ceiling in a rendering of the plan, before they are encoded.
func (j *turn) room(plan Plan, r rendering) audio.DB {
	return audio.DB(plan.Ceiling-r.TruePeak) + j.encoder.Gain
}

// rideAgain returns a ride that makes up for what compressor and ceiling did in a rendering, so that they do not
// move apart again what the ride brought together; nil if there is nothing to make up for. Music is left to them.
func (j *turn) rideAgain(plan Plan, r rendering) (again *Ride, wider audio.LU) {
	p := j.task.Profile
	if plan.Ride == nil || p.Ride.Step == 0 {
		return nil, 0
	}
	moved := r.work.moved(len(j.before.Timeline.Level))
	if spreadWhere(moved, j.before.Timeline.Active) < movedApart {
		return nil, 0
	}
	return rideOf(p, j.before, plan.Anchor, moved)
}
