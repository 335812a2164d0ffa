package profile

import (
	"errors"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

func TestBuiltinProfilesAreValid(t *testing.T) {
	for _, p := range Builtin() {
		if err := p.Validate(); err != nil {
			t.Errorf("%s: %v", p.Name, err)
		}
		if got, err := Named(p.Name); err != nil || got != p {
			t.Errorf("Named(%q) = %v, %v", p.Name, got, err)
		}
	}
	if _, err := Named("nobody"); !errors.Is(err, ErrUnknown) {
		t.Errorf("an unknown name gives %v", err)
	}
}

func TestValidateNamesEveryWrongField(t *testing.T) {
	err := Profile{Name: "No Good", Target: 3, Tolerance: 0, Ceiling: 1, Limiter: Limiter{Most: -1}, Harm: Harm{Lift: 99}}.Validate()
	if err == nil {
		t.Fatal("nothing was found wrong")
	}
	for _, field := range []string{"name", "target_lufs", "tolerance_lu", "ceiling_dbtp", "mono", "limiter.most_db", "harm.lift_db"} {
		if !strings.Contains(err.Error(), field+":") {
			t.Errorf("no complaint about %s in:\n%v", field, err)
		}
	}
}

func TestVersionChangesWithEveryField(t *testing.T) {
	base := Builtin()[0]
	seen := map[string]string{base.Version(): "itself"}
	for name, change := range map[string]func(*Profile){
		"name":      func(p *Profile) { p.Name = "other" },
		"target":    func(p *Profile) { p.Target-- },
		"tolerance": func(p *Profile) { p.Tolerance /= 2 },
		"ceiling":   func(p *Profile) { p.Ceiling-- },
		"limiting":  func(p *Profile) { p.Limiter.Most++ },
		"lift":      func(p *Profile) { p.Harm.Lift++ },
		"mono":      func(p *Profile) { p.Mono = audio.TwoLoudspeakers },
	} {
		p := base
		change(&p)
		if other, taken := seen[p.Version()]; taken {
			t.Errorf("changing %s gives the version of %s", name, other)
		}
		seen[p.Version()] = name
	}
}
