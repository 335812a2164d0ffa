package dynamics

// Timings for three kinds of sound, which leave tones clean down to 56, 25 and 17 Hz.
var (
	ForSpeech  = Timing{LookAhead: 0.002, Hold: 0.005, Release: 0.030}
	ForMusic   = Timing{LookAhead: 0.005, Hold: 0.010, Release: 0.120}
	ForConcert = Timing{LookAhead: 0.005, Hold: 0.020, Release: 0.120}
)
