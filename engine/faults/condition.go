package faults

import "evenshelf/engine/audio"

// Condition is the state of a recording's signal in figures, whether there is anything wrong with it or
// not. Field names in JSON are the API's. What is not defined is audio.Undefined here and null in JSON.
type Condition struct {
	HeadSilence audio.Seconds `json:"head_silence_s"` // before the first sample above −70 dBFS
	TailSilence audio.Seconds `json:"tail_silence_s"` // after the last one
	Correlation audio.Ratio   `json:"correlation"`    // of left and right, −1 … 1; undefined without such a pair
	Balance     audio.DB      `json:"balance_db"`     // rms of right over left; undefined without such a pair
	Offset      audio.Ratio   `json:"dc_offset"`      // mean of the channel furthest from 0, silence included, of full scale
}

// Unmeasured returns a Condition in which no figure is known.
func Unmeasured() Condition {
	none := audio.Undefined
	return Condition{audio.Seconds(none), audio.Seconds(none), audio.Ratio(none), audio.DB(none), audio.Ratio(none)}
}
