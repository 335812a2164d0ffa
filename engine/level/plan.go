package level

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"evenshelf/engine/audio"
	"evenshelf/engine/dynamics"
	"evenshelf/engine/media"
	"evenshelf/engine/meter"
	"evenshelf/engine/profile"
	"evenshelf/engine/ride"
)

const (
	// peakTolerance is how far a true peak may read over the ceiling, dB: the meter's own error.
	peakTolerance = 0.05
	// peakAim is how far over the ceiling a peak may be before another rendering is worth while, dB: only
	// a lossy encoder gets there.
	peakAim = 0.01
	// leastGain is the smallest gain worth a new file, dB.
	leastGain = 0.05
)

// MakePlan decides what to do to a recording so that it comes out as its task asks, when it has been encoded. It is an
// error, in words for a person, if the recording has no loudness to go by.
func MakePlan(t Task, a *Analysis, e Encoder) (Plan, error) {
	if err := hasLoudness(a); err != nil {
		return Plan{}, err
	}
	p := t.Profile
	plan := Plan{Ceiling: audio.DBTP(stored(audio.DB(p.Ceiling) - e.raises(p.Limiter.Most > 0, t.Shared != nil))), Limiter: p.Limiter, Delivered: p.Delivered, mixed: a.Info.Mixed, alike: a.alike}
	plan.Anchor, plan.Anchored = anchorOf(p, a)
	plan.Aim = p.Target
	foreseen := plan.Anchored
	if p.Ride.Speed != profile.Still {
		plan.Ride, plan.Wider = rideOf(p, a, plan.Anchor, nil)
	}
	if plan.Ride != nil {
		ridden := plan.ridden(a)
		foreseen = plan.anchoredIn(a, meter.Together(ridden), ridden)
	}
	if p.Compressor.Ratio > 1 {
		plan.Compressor = compression(p, a, foreseen)
	}
	peak := a.TruePeak
	if t.Shared != nil { // validation sees to it that such a profile neither rides nor compresses
		plan.Aim += audio.LUFS(a.Integrated.Sub(t.Shared.Integrated))
		peak = t.Shared.TruePeak
	}
	room := audio.DB(plan.Ceiling - peak)
	off := audio.LU(plan.Aim - foreseen)
	wanted := audio.DB(off) - e.Gain
	plan.Gain = stored(wanted)
	if plan.still() {
		plan.Gain = stored(min(wanted, room+p.Limiter.Most))
	}
	if t.Shared != nil {
		plan.Aim = a.Integrated + audio.LUFS(plan.Gain+e.Gain)
	}
	fits := a.TruePeak <= p.Ceiling+peakTolerance && plan.Ride == nil && wish(p).MetBy(a.Info)
	switch {
	case p.Within == profile.Leave && fits && abs(off) <= p.Tolerance:
		plan.leave("already within the profile")
	case p.Within == profile.Leave && fits && plan.still() && 0 < off && plan.Gain < stored(wanted) && plan.Gain+e.Gain < max(leastGain, e.Least):
		plan.leave("already as loud as its peaks allow" + leftOver(audio.DB(p.Ceiling-peak), "another encoding is not worth"))
	default:
		plan.Limit = p.Limiter.Most > 0 && (!plan.still() || plan.Gain > audio.DB(plan.Ceiling-a.TruePeak))
		plan.Reason = plan.words(p)
	}
	return plan, nil
}

// wish is what a profile asks of the file.
func wish(p profile.Profile) media.Wish {
	d := p.Delivered
	w := media.Wish{
		BitRate: 1000 * d.BitRate, Bits: d.Bits, Plain: d.Dither == profile.NoDither, Shaped: d.Dither == profile.Shaped,
		InPlace: d.Film == profile.ReplaceTrack, Stereo: d.Downmix == profile.StereoMix, Title: media.LevelledTitle(p.Name),
	}
	if d.Format != profile.OwnFormat {
		w.Format = string(d.Format)
	}
	return w
}

// compression is a profile's compressor for a recording whose anchor has a loudness after the ride. The threshold goes by
// that, not by the target: a gain that makes up for what is taken off would otherwise have more taken off.
func compression(p profile.Profile, a *Analysis, anchored audio.LUFS) *dynamics.Compression {
	c := &dynamics.Compression{Threshold: audio.DB(anchored) + p.Compressor.Over, Ratio: p.Compressor.Ratio, Knee: p.Compressor.Knee,
		Release: p.Compressor.Release / 1000}
	if a.Channels == 1 && p.Mono == audio.TwoLoudspeakers {
		c.Threshold -= 3.01 // the compressor counts a channel once
	}
	c.Threshold = stored(c.Threshold)
	return c
}

