// Package ride solves for the slow gain curve of a recording, as a patient engineer would ride a fader who
// has heard the whole of it before.
//
// The way from a Course to a Curve:
//
//	activity   which steps are heard at all; pauses and steady noise are not
//	knocks     what juts out of speech for a moment, and is left to the compressor
//	fades      where the gain has to stand still
//	phrases    what lies between pauses, and where one voice gives way to another of a different level
//	smooth     the slow level: what a fader has to follow
//	anchor     the level everything is brought towards
//	range map  how much of a difference in level stays: as much as the range asked for allows
//	pauses     steps of the gain put into pauses, where nobody hears them, and ahead of jumps in music
//	order      whether loud and soft keep their order, or a faster ride is needed
//
// Levels are in dB re the power whose level is 0 LUFS. Everything is linear in the length of the course, but
// for a sort.
package ride

import (
	"math"
	"slices"
)

// StepsPerSecond is the grid of a Course and of a Curve.
const StepsPerSecond = 10

// Course is a recording as the solver sees it, step by step: value i describes the tenth of a second from
// i/10 to (i+1)/10 s. All slices have one length; what a shorter one lacks is not known.
type Course struct {
	Level  []float32 // LUFS: the loudness of the step alone; −Inf is silence, and NaN is taken for it
	Speech []float32 // likelihood of speech, 0 … 1; nil if nobody has looked: then it is what Settings.Speech says
	// Moved is what was done to the level after the ride in an earlier rendering, dB: what the compressor and
	// the limiter took off, 0 or less, best as a ratio of powers. nil if there was none. The ride makes up for it,
	// so that what they do does not move voices apart again. They answer to that, so each rendering leaves a part:
	// of heavy limiting some two thirds.
	Moved []float32
}

// Speed of a ride: its time constants in seconds, slowest first. A faster one is taken only if the ones before it
// cannot narrow the programme to the range, or lose the order of loud and soft: what is too slow to follow the music
// leaves next to nothing of its differences, and takes a soft part beside a loud one down with it. A faster one keeps
// more of them, and so moves the gain hardly faster.
type Speed []float64

// The speeds.
var (
	Slow   = Speed{20, 12, 8, 5, 3, 2} // music
	Medium = Speed{6, 3}               // films, documentaries, talk
	Fast   = Speed{2}                  // into a transmitter
)

// Settings say how to ride. What is no number or makes no sense is taken for the nearest that does.
//
// With steps, speech is ridden for its own sake: as soon as the programme is wider than its range, or voices stand
// apart, no more of its differences stays than Keep. Then the range only decides how much of those of the rest does.
type Settings struct {
	Speed    Speed
	Speech   bool    // ride what people say, phrase by phrase; else the whole programme
	Range    float64 // LU: a wider loudness range is narrowed to it
	Deadband float64 // dB: what is no further from the anchor stays where it is
	Keep     float64 // 0 … 1: at least this share of a difference past the deadband stays
	Lift     float64 // dB, the most the ride may raise
	Cut      float64 // dB, the most it may lower, given positive
	Step     float64 // dB²·s that a step at a pause has to be worth; 0: no steps
	Silence  float64 // s: a pause as long as this is meant
	Even     bool    // voices that stand apart are brought together however narrow the range is; it takes steps
	Fades    bool    // fades at the start and the end are ridden too; else the gain stands still in them
}

// Ride is a solved ride.
type Ride struct {
	Gain   Curve     // dB, in whole hundredths; one value more than the course has steps
	Level  []float32 // LUFS, the slow level S that was found, one a step; NaN if nothing is heard
	Active []bool    // programme is heard, one a step
	Anchor float64   // LUFS that the ride brings things towards; NaN if there is none
	Range  float64   // LU, the loudness range predicted for the ridden sound; NaN if undefined
	Kept   float64   // ρ, the share of differences past the deadband that stays, on average
	// FloorLift is the most that a pause's gain lies above the lowest of its neighbours, dB, of those whose noise can be
	// heard, and FloorAt the middle of that pause, s.
	FloorLift, FloorAt float64
	Fades              []Span // where the gain stands still for a fade
	Steps              []Span // pauses in which the gain steps

	// Over is by how much what is heard between fades stays wider than the range asked for, LU: with the ride or, if that
	// is idle, as it is. 0 if it does not.
	Over float64

	least float64 // dB that the gain has to reach; 0 if there is no ride
	way   float64 // how much of the way to the range asked for it goes; 1 if voices stood apart
}

// Span is a stretch of steps [From, To).
type Span struct{ From, To int }

// Solve finds the ride of a course. It takes any course: one that is too short or too soft to have a loudness
// range gets a curve of zeros, and an anchor only if it has a loudness. So does one without a speed.
func Solve(c Course, s Settings) Ride {
	s = s.sane()
	j := newJob(c, s)
	n := len(c.Level)
	ride := Ride{Gain: make(Curve, n+1), Level: make([]float32, n), Active: j.active, Anchor: j.loudness, Range: math.NaN(), Kept: 1}
	fill(ride.Level, float32(math.NaN()))
	if math.IsNaN(j.loudness) || !slices.Contains(j.heard, true) {
		return ride
	}
	best := j.solve(s.firstTau())
	for _, tau := range s.Speed[min(1, len(s.Speed)):] {
		if best.good(s.Range) || math.IsNaN(best.lra) {
			break
		}
		if faster := j.solve(tau); faster.better(best, s.Range) {
			best = faster
		}
	}
	ride.Anchor = best.anchor
	for i, l := range best.level {
		ride.Level[i] = float32(l)
	}
	switch {
	case math.IsNaN(best.lra):
	case len(s.Speed) == 0:
		ride.Over = clamp(best.before-s.Range, 0, math.Inf(1))
	default:
		ride.Kept = best.kept
		j.finish(&ride, best)
	}
	return ride
}

// sane returns settings in which every figure can be reckoned with.
func (s Settings) sane() Settings {
	s.Range, s.Deadband, s.Keep = clamp(s.Range, 0, 100), clamp(s.Deadband, 0, 100), clamp(s.Keep, 0, 1)
	s.Lift, s.Cut = clamp(s.Lift, 0, 100), clamp(s.Cut, 0, 100)
	s.Step, s.Silence = clamp(s.Step, 0, 1e6), clamp(s.Silence, 0.3, 1e6)
	s.Speed = slices.Clone(s.Speed)
	for i, tau := range s.Speed {
		s.Speed[i] = clamp(tau, 0.5, 100)
	}
	return s
}

// firstTau is the slowest time constant, s.
func (s Settings) firstTau() float64 {
	if len(s.Speed) == 0 {
		return 20
	}
	return s.Speed[0]
}
