package web

import (
	"fmt"
	"strings"

	"evenshelf/engine/audio"
	"evenshelf/engine/level"
	"evenshelf/engine/profile"
	"evenshelf/store"
)

// deed is one part of what was done to a recording, in words.
type deed struct {
	Label, Words string
	At           *float64 // s, the moment to listen to; nil if it is the whole
}

// Deeds tells what was done to the delivered sound, part by part, in the order it was done; nil if nothing was.
func (p recordingPage) Deeds() []deed {
	if p.Levelled == nil || p.Levelled.Plan == nil || p.Levelled.Plan.Untouched {
		return nil
	}
	plan, treated := p.Levelled.Plan, p.Levelled.Treatment
	var all []deed
	add := func(label, words string, at *float64) {
		if words != "" {
			all = append(all, deed{label, words, at})
		}
	}
	add("Loudness", loudnessWords(p.Levelled, p.Target), nil)
	add("Range", rangeWords(p.Levelled), nil)
	add("Gain", gainWords(plan), nil)
	if r := plan.Ride; r != nil && r.FloorLift > 0.05 {
		add("Pauses", fmt.Sprintf("lifted at the most %s dB over the lower of the gains beside them", audio.Number(float64(r.FloorLift), 1)), known(r.FloorAt))
	}
	if c := plan.Compressor; c != nil { // whose threshold is a level before the steady gain
		add("Compressor", tookWords(treated)+fmt.Sprintf("from %s LUFS on, %s:1, with a soft knee of %s dB and a release of %s ms", audio.Number(float64(c.Threshold+plan.Gain), 1),
			short(c.Ratio), short(float64(c.Knee)), short(1000*c.Release)), nil)
	}
	words, at := limiterWords(plan, treated)
	add("Peaks", words, at)
	// A ride that evens speech is asked to take the order away.
	if evens := plan.Ride != nil && plan.Anchor == profile.Speech; treated != nil && audio.Defined(treated.Order) && !evens {
		add("Order", fmt.Sprintf("the order of loud and soft: %s (1: as it was, 0: none left)", audio.Number(float64(treated.Order), 2)), nil)
	}
	add("Foreseen", p.foreseenWords(), nil)
	add("Written", p.writtenWords(), nil)
	return all
}

func loudnessWords(j *store.Job, target *float64) string {
	plan := j.Plan
	c, known := changeOf(j)
	if !known {
		return ""
	}
	s := "the whole programme"
	if c.Speech {
		s = "what people say"
	}
	s += fmt.Sprintf(" came from %s to %s LUFS: %s LU", audio.Number(c.From, 1), audio.Number(c.To, 1), signed(c.By()))
	if audio.Defined(plan.Aim) {
		s += fmt.Sprintf("; %s was aimed at", audio.Number(float64(plan.Aim), 1))
		if target != nil && !near(float64(plan.Aim), *target) {
			s += ": its gain is that of the whole folder, so that the balance within it stays"
		}
	}
	return s
}

// near says whether two levels read alike.
func near(a, b float64) bool { return audio.Number(a-b, 1) == audio.Number(0, 1) }

func gainWords(plan *level.Plan) string {
	least, most, moves := gainEnds(plan)
	if !moves {
		return fmt.Sprintf("%s dB throughout", least)
	}
	r := plan.Ride
	return fmt.Sprintf("rides between %s and %s dB where something is heard, %s; %s dB of it are steady", least, most, speedWords(r.Speed), signed(float64(plan.Gain)))
}

// gainSays is the gain of a plan within a sentence.
func gainSays(plan *level.Plan) string {
	least, most, moves := gainEnds(plan)
	if !moves {
		return fmt.Sprintf("a steady gain of %s dB", least)
	}
	return fmt.Sprintf("a ride between %s and %s dB", least, most)
}

// rangeWords tells what became of the loudness range where something was to change it.
func rangeWords(j *store.Job) string {
	if j.Plan.Ride == nil && j.Plan.Compressor == nil || j.Before == nil || j.After == nil || j.Before.Range == nil || j.After.Range == nil {
		return ""
	}
	if near(*j.Before.Range, *j.After.Range) {
		return fmt.Sprintf("the loudness range stayed at %s LU", audio.Number(*j.After.Range, 1))
	}
	return fmt.Sprintf("a loudness range of %s LU became %s LU", audio.Number(*j.Before.Range, 1), audio.Number(*j.After.Range, 1))
}

// tookWords tells what the compressor took off; "" where that was not noted.
func tookWords(t *level.Treatment) string {
	switch {
	case t == nil || !audio.Defined(t.Compressed):
		return ""
	case t.Compressed < 0.05:
		return "took less than 0.1 dB off on average: "
	}
	return fmt.Sprintf("took %s dB off on average: ", audio.Number(float64(t.Compressed), 1))
}

