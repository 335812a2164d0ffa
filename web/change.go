package web

import (
	"evenshelf/engine/level"
	"evenshelf/engine/profile"
	"evenshelf/store"
)

// change is what came of the loudness that a plan was made for, LUFS.
type change struct {
	From, To float64
	Speech   bool // it is that of the speech, not of the whole
}

// By is positive where it became louder, LU.
func (c change) By() float64 { return c.To - c.From }

// Says writes it with its sign, and what it is of if that is not the whole.
func (c change) Says() string {
	if c.Speech {
		return "speech " + signed(c.By())
	}
	return signed(c.By())
}

// changeOf reads what came out of the readings before and after: a plan only tells what was meant to. False where one
// of the two is not known.
func changeOf(j *store.Job) (c change, known bool) {
	if j == nil || j.Plan == nil || j.Before == nil || j.After == nil {
		return c, false
	}
	from, to := j.Before.Integrated, j.After.Integrated
	if j.Plan.Anchor == profile.Speech && j.SpeechBefore != nil && j.SpeechAfter != nil {
		from, to, c.Speech = j.SpeechBefore, j.SpeechAfter, true
	}
	if from == nil || to == nil {
		return c, false
	}
	c.From, c.To = *from, *to
	return c, true
}

// plainGain says that the gain of a plan is just what came out, so that there is nothing to tell of it.
func plainGain(plan *level.Plan, c change) bool {
	_, _, moves := gainEnds(plan)
	return !moves && near(float64(plan.Gain), c.By())
}

// outcome is what came of a job's loudness, for a table, and the gain of its plan where that says something else:
// "+4.2", or from the least to the most of a ride.
type outcome struct {
	Change string // "" if it is not known
	Gain   string // "" if there is nothing more to tell
}

func newOutcome(j store.Job) (o outcome) {
	c, known := changeOf(&j)
	if known {
		o.Change = c.Says()
	}
	if least, most, moves := gainEnds(j.Plan); moves {
		o.Gain = least + " … " + most
	} else if !known || !plainGain(j.Plan, c) {
		o.Gain = least
	}
	return o
}
