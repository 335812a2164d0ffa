package level

import (
	"fmt"
	"strings"

	"evenshelf/engine/audio"
	"evenshelf/engine/faults"
	"evenshelf/engine/profile"
	"evenshelf/engine/speech"
)

const (
	// audibleFloor is the loudness, LUFS, under which nobody hears the noise in a pause of a levelled copy.
	audibleFloor = -60
	// drifted is the difference of length, s, past which something is wrong: a lossy encoder pads less.
	drifted = 0.05
	// rangeLeast is how long, s, a recording must be for its loudness range to be held against it. It is not what it
	// should be under a minute (EBU R 128, note 2), but it is what the ride went by.
	rangeLeast = 20.0
)

// judge compares a rendering with what the profile asks. What is doubtful is held for a person; the reason says
// what to listen for, and the doubts say where.
func judge(p profile.Profile, before *Analysis, plan Plan, r rendering) Verdict {
	d := doubts{p: p, before: before, plan: plan, r: r}
	d.source()
	d.outcome()
	if !plan.Untouched {
		d.lifting()
		d.limiting(treatmentOf(before, r))
		d.order(treatmentOf(before, r).Order)
		d.rangeOf()
	}
	short := plan.Aim.Sub(r.anchored)
	switch {
	case len(d.found) > 0:
		words := make([]string, len(d.found))
		for i, f := range d.found {
			words[i] = f.Words
		}
		return Verdict{State: Held, Reason: strings.Join(words, "; "), Doubts: d.found}
	case abs(short) > p.Tolerance:
		return Verdict{State: Done, Reason: fmt.Sprintf("%.1f LU short of the target: the peaks allow no more without dynamics", short)}
	case plan.Untouched:
		return Verdict{State: Done, Reason: plan.Reason}
	default:
		return Verdict{State: Done}
	}
}

// doubts gathers what is doubtful about a rendering.
type doubts struct {
	p      profile.Profile
	before *Analysis
	plan   Plan
	r      rendering
	found  []Doubt
}

func (d *doubts) add(code string, at *audio.Seconds, format string, args ...any) {
	words := fmt.Sprintf(format, args...)
	if at != nil {
		words += ": listen at " + audio.Clock(float64(*at))
	}
	d.found = append(d.found, Doubt{Code: code, Words: words, At: at})
}

// source is about the recording itself.
func (d *doubts) source() {
	for _, f := range d.before.Faults {
		if f.Severity == faults.Note {
			continue
		}
		doubt := Doubt{Code: f.Code, Words: f.Words} // which say where, if anywhere
		if !f.Throughout(d.before.Duration) && f.At > 0 {
			doubt.At = new(audio.Seconds(f.At))
		}
		d.found = append(d.found, doubt)
	}
	if d.plan.Anchor == profile.Speech {
		d.speech()
	}
}

// speech is about an anchor that may not be what it is taken for.
func (d *doubts) speech() {
	n, sum, first := 0, 0.0, 0
	for i, likely := range d.before.Timeline.Speech {
		if likely >= speech.Likely {
			if n == 0 {
				first = i
			}
			n, sum = n+1, sum+float64(likely)
		}
	}
	share := audio.Ratio(d.before.SpeechTime / d.before.ActiveTime)
	differs := abs(d.r.anchored.Sub(d.r.Integrated)) > d.p.Tolerance
	switch {
	case share < d.p.Harm.SpeechShare:
		d.add("speech", new(seconds(first)), "only %s %% of what is heard seems to be speech, and the level was set by that", d.before.Share())
	case differs && audio.Ratio(sum/float64(n)) < d.p.Harm.SpeechLikelihood:
		d.add("speech", new(seconds(first)), "it is not certain that what the level was set by is speech")
	}
}