func speedWords(s profile.Speed) string {
	switch s {
	case profile.Slow:
		return "slowly"
	case profile.Fast:
		return "fast"
	}
	return "at a " + string(s) + " speed"
}

// gainEnds are the least and the most that the level is changed by where something is heard, steady gain included;
// they are one if it does not move.
func gainEnds(plan *level.Plan) (least, most string, moves bool) {
	steady := signed(float64(plan.Gain))
	if r := plan.Ride; r != nil && audio.Defined(r.Least) && audio.Defined(r.Most) {
		return signed(float64(plan.Gain + r.Least)), signed(float64(plan.Gain + r.Most)), true
	}
	return steady, steady, false
}

func limiterWords(plan *level.Plan, t *level.Treatment) (words string, at *float64) {
	ceiling := audio.Number(float64(plan.Ceiling), 1)
	if !plan.Limit && plan.Compressor != nil {
		return fmt.Sprintf("under %s dBTP after the compressor, with no limiting", ceiling), nil
	}
	if !plan.Limit {
		return fmt.Sprintf("stay under %s dBTP by themselves", ceiling), nil
	}
	words = fmt.Sprintf("held under %s dBTP", ceiling)
	if t == nil {
		return words, nil
	}
	var shares []string
	for i, s := range []audio.Ratio{t.Limited1, t.Limited3, t.Limited6} {
		if audio.Defined(s) && s > 0 {
			shares = append(shares, fmt.Sprintf("more than %d dB for %s %%", []int{1, 3, 6}[i], share(s)))
		}
	}
	if len(shares) > 0 {
		words += ": " + strings.Join(shares, ", ") + " of what is heard"
	}
	if t.Deepest > 0.05 {
		words += fmt.Sprintf("; %s dB at the most", audio.Number(float64(t.Deepest), 1))
		at = known(t.DeepestAt)
	}
	return words, at
}

// foreseenWords tells what the plan as first made was to come to where something else came out, as an encoder moves the
// sound; "" where that cannot be seen.
func (p recordingPage) foreseenWords() string {
	f, a := p.Levelled.Foreseen, p.Levelled.After
	if f == nil || a == nil || f.Integrated == nil || a.Integrated == nil || f.TruePeak == nil || a.TruePeak == nil ||
		near(*f.Integrated, *a.Integrated) && near(*f.TruePeak, *a.TruePeak) {
		return ""
	}
	return fmt.Sprintf("%s LUFS and %s dBTP before it was encoded; %s and %s came out", audio.Number(*f.Integrated, 1), audio.Number(*f.TruePeak, 1),
		audio.Number(*a.Integrated, 1), audio.Number(*a.TruePeak, 1))
}

// share is a part of 1 in percent; a little is said to be little, not none.
func share(r audio.Ratio) string {
	percent := 100 * float64(r)
	switch {
	case percent > 0 && percent < 0.1:
		return "under 0.1"
	case percent < 10:
		return short(percent)
	}
	return audio.Number(percent, 0)
}

// short writes a figure to one decimal, or to none if that says as much.
func short(v float64) string { return strings.TrimSuffix(audio.Number(v, 1), ".0") }

// listen is a button that plays a moment of the delivered sound, or says that the whole is meant.
type listen struct {
	At    float64
	Whole bool
}

func newListen(at any) listen {
	s, ok := value(at)
	if !ok {
		return listen{Whole: true}
	}
	return listen{At: s}
}

// doubtWords are the words of a doubt without its moment at their end, which is shown beside them.
func doubtWords(d level.Doubt) string {
	if d.At == nil {
		return d.Words
	}
	return strings.TrimSuffix(d.Words, ": listen at "+audio.Clock(float64(*d.At)))
}

// doubtful is the first doubt about a recording, for a list: the moment to listen to, its page opened there, and
// how many there are besides.
type doubtful struct {
	level.Doubt
	Page string // opened at the moment
	All  string // opened where they are listed
	More int
}

func newDoubtful(recordingID int64, doubts []level.Doubt) *doubtful {
	if len(doubts) == 0 {
		return nil
	}
	page := fmt.Sprintf("/recordings/%d", recordingID)
	d := &doubtful{Doubt: doubts[0], Page: page, All: page, More: len(doubts) - 1}
	if s, ok := value(d.At); ok {
		d.Page += fmt.Sprintf("#at=%.1f", s)
	}
	return d
}

// levelledBy returns the job that made what the after reading is of; nil if there is none.
func levelledBy(after *store.Reading, jobs []store.Job) *store.Job {
	for i := range jobs {
		if after != nil && jobs[i].ID == after.JobID {
			return &jobs[i]
		}
	}
	return nil
}
