package profile

import (
	"encoding/json"
	"errors"
	"math"
	"reflect"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

func TestBuiltinProfilesAreValid(t *testing.T) {
	// The lexicon's table: each built-in profile, its anchor and the speed of its ride.
	want := []struct {
		name   string
		anchor Anchor
		speed  Speed
	}{
		{"concert", Programme, Slow}, {"film", Speech, Medium}, {"rotation", Programme, Slow},
		{"talk", Speech, Medium}, {"transmitter", Programme, Fast}, {"untouched", Programme, Still},
	}
	all := Builtin()
	if len(all) != len(want) {
		t.Fatalf("%d profiles, want %d", len(all), len(want))
	}
	for i, p := range all {
		if p.Name != want[i].name || p.Anchor != want[i].anchor || p.Ride.Speed != want[i].speed {
			t.Errorf("profile %d is %s, %s, %s; want %v", i, p.Name, p.Anchor, p.Ride.Speed, want[i])
		}
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

// Every leaf of the struct is in the table and the other way round, and its JSON has the file's name: whoever adds a
// field has to say what it means.
func TestTableNamesEveryField(t *testing.T) {
	left := map[string]bool{}
	for name := range places {
		left[name] = true
	}
	table := ""
	for _, f := range Fields() {
		if !left[f.Name] {
			t.Fatalf("%s is in the table, but not in the profile, or twice", f.Name)
		}
		delete(left, f.Name)
		if f.Means == "" || f.Allowed() == "" {
			t.Errorf("%s: nothing says what it means or can be", f.Name)
		}
		if f.table() != table { // TOML lets no table be opened twice
			table = f.table()
			if i := indexOf(tables, table); i < 0 {
				t.Errorf("nothing says what the table %s is", table)
			}
		}
		if kinds := (f.Words != nil) == (f.kind() == reflect.String && f.Name != "name" && f.Name != "summary") &&
			(f.Numbers != nil) == (f.kind() == reflect.Int) && (f.Low < f.High) == (f.kind() == reflect.Float64); !kinds {
			t.Errorf("%s: the bounds do not go with a %s", f.Name, f.kind())
		}
	}
	for name := range left {
		t.Errorf("%s is not in the table", name)
	}
	var sameTags func(s reflect.Type)
	sameTags = func(s reflect.Type) {
		for i := range s.NumField() {
			f := s.Field(i)
			if f.Tag.Get("json") != f.Tag.Get("toml") || f.Tag.Get("toml") == "" {
				t.Errorf("%s.%s is called %q in TOML and %q in JSON", s, f.Name, f.Tag.Get("toml"), f.Tag.Get("json"))
			}
			if f.Type.Kind() == reflect.Struct {
				sameTags(f.Type)
			}
		}
	}
	sameTags(reflect.TypeFor[Profile]())
}

func indexOf(words []Word, word string) int {
	for i, w := range words {
		if w.Word == word {
			return i
		}
	}
	return -1
}

// changed returns the profile with one field changed by as little as a file can say.
func changed(p Profile, f Field) Profile {
	switch v := f.in(&p); v.Kind() {
	case reflect.String:
		v.SetString(v.String() + "x")
	case reflect.Int:
		v.SetInt(v.Int() + 1)
	case reflect.Float64:
		v.SetFloat(v.Float() + 1e-4)
	}
	return p
}

func TestVersionChangesWithEveryField(t *testing.T) {
	base := Builtin()[0]
	seen := map[string]string{base.Version(): "nothing"}
	for _, f := range Fields() {
		v := changed(base, f).Version()
		if other, taken := seen[v]; taken {
			t.Errorf("changing %s gives the version of changing %s", f.Name, other)
		}
		seen[v] = f.Name
	}
	if again := Builtin()[0].Version(); again != base.Version() {
		t.Errorf("the version is %s one time and %s another", base.Version(), again)
	}
	broken := base
	broken.Compressor.Ratio = math.NaN()
	if broken.Version() == base.Version() {
		t.Error("a ratio that is no number has the version of the profile without it")
	}
}

// Each bound of each number, from both sides, and each word.
func TestValidateKnowsEveryBound(t *testing.T) {
	says := func(p Profile, f Field) string {
		for _, c := range complaints(p.Validate()) {
			if c.Field == f.Name {
				return c.Words
			}
		}
		return ""
	}
	for _, f := range Fields() {
		p := Builtin()[2]
		v := f.in(&p)
		switch {
		case f.Words != nil:
			for _, w := range f.Words {
				v.SetString(w.Word)
				if got := says(p, f); strings.Contains(got, "is not one of") {
					t.Errorf("%s %s: %s", f.Name, w.Word, got)
				}
			}
			v.SetString("twice")
			if got := says(p, f); !strings.HasPrefix(got, `"twice" is not one of `) {
				t.Errorf("%s twice: %q", f.Name, got)
			}
		case f.Numbers != nil:
			v.SetInt(20)
			if got := says(p, f); !strings.HasPrefix(got, "20 is not one of 0, ") {
				t.Errorf("%s 20: %q", f.Name, got)
			}
		case v.Kind() == reflect.Float64:
			for _, bad := range []float64{f.Low - 0.01, f.High + 0.01, math.NaN(), math.Inf(1), math.Inf(-1)} {
				v.SetFloat(bad)
				if got := says(p, f); !strings.Contains(got, "is not between") {
					t.Errorf("%s %g: %q", f.Name, bad, got)
				}
			}
			for _, fine := range []float64{f.Low, f.High} {
				v.SetFloat(fine)
				if got := says(p, f); strings.Contains(got, "is not between") {
					t.Errorf("%s %g: %q", f.Name, fine, got)
				}
			}
		}
	}
}

func TestValidateNamesEveryWrongField(t *testing.T) {
	err := Profile{Name: "No Good", Target: 3, Tolerance: 0, Ceiling: 1, Limiter: Limiter{Most: -1}, Harm: Harm{Lift: 99}}.Validate()
	if err == nil {
		t.Fatal("nothing was found wrong")
	}
	for _, field := range []string{"name", "summary", "anchor", "target_lufs", "tolerance_lu", "ceiling_dbtp", "mono", "within", "group",
		"ride.speed", "ride.strength", "ride.fades", "compressor.ratio", "limiter.most_db", "limiter.release_ms", "delivered.dither", "harm.lift_db"} {
		if n := strings.Count("\n"+err.Error(), "\n"+field+": "); n != 1 {
			t.Errorf("%d complaints about %s in:\n%v", n, field, err)
		}
	}
}

func TestValidateKnowsWhatFieldsAskOfEachOther(t *testing.T) {
	together := func(p *Profile) { p.Group, p.Anchor, p.Ride.Speed, p.Compressor.Ratio = Folder, Programme, Still, 1 }
	for _, c := range []struct {
		change func(*Profile)
		says   string // "" for a profile that is fine
	}{
		{func(p *Profile) { p.Ceiling, p.Target = -16, -16 }, "ceiling_dbtp: -16 is not above the target of -16 LUFS"},
		{together, ""},
		{func(p *Profile) { together(p); p.Anchor = Speech }, "anchor: speech does not go with the group folder"},
		{func(p *Profile) { together(p); p.Ride.Speed = Slow }, "ride.speed: slow does not go with the group folder"},
		{func(p *Profile) { together(p); p.Compressor.Ratio = 3 }, "compressor.ratio: 3 does not go with the group folder"},
		{func(p *Profile) { p.Ride.Lift, p.Ride.Cut = 0, 0 }, "ride.speed: medium is a ride, but"},
		{func(p *Profile) { p.Ride.Lift, p.Ride.Cut, p.Ride.Speed = 0, 0, Still }, ""},
		{func(p *Profile) { p.Ride.Deadband = 3.5 }, "ride.deadband_db: 3.5 leaves up to 7 LU as they are, more than the range_lu of 6"},
		{func(p *Profile) { p.Ride.Deadband = 3 }, ""},
		{func(p *Profile) { p.Harm.Over3 = 0.6 }, "harm.limited_3db: 0.6 is more than the limited_1db of 0.5"},
		{func(p *Profile) { p.Harm.Over6 = 0.3 }, "harm.limited_6db: 0.3 is more than the limited_3db of 0.25"},
		{func(p *Profile) { p.Summary = "two\nlines" }, "summary: has to be one line"},
		{func(p *Profile) { p.Summary = "bad \xff" }, "summary: has to be one line"},
		{func(p *Profile) { p.Summary = strings.Repeat("é", longestSummary) }, ""},
		{func(p *Profile) { p.Summary = strings.Repeat("é", longestSummary+1) }, "summary: is longer"},
	} {
		p, err := Named("talk")
		if err != nil {
			t.Fatal(err)
		}
		c.change(&p)
		err = p.Validate()
		if c.says == "" && err != nil || c.says != "" && (err == nil || !strings.HasPrefix(err.Error(), c.says) || len(complaints(err)) != 1) {
			t.Errorf("got %v, want %q", err, c.says)
		}
	}
}

// Documents as the store has kept them: today's come back unchanged, and those of the first version, which had two
// fields at the top and no ride, keep their meaning.
func TestStoredProfilesComeBack(t *testing.T) {
	for _, p := range Builtin() {
		document, err := json.Marshal(p)
		if err != nil {
			t.Fatal(err)
		}
		if got, err := UnmarshalStored(document); err != nil || got != p {
			t.Errorf("%s came back as %+v, %v", p.Name, got, err)
		}
	}
	p, err := UnmarshalStored([]byte(`{"name":"old","summary":"kept long ago","target_lufs":-23,"tolerance_lu":0.5,"ceiling_dbtp":-3,
		"mono":"two-loudspeakers","limiting_db":0,"lift_db":25}`))
	if err != nil || p.Validate() != nil {
		t.Fatal(err, p.Validate())
	}
	if p.Target != -23 || p.Mono != audio.TwoLoudspeakers || p.Limiter.Most != 0 || p.Harm.Lift != 25 || p.Ride.Speed != Still || p.Compressor.Ratio != 1 {
		t.Errorf("%+v", p)
	}
	if _, err := UnmarshalStored([]byte(`{"target_lufs":"loud"}`)); err == nil {
		t.Error("a broken document passes")
	}
}

func TestFieldNamed(t *testing.T) {
	f, err := FieldNamed("ride.deadband_db")
	if err != nil || f.Allowed() != "0 to 20 dB" || f.Value(Builtin()[0]) != "3 dB" {
		t.Errorf("%+v, %v", f, err)
	}
	for name, says := range map[string]string{"deadband_db": "did you mean ride.deadband_db?", "ride.lift": "did you mean ride.lift_db or harm.lift_db?",
		"target_luf": "did you mean target_lufs?", "Ride.Speed": "did you mean ride.speed?", "colour": "is not a field of a profile"} {
		if _, err := FieldNamed(name); err == nil || !strings.HasSuffix(err.Error(), says) {
			t.Errorf("%s: %v; want %q", name, err, says)
		}
	}
}
