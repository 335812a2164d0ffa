// Package ride solves for the slow gain curve of a recording, as a patient engineer would ride a fader who
// has heard the whole of it before.
package ride

// StepsPerSecond is the grid of a Course and of a Curve.
const StepsPerSecond = 10

// Course is a recording as the solver sees it, step by step: value i describes the tenth of a second from
// i/10 to (i+1)/10 s. All slices have one length.
type Course struct {
	Level  []float32 // LUFS: the loudness of the step alone; −Inf is silence
	Speech []float32 // likelihood of speech, 0 … 1
	// Moved is what was done to the level after the ride in an earlier rendering, dB: what the compressor and
	// the limiter took off, 0 or less. nil if there was none. The ride makes up for it, so that what they do
	// does not move voices apart again.
	Moved []float32
}

// Speed of a ride: its time constants in seconds, slowest first. A faster one is taken only if the ones
// before it cannot narrow the programme to the range.
type Speed []float64

// Settings say how to ride.
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
	Fades    bool    // fades at the start and the end are ridden too; else the gain stands still in them
}

// Ride is a solved ride.
type Ride struct {
	Gain   Curve     // dB; one value more than the course has steps
	Level  []float32 // LUFS, the slow level S that was found, one a step
	Active []bool    // programme is heard, one a step
	Anchor float64   // LUFS that the ride brings things towards; NaN if there is none
	Range  float64   // LU, the loudness range predicted for the ridden sound; NaN if undefined
	Kept   float64   // ρ, the share of differences past the deadband that stays
	// FloorLift is the most that a pause's gain lies above that of its quieter neighbour, dB, and FloorAt where, s.
	FloorLift, FloorAt float64
	Fades              []Span // where the gain stands still for a fade
	Steps              []Span // pauses in which the gain steps
}

// Span is a stretch of steps [From, To).
type Span struct{ From, To int }
