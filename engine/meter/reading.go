package meter

import "evenshelf/engine/audio"

// Reading is one complete set of measurements of a programme. Field names in JSON are the API's.
// A figure that is not defined is non-finite here and null in JSON.
type Reading struct {
	SampleRate int     `json:"sample_rate_hz"`
	Channels   int     `json:"channels"`
	Frames     int64   `json:"frames"`
	Duration   float64 `json:"duration_s"`

	Integrated   audio.LUFS `json:"integrated_lufs"`     // BS.1770, both gates
	Range        audio.LU   `json:"loudness_range_lu"`   // EBU Tech 3342
	MaxMomentary audio.LUFS `json:"max_momentary_lufs"`  // full 400 ms windows, hop 10 ms
	MaxShortTerm audio.LUFS `json:"max_short_term_lufs"` // full 3 s windows, hop 10 ms
	ShortTerm10  audio.LUFS `json:"short_term_p10_lufs"` // percentiles of the short-term values above
	ShortTerm50  audio.LUFS `json:"short_term_p50_lufs"` // −70 LUFS; programmes under 3 s use the
	ShortTerm95  audio.LUFS `json:"short_term_p95_lufs"` // integrated value for all three
	TruePeak     audio.DBTP `json:"true_peak_dbtp"`      // BS.1770 Annex 2, ≥ 192 kHz
	SamplePeak   audio.DBFS `json:"sample_peak_dbfs"`
	PLR          audio.LU   `json:"plr_lu"` // true peak − integrated
}

// Timeline is the programme's course on a 100 ms grid: value i describes the window that ends at
// (i+1)·Step seconds. Silence is −Inf. All slices have the same length; a last step the programme does
// not fill ends in silence.
type Timeline struct {
	Step      float64   // seconds, 0.1
	Momentary []float32 // LUFS, 400 ms window (shorter at the start)
	ShortTerm []float32 // LUFS, 3 s window (shorter at the start)
	Peak      []float32 // dBFS, largest sample of the 100 ms
}
