package meter

import "evenshelf/engine/audio"

// Reading is one complete set of measurements of a programme. Field names in JSON are the API's.
// A figure that is not defined is non-finite here and null in JSON.
//
// MinPSR is the least ratio of true peak to short-term loudness: over all full 3 s windows, every 100 ms,
// that are above −70 LUFS, the least of the window's true peak less its loudness. Heavy limiting shows in
// it. It reads at most 0.001 LU too high. It needs no gate relative to the programme: the ratio of a quiet
// passage is that of the same passage louder.
//
// NoiseFloor is the 5th percentile of the loudness of full 400 ms windows, every 100 ms, without those that
// hold digital silence: 100 ms without a sample above −120 dBFS.
type Reading struct {
	SampleRate int     `json:"sample_rate_hz"`
	Channels   int     `json:"channels"`
	Layout     string  `json:"layout"` // as people name it: "mono", "stereo", "5.1"
	Frames     int64   `json:"frames"`
	Duration   float64 `json:"duration_s"`

	Integrated   audio.LUFS `json:"integrated_lufs"`     // BS.1770, both gates
	Range        audio.LU   `json:"loudness_range_lu"`   // EBU Tech 3342; its silence after the end makes a few seconds read high
	MaxMomentary audio.LUFS `json:"max_momentary_lufs"`  // full 400 ms windows, hop 10 ms
	MaxShortTerm audio.LUFS `json:"max_short_term_lufs"` // full 3 s windows, hop 10 ms
	ShortTerm10  audio.LUFS `json:"short_term_p10_lufs"` // percentiles of the short-term values above
	ShortTerm50  audio.LUFS `json:"short_term_p50_lufs"` // −70 LUFS; programmes under 3 s use the
	ShortTerm95  audio.LUFS `json:"short_term_p95_lufs"` // integrated value for all three
	TruePeak     audio.DBTP `json:"true_peak_dbtp"`      // BS.1770 Annex 2, ≥ 192 kHz
	SamplePeak   audio.DBFS `json:"sample_peak_dbfs"`
	PLR          audio.LU   `json:"plr_lu"`           // true peak − integrated
	MinPSR       audio.LU   `json:"min_psr_lu"`       // see below
	RMS          audio.DBFS `json:"rms_dbfs"`         // of all channels together, LFE too; a full-scale sine reads 0 (AES17)
	CrestFactor  audio.DB   `json:"crest_factor_db"`  // sample peak over rms; 3.01 for a sine
	NoiseFloor   audio.LUFS `json:"noise_floor_lufs"` // see below

	MonoRule audio.MonoRule `json:"mono_rule"` // how a single channel was counted
}

// Unmeasured returns a Reading in which no figure is known.
func Unmeasured() Reading {
	none := audio.Undefined
	return Reading{
		Integrated: audio.LUFS(none), Range: audio.LU(none),
		MaxMomentary: audio.LUFS(none), MaxShortTerm: audio.LUFS(none),
		ShortTerm10: audio.LUFS(none), ShortTerm50: audio.LUFS(none), ShortTerm95: audio.LUFS(none),
		TruePeak: audio.DBTP(none), SamplePeak: audio.DBFS(none),
		PLR: audio.LU(none), MinPSR: audio.LU(none),
		RMS: audio.DBFS(none), CrestFactor: audio.DB(none), NoiseFloor: audio.LUFS(none),
	}
}

// Timeline is the programme's course on a 100 ms grid: value i describes the window that ends at
// (i+1)·Step seconds. Silence is −Inf. All slices have the same length; a last step the programme does
// not fill ends in silence.
type Timeline struct {
	Step      float64   // seconds, 0.1
	Level     []float32 // LUFS, the 100 ms alone
	Momentary []float32 // LUFS, 400 ms window (shorter at the start)
	ShortTerm []float32 // LUFS, 3 s window (shorter at the start)
	Peak      []float32 // dBFS, largest sample of the 100 ms
}

// Loudness returns the loudness of the mean power of those full 400 ms windows that end with one of the steps
// [from, to) and are above −70 LUFS, and how many they are; undefined if there is none.
func (t Timeline) Loudness(from, to int) (l audio.LUFS, windows int) {
	var powers []float64
	for i := max(from, momentarySteps-1); i < min(to, len(t.Momentary)); i++ {
		powers = append(powers, power(float64(t.Momentary[i])))
	}
	mean, n := meanAbove(powers, power(absoluteGate))
	if n == 0 {
		return audio.LUFS(audio.Undefined), 0
	}
	return audio.LUFS(loudness(mean)), n
}

// Integrated returns the integrated loudness, with both gates, of those full 400 ms windows that keep chooses by the
// step they end with; undefined if nothing is above −70 LUFS.
func (t Timeline) Integrated(keep func(step int) bool) audio.LUFS {
	var powers []float64
	for i := momentarySteps - 1; i < len(t.Momentary); i++ {
		if keep(i) {
			powers = append(powers, power(float64(t.Momentary[i])))
		}
	}
	return integrated(powers)
}
