// Package level is the pipeline a recording goes through: analyse, plan, render, judge.
//
// A plan is a ride (see package ride), a compressor on the ridden sound, a steady gain, and a ceiling (see package
// dynamics), each only where it has something to do. The gain is searched for by rendering into a meter, until what
// the plan's anchor comes to is what the profile aims at; a dry run ends there. How well all of it does is in
// EVALUATION.md, which `make evaluation` writes.
package level

import (
	"strings"

	"evenshelf/engine/audio"
	"evenshelf/engine/dynamics"
	"evenshelf/engine/faults"
	"evenshelf/engine/media"
	"evenshelf/engine/meter"
	"evenshelf/engine/profile"
	"evenshelf/engine/ride"
	"evenshelf/engine/speech"
)

// Version of the engine; it changes whenever a reading or a rendering could come out differently.
const Version = "4"

// Options say how a recording is measured. The zero value measures everything, as the standards have it.
type Options struct {
	Mono         audio.MonoRule // "" is audio.OneChannel
	LoudnessOnly bool           // loudness and peaks alone: no faults, no condition, no speech
	Stereo       bool           // more than two channels are measured as their mix to stereo (see media.Downmix)
	Track        int            // of several sound tracks, from 1; 0 is the one a film plays by itself
	// Course is where something is heard and spoken, if that is known: a copy is the source's sound, moment for moment, and
	// a detector that changes its mind about it would only confuse. nil: it is looked for.
	Course *speech.Course
}

// OptionsFor says how a recording is measured that a profile is to level.
func OptionsFor(p profile.Profile) Options {
	return Options{Mono: p.Mono, Stereo: p.Delivered.Downmix == profile.StereoMix}
}

// Analysis is everything known about one file's sound. Its JSON is a reading in the API and the CLI.
type Analysis struct {
	FormatName string `json:"format"`
	meter.Reading
	faults.Condition
	Dialogue
	Decoder string `json:"decoder"`
	Engine  string `json:"engine"`
	// AudioHash is of the decoded samples (see fingerprint): the same sound has the same, whatever its file is called and tagged.
	AudioHash string         `json:"audio_hash"`
	Faults    []faults.Fault `json:"faults"` // never nil
	Stored    *Stored        `json:"stored"` // nil in readings of earlier versions

	Info     media.Info `json:"-"`
	Timeline Timeline   `json:"-"`

	alike bool // it is stereo, and its two channels are the same, bit for bit
}

// Stored is how a sound is stored in its file.
type Stored struct {
	Codec   string `json:"codec"`    // FFmpeg's name, as "ac3"
	BitRate int    `json:"bit_rate"` // bit/s, of a lossy codec; 0 if not known
	Bits    int    `json:"bits"`     // a sample, of a lossless one; 0 of a lossy one
	Film    bool   `json:"film"`     // it is one track among what a film has; see media.Info.AmongOthers
	Track   int    `json:"track"`    // of the sound tracks, from 1; 0 where there can be but one
	Tracks  int    `json:"tracks"`   // how many these are; likewise
	Title   string `json:"title"`    // of the track
}

const longestTitle = 200 // bytes

func storedAs(i media.Info) *Stored {
	s := &Stored{Codec: i.Codec, BitRate: i.BitRate, Bits: i.BitDepth, Film: i.AmongOthers(), Track: i.Track}
	if titles := strings.Split(i.Titles, "\n"); s.Track > 0 && s.Track <= len(titles) {
		s.Tracks, s.Title = len(titles), titles[s.Track-1]
		s.Title = strings.ToValidUTF8(s.Title[:min(len(s.Title), longestTitle)], "")
	}
	return s
}

// Dialogue is what is known about the speech in a recording.
type Dialogue struct {
	ActiveTime     audio.Seconds `json:"active_s"`    // programme is heard
	SpeechTime     audio.Seconds `json:"speech_s"`    // and it is speech
	SpeechLoudness audio.LUFS    `json:"speech_lufs"` // of the 400 ms blocks of speech; undefined without any
}

// Share is how much of what is heard is speech, in percents and in words; "" if that is not known.
func (d Dialogue) Share() string {
	return percent(audio.Ratio(d.SpeechTime / d.ActiveTime))
}

// percent is a share in whole percents: "84"; a little is said to be little, "under 1", not none. It is "" if the share
// is not defined.
func percent(share audio.Ratio) string {
	switch percent := 100 * float64(share); {
	case !audio.Defined(share):
		return ""
	case percent > 0 && percent < 0.5:
		return "under 1"
	default:
		return audio.Number(percent, 0)
	}
}

// Unmeasured returns an analysis in which no figure is known. Readings kept from an earlier version are
// read into one, so that what they do not have stays undefined.
func Unmeasured() Analysis {
	none := audio.Undefined
	return Analysis{Reading: meter.Unmeasured(), Condition: faults.Unmeasured(), Dialogue: Dialogue{
		ActiveTime: audio.Seconds(none), SpeechTime: audio.Seconds(none), SpeechLoudness: audio.LUFS(none),
	}}
}

