// Package level is the pipeline a recording goes through: analyse, plan, render, judge.
package level

import (
	"evenshelf/engine/audio"
	"evenshelf/engine/faults"
	"evenshelf/engine/media"
	"evenshelf/engine/meter"
)

// Version of the engine; it changes whenever a reading or a rendering could come out differently.
const Version = "1"

// Analysis is everything known about one file's sound. Its JSON is a reading in the API and the CLI.
type Analysis struct {
	FormatName string `json:"format"`
	meter.Reading
	Decoder string         `json:"decoder"`
	Engine  string         `json:"engine"`
	Faults  []faults.Fault `json:"faults"` // never nil

	Info     media.Info     `json:"-"`
	Timeline meter.Timeline `json:"-"`
}

// Plan is what will be done to a recording: a value that can be shown, stored and rendered again.
type Plan struct {
	Gain      audio.DB   `json:"gain_db"`
	Ceiling   audio.DBTP `json:"ceiling_dbtp"` // used while rendering; lossy targets may need it lower than the profile's
	Limit     bool       `json:"limit"`        // whether the ceiling has anything to do
	Untouched bool       `json:"untouched"`    // already within the profile: the file is copied byte for byte
	Reason    string     `json:"reason"`       // in words
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
	State  State  `json:"state"`
	Reason string `json:"reason"` // plain words; empty when all is simply well
}

// Outcome is the whole story of one recording's levelling.
type Outcome struct {
	Before  *Analysis `json:"before"` // nil if the source could not be read
	After   *Analysis `json:"after"`  // nil if nothing was delivered
	Plan    *Plan     `json:"plan"`
	Verdict Verdict   `json:"verdict"`
	Renders int       `json:"renders"` // how often the sound was rendered

	// Extension the delivered file has to carry, with its dot; empty if nothing was delivered.
	Extension string `json:"-"`
}
