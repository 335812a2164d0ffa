package profile

import (
	"errors"
	"fmt"
	"regexp"

	"evenshelf/engine/audio"
)

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
	within("limiter.most_db", float64(p.Limiter.Most), 0, 20)
	within("harm.lift_db", float64(p.Harm.Lift), 0, 60)
	if p.Ceiling <= audio.DBTP(p.Target) {
		errs = append(errs, fmt.Errorf("ceiling_dbtp: %g is not above the target of %g LUFS", p.Ceiling, p.Target))
	}
	return errors.Join(errs...)
}