// Timeline is a recording's course on the 100 ms grid. Active and Speech are as long as the other curves,
// or nil if they were not looked for.
type Timeline struct {
	meter.Timeline
	speech.Course
}

// Plan is what will be done to a recording: a value that can be shown, stored and rendered again.
type Plan struct {
	Untouched bool   `json:"untouched"` // already within the profile: the file is copied byte for byte
	Reason    string `json:"reason"`    // in words
	// Anchor is what is brought to the target: the profile's, or the programme where nobody speaks.
	Anchor   profile.Anchor `json:"anchor"`
	Anchored audio.LUFS     `json:"anchor_lufs"` // its loudness in the source
	Aim      audio.LUFS     `json:"aim_lufs"`    // and in the copy: the target, unless its gain is shared with others

	Ride       *Ride                 `json:"ride"`         // nil: none
	Wider      audio.LU              `json:"wider_lu"`     // than the profile's range it stays, with the ride or without, fades apart
	Compressor *dynamics.Compression `json:"compressor"`   // nil: none; works on the ridden sound
	Gain       audio.DB              `json:"gain_db"`      // steady, after both
	Limit      bool                  `json:"limit"`        // whether the ceiling has anything to do
	Ceiling    audio.DBTP            `json:"ceiling_dbtp"` // used while rendering, before an encoder moves peaks: for lossy targets not the profile's
	Limiter    profile.Limiter       `json:"limiter"`
	Delivered  profile.Delivered     `json:"delivered"`

	mixed bool // what is levelled is a mix to stereo
	alike bool // its two channels are the same: see half
}

// Ride is the part of a plan that moves.
type Ride struct {
	Speed profile.Speed `json:"speed"`
	Kept  audio.Ratio   `json:"kept"`     // the share of differences that stays
	Range audio.LU      `json:"range_lu"` // the loudness range foreseen
	Least audio.DB      `json:"least_db"` // of the gain while something is heard
	Most  audio.DB      `json:"most_db"`
	Gain  ride.Curve    `json:"curve,omitempty"`
	// FloorLift is how far the gain of a pause lies over the lower of those before and after it at the most, and FloorAt where.
	FloorLift audio.DB      `json:"floor_lift_db"`
	FloorAt   audio.Seconds `json:"floor_at_s"`
}

// Treatment is what a rendering did to the sound.
type Treatment struct {
	// Shares of the time in which something is heard with more than 1, 3 and 6 dB of limiting.
	Limited1 audio.Ratio `json:"limited_1db"`
	Limited3 audio.Ratio `json:"limited_3db"`
	Limited6 audio.Ratio `json:"limited_6db"`
	// Compressed is what the compressor took off while something is heard, on average; 0 if there was none.
	Compressed audio.DB `json:"compressed_db"`
	// Deepest is the most that was taken off a peak, and DeepestAt where.
	Deepest   audio.DB      `json:"deepest_db"`
	DeepestAt audio.Seconds `json:"deepest_at_s"`
	// Order is the rank correlation of the loudness of 3 s blocks before and after; undefined under a minute.
	// OrderAt is the block that changed its place most.
	Order   audio.Ratio   `json:"order"`
	OrderAt audio.Seconds `json:"order_at_s"`
}

// State is how a recording's turn ended.
type State string

// The states a verdict can give; the queue adds its own (waiting, working, cancelled).
const (
	Done   State = "done"
	Held   State = "held"
	Failed State = "failed"
)

// Verdict judges a delivered file against its profile.
type Verdict struct {
	State  State   `json:"state"`
	Reason string  `json:"reason"` // plain words; empty when all is simply well
	Doubts []Doubt `json:"doubts"` // why it is held, one by one; nil if it is not
}

// Doubt is one reason to hold a copy.
type Doubt struct {
	Code  string         `json:"code"`  // stable, e.g. "limiting"
	Words string         `json:"words"` // one sentence
	At    *audio.Seconds `json:"at_s"`  // the moment to listen to; nil if it is the whole
}

// Outcome is the whole story of one recording's levelling.
type Outcome struct {
	Before  *Analysis `json:"before"` // nil if the source could not be read
	After   *Analysis `json:"after"`  // nil if nothing was delivered
	Plan    *Plan     `json:"plan"`
	Verdict Verdict   `json:"verdict"`
	Renders int       `json:"renders"` // how often the sound was rendered
	// Foreseen is the reading foreseen for the plan as first made, before any correction for a lossy encoder.
	Foreseen  *meter.Reading `json:"foreseen"`
	Treatment *Treatment     `json:"treatment"` // nil if nothing was rendered

	// Extension the delivered file has to carry, with its dot; empty if nothing was delivered.
	Extension string `json:"-"`
}
