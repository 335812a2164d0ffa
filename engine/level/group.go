package level

import (
	"context"
	"errors"
	"slices"

	"evenshelf/engine/audio"
	"evenshelf/engine/faults"
	"evenshelf/engine/media"
	"evenshelf/engine/meter"
	"evenshelf/engine/profile"
)

// Task says what a recording is to become.
type Task struct {
	Profile profile.Profile
	// Shared is the reading of the group of recordings that this one shares its gain with; nil: it has one of its own.
	Shared *Shared
	// TagsFrom is the file whose tags the copy carries; "": the source's own.
	TagsFrom string
	// Known, if there is one, is asked once the recording is measured. Its error ends the turn before anything is
	// written and is what Level, Foresee and Tag return: whoever knows the sound by its hash need not have it levelled.
	Known func(before *Analysis) error
}

// Shared is the reading of several recordings as one programme.
type Shared struct {
	Integrated audio.LUFS `json:"integrated_lufs"` // undefined if nothing in them is loud enough
	TruePeak   audio.DBTP `json:"true_peak_dbtp"`  // the highest of all
}

// Group measures recordings as one programme, one after another. One that cannot be read, or not to its end, is left
// out: its own turn says why.
func (e *Engine) Group(ctx context.Context, paths []string, how Options) (Shared, error) {
	how.LoudnessOnly = true
	shared := Shared{TruePeak: audio.DBTP(audio.Undefined)}
	var all []meter.Timeline
	for _, path := range paths {
		a, err := e.Analyse(ctx, path, how)
		if cause := context.Cause(ctx); cause != nil {
			return Shared{}, cause
		}
		if errors.Is(err, media.ErrKilled) {
			return Shared{}, err
		}
		if err != nil || slices.ContainsFunc(a.Faults, func(f faults.Fault) bool { return f.Severity == faults.Serious }) {
			continue
		}
		all = append(all, a.Timeline.Timeline)
		if !(a.TruePeak <= shared.TruePeak) {
			shared.TruePeak = a.TruePeak
		}
	}
	shared.Integrated = meter.Together(all...)
	return shared, nil
}
