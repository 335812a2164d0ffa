// Package profile says what a recording should sound like after levelling, and how much may be done to
// it. A profile is a value; changing it makes another version, and every result names the version that
// made it.
package profile

import (
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"fmt"

	"evenshelf/engine/audio"
)

// Profile is one way of levelling. The zero value is not valid; see Validate.
type Profile struct {
	Name      string     `json:"name" toml:"name"`
	Summary   string     `json:"summary" toml:"summary"`           // one sentence for a person who has to choose
	Anchor    Anchor     `json:"anchor" toml:"anchor"`             // what is brought to the target
	Target    audio.LUFS `json:"target_lufs" toml:"target_lufs"`   // loudness of the anchor aimed at
	Tolerance audio.LU   `json:"tolerance_lu" toml:"tolerance_lu"` // how far from it is near enough
	Ceiling   audio.DBTP `json:"ceiling_dbtp" toml:"ceiling_dbtp"` // highest true peak of the delivered file
	// Mono says how the loudness of a recording with one channel is counted.
	Mono audio.MonoRule `json:"mono" toml:"mono"`
	// Within says what becomes of a recording that already is as the profile asks.
	Within Within `json:"within" toml:"within"`
	// Group says which recordings share one gain, so that the balance between them stays.
	Group Group `json:"group" toml:"group"`

	Ride       Ride       `json:"ride" toml:"ride"`
	Compressor Compressor `json:"compressor" toml:"compressor"`
	Limiter    Limiter    `json:"limiter" toml:"limiter"`
	Delivered  Delivered  `json:"delivered" toml:"delivered"`
	Harm       Harm       `json:"harm" toml:"harm"`
}

// Anchor is what is brought to the target.
type Anchor string

// The anchors.
const (
	Programme Anchor = "programme" // all of it: integrated loudness
	Speech    Anchor = "speech"    // where people speak; the whole programme if nobody does
)

// Within is what becomes of a recording that already is as the profile asks.
type Within string

// What can become of it.
const (
	Leave Within = "leave" // its bytes are delivered as they are
	Level Within = "level" // it is levelled all the same
)

// Group is a set of recordings that share one gain.
type Group string

// The groups.
const (
	Alone  Group = "none"   // each recording has a gain of its own
	Folder Group = "folder" // the recordings of one folder are brought to the target as one programme
	Album  Group = "album"  // the same for the recordings whose tags name one album; those without one are alone
)

// Speed of the ride.
type Speed string

// The speeds, with the time constants of the ride in seconds: 20, 6 and 2.
const (
	Still  Speed = "none" // no ride: one steady gain
	Slow   Speed = "slow"
	Medium Speed = "medium"
	Fast   Speed = "fast"
)

// Strength says how much of the differences in level a ride takes away.
type Strength string

// The strengths.
const (
	Evening Strength = "evening" // as much as the range asks, all of it if need be
	Gentle  Strength = "gentle"  // at least 30 % of a difference stays
)

// Fades says what the ride does to a fade at the start or the end.
type Fades string

// What it can do.
const (
	KeepFades Fades = "keep" // the gain stands still
	RideFades Fades = "ride" // it is ridden like everything else
)

// Ride is the slow gain curve. With a speed of none nothing else in it matters.
type Ride struct {
	Speed Speed `json:"speed" toml:"speed"`
	// Fastest is the least time constant, s, that it may come down to where a slower one cannot narrow the range enough.
	Fastest  audio.Seconds `json:"fastest_s" toml:"fastest_s"`
	Strength Strength      `json:"strength" toml:"strength"`
	Range    audio.LU      `json:"range_lu" toml:"range_lu"`       // a wider loudness range is narrowed to it
	Deadband audio.DB      `json:"deadband_db" toml:"deadband_db"` // what is no further from the anchor stays where it is
	Lift     audio.DB      `json:"lift_db" toml:"lift_db"`         // the most it may raise
	Cut      audio.DB      `json:"cut_db" toml:"cut_db"`           // the most it may lower
	// Step is what a step of the gain at a pause has to be worth, dB²·s: of d dB between phrases one is made
	// if it holds for some Step/d² seconds. 0 makes none.
	Step float64 `json:"step_db2s" toml:"step_db2s"`
	// Silence is the length of a pause, s, from which on it is meant: its gain is the lower of those
	// before and after it, and no step of the gain is heard in it.
	Silence audio.Seconds `json:"silence_s" toml:"silence_s"`
	Fades   Fades         `json:"fades" toml:"fades"`
}

