package level

import (
	"evenshelf/engine/audio"
	"evenshelf/engine/profile"
)

// Task says what a recording is to become.
type Task struct {
	Profile profile.Profile
	// Shared is the reading of the group of recordings that this one shares its gain with; nil: it has one of its own.
	Shared *Shared
}

// Shared is the reading of several recordings as one programme.
type Shared struct {
	Integrated audio.LUFS `json:"integrated_lufs"`
	TruePeak   audio.DBTP `json:"true_peak_dbtp"` // the highest of all
}