// outcome is about the figures everybody reads: length, peak, loudness.
func (d *doubts) outcome() {
	p, r := d.p, d.r
	if drift := abs(r.Duration - d.before.Duration); drift > drifted {
		d.add("length", nil, "the copy is %.2f s shorter or longer than the original", drift)
	}
	if over := audio.DB(r.TruePeak - p.Ceiling); over > peakTolerance {
		d.add("ceiling", nil, "its true peak is %.2f dB over the ceiling of %s dBTP", over, audio.Number(float64(p.Ceiling), 1))
	}
	short := d.plan.Aim.Sub(r.anchored)
	// Without dynamics the peaks decide how far the gain goes; that is what such a profile asks for.
	asFarAsPeaksAllow := p.Limiter.Most == 0 && short > 0 && r.TruePeak > p.Ceiling-0.2
	if abs(short) <= p.Tolerance || asFarAsPeaksAllow {
		return
	}
	var at *audio.Seconds
	why := "its level moves too much"
	if depth, step := deepest(r.work.Limited); depth > p.Limiter.Most-0.5 {
		at, why = new(seconds(step)), fmt.Sprintf("its peaks may be held by no more than %s dB", audio.Number(float64(p.Limiter.Most), 1))
	}
	d.add("target", at, "%s LUFS could not be reached, it came out at %s LUFS: %s", audio.Number(float64(d.plan.Aim), 1),
		audio.Number(float64(r.anchored), 1), why)
}

// lifting is about noise that is lifted with the sound, or in the pauses.
func (d *doubts) lifting() {
	most, at := d.plan.Gain, (*audio.Seconds)(nil)
	if ride := d.plan.Ride; ride != nil {
		most += ride.Most
		for i, on := range d.before.Timeline.Active {
			if on && audio.DB(ride.Gain[i]) >= ride.Most-0.01 {
				at = new(seconds(i))
				break
			}
		}
	}
	if most > d.p.Harm.Lift {
		d.add("lifted", at, "it had to be lifted by %.1f dB, so its noise is louder too", most)
	}
	if ride := d.plan.Ride; ride != nil && ride.FloorLift > d.p.Harm.Floor {
		step := int(ride.FloorAt * audio.StepsPerSecond)
		if step < len(d.r.timeline.Level) && d.r.timeline.Level[step] > audibleFloor {
			d.add("floor", new(ride.FloorAt), "the noise in a pause is lifted %.1f dB over that beside it", ride.FloorLift)
		}
	}
}

// limiting is about a ceiling that works too hard.
func (d *doubts) limiting(t *Treatment) {
	for _, l := range []struct {
		db          int
		share, most audio.Ratio
	}{{6, t.Limited6, d.p.Harm.Over6}, {3, t.Limited3, d.p.Harm.Over3}, {1, t.Limited1, d.p.Harm.Over1}} {
		if l.share > l.most {
			d.add("limiting", new(t.DeepestAt), "its peaks are held by more than %d dB in %s %% of the time", l.db, audio.Number(100*float64(l.share), 0))
			return
		}
	}
}

func (d *doubts) order(order audio.Ratio) {
	if order < d.p.Harm.Order { // not so if undefined
		d.add("order", nil, "what was loud and what was soft have changed places too often (rank correlation %s)", audio.Number(float64(order), 2))
	}
}

// rangeOf is about the loudness range against the profile's.
func (d *doubts) rangeOf() {
	if d.p.Ride.Speed == profile.Still || d.before.Duration < rangeLeast {
		return
	}
	before, after, asked := d.before.Range, d.r.Range, d.p.Ride.Range
	switch {
	case after > asked+d.p.Harm.RangeOver && before > asked:
		d.add("range", nil, "its loudness range is still %s LU, %s were asked for", audio.Number(float64(after), 1), audio.Number(float64(asked), 0))
	case after < min(before, asked)-d.p.Harm.RangeLost:
		d.add("range", nil, "its loudness range went down to %s LU, %s were asked for", audio.Number(float64(after), 1), audio.Number(float64(asked), 0))
	}
}