// Compressor takes down what the ride is too slow for. A ratio of 1 is none.
type Compressor struct {
	Over    audio.DB `json:"over_db" toml:"over_db"` // its threshold, over the loudness of the ridden sound
	Ratio   float64  `json:"ratio" toml:"ratio"`
	Knee    audio.DB `json:"knee_db" toml:"knee_db"` // width of the soft knee
	Release float64  `json:"release_ms" toml:"release_ms"`
}

// Limiter says how the peaks are kept under the ceiling.
type Limiter struct {
	// Most is the most that may be taken off the loudest moment, dB. At 0 there is no limiting at all: the
	// gain stops where the true peak meets the ceiling.
	Most      audio.DB `json:"most_db" toml:"most_db"`
	LookAhead float64  `json:"look_ahead_ms" toml:"look_ahead_ms"`
	Hold      float64  `json:"hold_ms" toml:"hold_ms"` // long keeps low notes clean, short touches less of the sound
	Release   float64  `json:"release_ms" toml:"release_ms"`
}

// Delivered says how the sound is written.
type Delivered struct {
	Format  Format `json:"format" toml:"format"`
	BitRate int    `json:"bit_rate_kbps" toml:"bit_rate_kbps"` // of a lossy format; 0 is the source's, or the best if it has none
	Bits    int    `json:"bits" toml:"bits"`                   // word length: 16, 24, 32, or 0 for the source's own
	Dither  Dither `json:"dither" toml:"dither"`
	Film    Film   `json:"film" toml:"film"`
	Downmix Mix    `json:"downmix" toml:"downmix"`
}

// Format is what a recording is delivered in.
type Format string

// The formats.
const (
	OwnFormat Format = "source" // that of the source
	WAV       Format = "wav"
	FLAC      Format = "flac"
	MP3       Format = "mp3"
	M4A       Format = "m4a" // AAC
	Vorbis    Format = "ogg" // Vorbis in Ogg
	Opus      Format = "opus"
)

// Film says where the levelled sound of a film goes.
type Film string

// The places.
const (
	AddTrack     Film = "add"     // a further track, beside all that were there
	ReplaceTrack Film = "replace" // in the place of the track it was made from
)

// Mix is what becomes of sound with more than two channels.
type Mix string

// The mixes.
const (
	AllChannels Mix = "none"   // all stay
	StereoMix   Mix = "stereo" // mixed down to two, with the coefficients of ITU-R BS.775
)

// Dither is the noise that hides rounding to a word length.
type Dither string

// The kinds.
const (
	Triangular Dither = "triangular" // two independent uniform draws, ±1 LSB in all
	Shaped     Dither = "shaped"     // the same, its noise moved to where hearing is least sensitive
	NoDither   Dither = "none"
)

// Harm holds the limits of harm: past one, a copy is held for a person to listen to.
type Harm struct {
	// Limiting over 1, 3 and 6 dB for more than this share of the time in which something is heard.
	Over1 audio.Ratio `json:"limited_1db" toml:"limited_1db"`
	Over3 audio.Ratio `json:"limited_3db" toml:"limited_3db"`
	Over6 audio.Ratio `json:"limited_6db" toml:"limited_6db"`
	// Lift is the most gain any part may need: past it, noise is what is lifted.
	Lift audio.DB `json:"lift_db" toml:"lift_db"`
	// Floor is the most that the gain in a pause may lie over the lower of those before and after it.
	Floor audio.DB `json:"floor_lift_db" toml:"floor_lift_db"`
	// Order is the least rank correlation (Spearman) of the loudness of 3 s blocks before and after, of
	// recordings of a minute and longer; −1 asks for none.
	Order audio.Ratio `json:"order" toml:"order"`
	// RangeOver is how far the loudness range may stay above the range asked for, fades apart, in recordings of 20 s and longer.
	RangeOver audio.LU `json:"range_over_lu" toml:"range_over_lu"`
	// RangeLost is how much narrower than asked for, or than it was if that is less, it may become.
	RangeLost audio.LU `json:"range_lost_lu" toml:"range_lost_lu"`
	// SpeechShare is the least share of what is heard that has to be speech for a speech anchor to be trusted.
	SpeechShare audio.Ratio `json:"speech_share" toml:"speech_share"`
	// SpeechLikelihood is the least mean likelihood of what is taken for speech, for a speech anchor to be trusted
	// where it has another loudness than the whole.
	SpeechLikelihood audio.Ratio `json:"speech_likelihood" toml:"speech_likelihood"`
}

// Version is a short hash of everything the profile says: two profiles with one version level alike.
func (p Profile) Version() string {
	b, err := json.Marshal(p)
	if err != nil { // a number that is none; no valid profile has one
		b = fmt.Appendf(nil, "%+v", p)
	}
	sum := sha256.Sum256(b)
	return hex.EncodeToString(sum[:6])
}