// stored is a figure as it is kept in a stored plan, so that one renders the same bytes again.
func stored(g audio.DB) audio.DB { return audio.DB(math.Round(float64(g)*1e4) / 1e4) }

// hasLoudness returns an error, in words, for a recording that has none.
func hasLoudness(a *Analysis) error {
	switch {
	case audio.Defined(a.Integrated):
		return nil
	case !audio.Defined(a.SamplePeak):
		return errors.New("nothing to level: the recording is silent")
	case a.Duration < 0.4:
		return fmt.Errorf("nothing to level: %.2f s is too short, loudness needs at least 0.4 s", a.Duration)
	default:
		return errors.New("nothing to level: nothing in it is louder than −70 LUFS")
	}
}

// anchorOf returns what a profile brings to the target in a recording, and its loudness: speech only if
// there is enough of it.
func anchorOf(p profile.Profile, a *Analysis) (profile.Anchor, audio.LUFS) {
	if p.Anchor == profile.Speech && audio.Defined(a.SpeechLoudness) {
		return profile.Speech, a.SpeechLoudness
	}
	return profile.Programme, a.Integrated
}

// leave makes a plan to leave the recording as it is.
func (plan *Plan) leave(reason string) {
	plan.Untouched, plan.Reason = true, reason
	plan.Ride, plan.Compressor, plan.Gain = nil, nil, 0
}

// still reports whether nothing moves but the ceiling.
func (plan Plan) still() bool { return plan.Ride == nil && plan.Compressor == nil }

var speeds = map[profile.Speed]ride.Speed{profile.Slow: ride.Slow, profile.Medium: ride.Medium, profile.Fast: ride.Fast}

// speedOf is a profile's speed, without time constants that are faster than it allows.
func speedOf(r profile.Ride) ride.Speed {
	return slices.DeleteFunc(slices.Clone(speeds[r.Speed]), func(tau float64) bool { return tau < float64(r.Fastest) })
}

// keep is the least share of a difference that stays.
var keep = map[profile.Strength]float64{profile.Evening: 0, profile.Gentle: 0.3}

// rideOf solves the ride of a recording; nil if it is even enough already. wider is by how much its loudness range stays
// wider than the profile's, fades apart. moved is what compressor and ceiling did after an earlier ride.
func rideOf(p profile.Profile, a *Analysis, anchor profile.Anchor, moved []float32) (out *Ride, wider audio.LU) {
	r := ride.Solve(ride.Course{Level: a.Timeline.Level, Speech: a.Timeline.Speech, Moved: moved}, ride.Settings{
		Speed: speedOf(p.Ride), Speech: anchor == profile.Speech, Range: float64(p.Ride.Range),
		Deadband: float64(p.Ride.Deadband), Keep: keep[p.Ride.Strength], Lift: float64(p.Ride.Lift), Cut: float64(p.Ride.Cut),
		Step: p.Ride.Step, Silence: float64(p.Ride.Silence), Fades: p.Ride.Fades == profile.RideFades,
		// A slow ride only narrows; the others bring voices together, if nothing is to be kept of what lies between them.
		Even: p.Ride.Speed != profile.Slow && p.Ride.Strength == profile.Evening,
	})
	if r.Idle() {
		return nil, audio.LU(r.Over)
	}
	out = &Ride{Speed: p.Ride.Speed, Kept: audio.Ratio(r.Kept), Range: audio.LU(r.Range), Gain: r.Gain,
		FloorLift: audio.DB(r.FloorLift), FloorAt: audio.Seconds(r.FloorAt)}
	out.Least, out.Most = audio.DB(math.Inf(1)), audio.DB(math.Inf(-1))
	for i, on := range r.Active {
		if g := audio.DB(r.Gain[i]); on {
			out.Least, out.Most = min(out.Least, g), max(out.Most, g)
		}
	}
	return out, audio.LU(r.Over)
}

func abs[F ~float64](v F) F {
	if v < 0 {
		return -v
	}
	return v
}
