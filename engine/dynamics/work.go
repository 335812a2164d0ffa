package dynamics

// Work is what was taken off a recording, dB, 0 or more, step by step of a tenth of a second.
type Work struct {
	Mean    []float32 // mean over the step
	Deepest []float32 // the most in the step
}
