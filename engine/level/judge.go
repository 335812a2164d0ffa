package level

import (
	"fmt"
	"math"
	"slices"
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
// what to listen for, and the doubts say where. done is what it did to the sound; nil if nothing.
func judge(p profile.Profile, before *Analysis, plan Plan, r rendering, done *Treatment) Verdict {
	d := doubts{p: p, before: before, plan: plan, r: r}
	d.source()
	d.outcome()
	if done != nil {
		d.lifting()
		d.limiting(done)
		d.order(done)
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
	case abs(short) > p.Tolerance && plan.Untouched:
		return Verdict{State: Done, Reason: fmt.Sprintf("%.1f LU short of the target: %s", short, plan.Reason)}
	case abs(short) > p.Tolerance:
		return Verdict{State: Done, Reason: fmt.Sprintf("%.1f LU short of the target: the peaks allow no more without dynamics", short) +
			leftOver(audio.DB(p.Ceiling-r.TruePeak), "are the encoder's doing")}
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
		d.add("ceiling", momentOf(r.timeline.Peak, 1, nil), "its true peak is %.2f dB over the ceiling of %s dBTP%s", over, audio.Number(float64(p.Ceiling), 1), r.encoders())
	}
	short := d.plan.Aim.Sub(r.anchored)
	// Without dynamics the peaks decide how far the gain goes; that is what such a profile asks for.
	asFarAsPeaksAllow := p.Limiter.Most == 0 && short > 0 && (d.plan.Untouched || d.plan.Gain >= audio.DB(d.plan.Ceiling-d.before.TruePeak)-leastGain)
	if abs(short) <= p.Tolerance || asFarAsPeaksAllow {
		return
	}
	at, why := momentOf(r.timeline.ShortTerm, shortTerm, nil), "its level moves too much"
	if depth, step := deepest(r.work.Limited); depth > 0 {
		at, why = new(seconds(step)), fmt.Sprintf("its peaks stand out too far, and may be held by no more than %s dB", audio.Number(float64(p.Limiter.Most), 1))
	}
	if r.copies == mostRenders {
		at, why = nil, "the encoder moves it"
	}
	d.add("target", at, "%s LUFS could not be reached, it came out at %s LUFS: %s", audio.Number(float64(d.plan.Aim), 1),
		audio.Number(float64(r.anchored), 1), why)
}

// encoders says that a peak is the encoder's doing, where that has been tried often enough; else "".
func (r rendering) encoders() string {
	if r.copies < mostRenders {
		return ""
	}
	return fmt.Sprintf(": the encoder raised it in each of %d copies, however much was taken off before", r.copies)
}

// lifting is about noise that is lifted with the sound, or in the pauses.
func (d *doubts) lifting() {
	most := d.plan.Gain
	if d.plan.Ride != nil {
		most += d.plan.Ride.Most
	}
	if most > d.p.Harm.Lift {
		d.add("lifted", d.mostLifted(), "it had to be lifted by %.1f dB, so its noise is louder too", most)
	}
	if ride := d.plan.Ride; ride != nil && ride.FloorLift > d.p.Harm.Floor {
		step := int(ride.FloorAt * audio.StepsPerSecond)
		if step < len(d.r.timeline.Level) && d.r.timeline.Level[step] > audibleFloor {
			d.add("floor", new(ride.FloorAt), "the noise in a pause is lifted %.1f dB over that beside it", ride.FloorLift)
		}
	}
}

// mostLifted is where the gain is highest of what is heard, or if it is steady, where the softest passage is.
func (d *doubts) mostLifted() *audio.Seconds {
	active := d.before.Timeline.Active
	if d.plan.Ride != nil {
		return momentOf(heardOnly(d.plan.Ride.Gain, active), 1, nil)
	}
	return momentOf(heardOnly(d.before.Timeline.ShortTerm, active), shortTerm, func(v float32) float64 { return -float64(v) })
}

// limiting is about a ceiling that works too hard.
func (d *doubts) limiting(t *Treatment) {
	for _, l := range []struct {
		db          int
		share, most audio.Ratio
	}{{6, t.Limited6, d.p.Harm.Over6}, {3, t.Limited3, d.p.Harm.Over3}, {1, t.Limited1, d.p.Harm.Over1}} {
		if l.share > l.most {
			d.add("limiting", new(t.DeepestAt), "its peaks are held by more than %d dB in %s %% of the time", l.db, percent(l.share))
			return
		}
	}
}

func (d *doubts) order(t *Treatment) {
	if t.Order < d.p.Harm.Order { // not so if undefined
		d.add("order", new(t.OrderAt), "what was loud and what was soft have changed places too often (rank correlation %s)", audio.Number(float64(t.Order), 2))
	}
}

// rangeOf is about the loudness range against the profile's. Fades make it wider, as they are meant to: it counts only
// what is wide without them.
func (d *doubts) rangeOf() {
	if d.p.Ride.Speed == profile.Still || d.before.Duration < rangeLeast {
		return
	}
	before, after, asked := d.before.Range, d.r.Range, d.p.Ride.Range
	switch {
	case d.plan.Wider > d.p.Harm.RangeOver && after > asked+d.p.Harm.RangeOver && before > asked:
		off := func(v float32) float64 { return math.Abs(float64(v) - float64(d.r.Integrated)) }
		d.add("range", momentOf(heardOnly(d.r.timeline.ShortTerm, d.before.Timeline.Active), shortTerm, off), "its loudness range is still %s LU, %s were asked for", audio.Number(float64(after), 1), audio.Number(float64(asked), 0))
	case after < min(before, asked)-d.p.Harm.RangeLost:
		var gain []float32
		if d.plan.Ride != nil {
			gain = d.plan.Ride.Gain
		}
		moved := func(v float32) float64 { return math.Abs(float64(v)) }
		d.add("range", momentOf(gain, 1, moved), "its loudness range went down to %s LU, %s were asked for", audio.Number(float64(after), 1), audio.Number(float64(asked), 0))
	}
}

// momentOf is the moment at which a curve is highest, by a measure if there is one: the begin of the window of so many
// steps that a value describes. It is nil if there are no values that count.
func momentOf(curve []float32, window int, measure func(float32) float64) *audio.Seconds {
	highest, at := math.Inf(-1), -1
	for i, v := range curve {
		m := float64(v)
		if measure != nil {
			m = measure(v)
		}
		if m > highest && !math.IsInf(m, 1) { // nor is what is undefined
			highest, at = m, i
		}
	}
	if at < 0 {
		return nil
	}
	return new(seconds(max(0, at+1-window)))
}

// heardOnly is a curve without what is not heard, which becomes undefined.
func heardOnly(curve []float32, active []bool) []float32 {
	heard := slices.Clone(curve)
	for i := range heard {
		if i < len(active) && !active[i] {
			heard[i] = float32(audio.Undefined)
		}
	}
	return heard
}
