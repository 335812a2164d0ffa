// Package profile says what a recording should sound like after levelling, and how much may be done to
// it. A profile is a value; changing it makes another version, and every result names the version that
// made it.
package profile

import (
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"regexp"

	"evenshelf/engine/audio"
)

// Profile is one way of levelling. The zero value is not valid; see Validate.
type Profile struct {
	Name      string     `json:"name" toml:"name"`
	Summary   string     `json:"summary" toml:"summary"`         // one sentence for a person who has to choose
	Target    audio.LUFS `json:"target_lufs" toml:"target_lufs"` // integrated loudness aimed at
	Tolerance audio.LU   `json:"tolerance_lu" toml:"tolerance_lu"`
	Ceiling   audio.DBTP `json:"ceiling_dbtp" toml:"ceiling_dbtp"` // highest true peak of the delivered file
	// Mono says how the loudness of a recording with one channel is counted.
	Mono audio.MonoRule `json:"mono" toml:"mono"`
	// Limiting is the most the ceiling may take off the loudest moment, dB. At 0 there are no dynamics
	// at all: the gain stops where the true peak meets the ceiling.
	Limiting audio.DB `json:"limiting_db" toml:"limiting_db"`
	// Lift is the most gain that may be needed before a copy is held: past it, noise is what is lifted.
	Lift audio.DB `json:"lift_db" toml:"lift_db"`
}

// ErrUnknown is returned by Named for a name that no built-in profile has.
var ErrUnknown = errors.New("no such profile")

var builtin = []Profile{
	{
		Name:      "rotation",
		Summary:   "Music and jingles for a playout library: every recording at one loudness, peaks held under the ceiling.",
		Target:    -18,
		Tolerance: 0.3,
		Mono:      audio.OneChannel,
		Ceiling:   -1,
		Limiting:  10,
		Lift:      40,
	},
	{
		Name:      "untouched",
		Summary:   "One steady gain and no dynamics at all: for archives and albums. Stops short of the target where a peak would pass the ceiling.",
		Target:    -18,
		Tolerance: 0.3,
		Mono:      audio.OneChannel,
		Ceiling:   -1,
		Limiting:  0,
		Lift:      40,
	},
}

// Builtin returns the built-in profiles, ordered by name.
func Builtin() []Profile { return append([]Profile(nil), builtin...) }

// Named returns the built-in profile of that name, or an error wrapping ErrUnknown.
func Named(name string) (Profile, error) {
	for _, p := range builtin {
		if p.Name == name {
			return p, nil
		}
	}
	return Profile{}, fmt.Errorf("%w: %q", ErrUnknown, name)
}

var validName = regexp.MustCompile(`^[a-z0-9][a-z0-9-]{0,39}$`)

// Validate returns every complaint about the profile, joined, each naming its field; nil if there is none.
func (p Profile) Validate() error {
	var errs []error
	within := func(field string, v, low, high float64) {
		if !(v >= low && v <= high) {
			errs = append(errs, fmt.Errorf("%s: %g is not between %g and %g", field, v, low, high))
		}
	}
	if !validName.MatchString(p.Name) {
		errs = append(errs, fmt.Errorf("name: %q is not 1 to 40 of a-z, 0-9 and -", p.Name))
	}
	if _, err := audio.ParseMonoRule(string(p.Mono)); err != nil {
		errs = append(errs, fmt.Errorf("mono: %w", err))
	}
	within("target_lufs", float64(p.Target), -40, -8)
	within("tolerance_lu", float64(p.Tolerance), 0.05, 3)
	within("ceiling_dbtp", float64(p.Ceiling), -20, 0)
	within("limiting_db", float64(p.Limiting), 0, 20)
	within("lift_db", float64(p.Lift), 0, 60)
	if p.Ceiling <= audio.DBTP(p.Target) {
		errs = append(errs, fmt.Errorf("ceiling_dbtp: %g is not above the target of %g LUFS", p.Ceiling, p.Target))
	}
	return errors.Join(errs...)
}

// Version is a short hash of everything the profile says: two profiles with one version level alike.
func (p Profile) Version() string {
	b, err := json.Marshal(p)
	if err != nil {
		panic(err) // a struct of strings and numbers always marshals
	}
	sum := sha256.Sum256(b)
	return hex.EncodeToString(sum[:6])
}
