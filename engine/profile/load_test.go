package profile

import (
	"errors"
	"math"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"syscall"
	"testing"

	"pgregory.net/rapid"
)

func parse(t *testing.T, text string) Profile {
	t.Helper()
	p, err := Parse("mine", []byte(text))
	if err != nil {
		t.Fatalf("%v in\n%s", err, text)
	}
	return p
}

func builtIn(t *testing.T, name string) Profile {
	t.Helper()
	p, err := Named(name)
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func TestParseStartsFromABuiltInProfile(t *testing.T) {
	want := builtIn(t, "talk")
	want.Name, want.Summary = "mine", "Based on talk. "+want.Summary
	if got := parse(t, "based_on = 'talk'"); got != want {
		t.Errorf("got  %+v\nwant %+v", got, want)
	}
	want.Summary, want.Target, want.Ride.Lift, want.Compressor.Ratio = "Ours.", -19, 12.5, 2
	for _, text := range []string{
		"based_on = 'talk'\nsummary = 'Ours.'\ntarget_lufs = -19\n[ride]\nlift_db = 12.5\n[compressor]\nratio = 2.0\n",
		"\ufeffride = {lift_db = 12.5}\r\ncompressor.ratio = 2\nname = 'mine'\nsummary = 'Ours.'\nbased_on = 'talk'\ntarget_lufs = -19.00001\n",
	} {
		if got := parse(t, text); got != want {
			t.Errorf("got  %+v\nwant %+v\nfrom %s", got, want, text)
		}
	}
}

func TestParseStartsFromWhatIsUsual(t *testing.T) {
	got := parse(t, "summary = 'Ours.'\nanchor = 'programme'\ntarget_lufs = -20\nride.speed = 'none'\n")
	want := usual
	want.Name, want.Summary, want.Target = "mine", "Ours.", -20
	if got != want {
		t.Errorf("got  %+v\nwant %+v", got, want)
	}
	if p, err := Parse("", []byte("based_on = 'talk'")); p.Name != "unnamed" || err != nil {
		t.Errorf("without a name: %q, %v", p.Name, err)
	}
	if p, err := Parse("", []byte("based_on = 'talk'\nname = 'other'")); p.Name != "other" || err != nil {
		t.Errorf("with a name of its own: %q, %v", p.Name, err)
	}
	_, err := Parse("mine", []byte("ride.speed = 'slow'"))
	for _, field := range []string{"summary", "anchor", "target_lufs", "ride.range_lu"} {
		if !complaints(err).about(field) {
			t.Errorf("nothing says that %s is missing: %v", field, err)
		}
	}
	if len(complaints(err)) != 4 {
		t.Errorf("%v", err)
	}
}

func TestGentleBringsItsOwnForFilm(t *testing.T) {
	film := builtIn(t, "film")
	gentle := parse(t, "based_on = 'film'\nride.strength = 'gentle'\n")
	if r := gentle.Ride; r.Range != 13 || r.Deadband != 2 || r.Strength != Gentle || gentle.Compressor.Ratio != 1 {
		t.Errorf("gentle: %+v, %+v", r, gentle.Compressor)
	}
	if gentle.Ride.Lift != film.Ride.Lift || gentle.Target != film.Target {
		t.Errorf("gentle changes more than it should: %+v", gentle)
	}
	given := parse(t, "based_on = 'film'\n[ride]\nstrength = 'gentle'\nrange_lu = 10\n[compressor]\nratio = 2\n")
	if given.Ride.Range != 10 || given.Ride.Deadband != 2 || given.Compressor.Ratio != 2 {
		t.Errorf("what is given does not stay: %+v, %+v", given.Ride, given.Compressor)
	}
	for text, want := range map[string]Profile{"based_on = 'film'\nride.strength = 'evening'": film, "based_on = 'talk'\nride.strength = 'gentle'": builtIn(t, "talk")} {
		got := parse(t, text)
		if got.Ride.Range != want.Ride.Range || got.Ride.Deadband != want.Ride.Deadband || got.Compressor != want.Compressor {
			t.Errorf("%s: %+v", text, got)
		}
	}
}

// Every complaint at once, with its field, the value, what it can be and its line.
func TestParseComplains(t *testing.T) {
	for text, want := range map[string][]string{
		"based_on = 'talk'\n[ride]\nlift_db = 99\nspeed = 'quick'\n\n[delivered]\nbits = 20\n": {
			"ride.lift_db: 99 is not between 0 and 40 (line 3)",
			`ride.speed: "quick" is not one of none, slow, medium, fast (line 4)`,
			"delivered.bits: 20 is not one of 0, 16, 24, 32 (line 7)",
		},
		"based_on = 'talk'\nceilling_dbtp = -1\nlift_db = 3\n[limiter]\nmost_db = '3'\n[extra]\na = 1\n": {
			"ceilling_dbtp: is not a field of a profile; did you mean ceiling_dbtp? (line 2)",
			"lift_db: is not a field of a profile; did you mean ride.lift_db or harm.lift_db? (line 3)",
			`limiter.most_db: "3" is not a number: 0 to 20 dB (line 5)`,
			"extra: is not a field of a profile (line 6)",
		},
		"based_on = 'talk'\nTarget_LUFS = -20\n'ride.lift_db' = 3\nride = {lift_db = true, deep = {a = 1}}\n": {
			"Target_LUFS: is not a field of a profile (line 2)",
			"ride.lift_db: is not a field of a profile; did you mean ride.lift_db or harm.lift_db? (line 3)",
			"ride.lift_db: true is not a number: 0 to 40 dB (line 3)", // the line of the first of that name
			"ride.deep: is not a field of a profile (line 4)",
		},
		"based_on = 'talk'\nride = 3\nlimiter.most_db = [1]\nharm.order = {}\ndelivered.bits = 16.5": {
			"ride: has to be a table: [ride] (line 2)", "limiter.most_db: a list is not a number: 0 to 20 dB (line 3)",
			"harm.order: a table is not a number: -1 to 1 (line 4)", "delivered.bits: 16.5 is not a whole number: 0, 16, 24 or 32 (line 5)",
		},
		"based_on = 'nobody'":                {`based_on: "nobody" is not a built-in profile: concert, film, rotation, talk, transmitter or untouched (line 1)`},
		"based_on = 3":                       {"based_on: 3 is not a built-in profile: concert, film, rotation, talk, transmitter or untouched (line 1)"},
		"based_on = 'talk'\nname = 'yours'":  {`name: "yours" is not what the file is called, which is "mine": leave it out (line 2)`},
		"based_on = 'talk'\ntarget_lufs = 0": {"target_lufs: 0 is not between -40 and -8 (line 2)"},
		"based_on = 'talk'\nceiling_dbtp = -20\nride.range_lu = nan\nharm.lift_db = inf": {
			"ceiling_dbtp: -20 is not above the target of -16 LUFS (line 2)", "ride.range_lu: NaN is not between 1 and 40 (line 3)",
			"harm.lift_db: +Inf is not between 0 and 60 (line 4)"},
		"based_on = 'talk'\ntarget_lufs = \u221216": {"is not TOML: "}, // a true minus sign, as it is printed elsewhere
		"a = 1\na = 2": {"is not TOML: key a is already defined (line 2)"},
		strings.Repeat("# a long story\n", LargestFile/15+1): {"is larger than 64 KiB"},
	} {
		p, err := Parse("mine", []byte(text))
		if err == nil || p != (Profile{}) {
			t.Errorf("%v passes:\n%.200s", p, text)
			continue
		}
		got := strings.Split(err.Error(), "\n")
		if len(got) != len(want) {
			t.Errorf("got  %q\nwant %q", got, want)
			continue
		}
		for i := range want {
			if !strings.HasPrefix(got[i], want[i]) {
				t.Errorf("got  %s\nwant %s", got[i], want[i])
			}
		}
	}
	var many strings.Builder
	for i := range 3000 {
		many.WriteString("x" + strings.Repeat("y", i%30) + string(rune('a'+i%26)) + strings.Repeat("z", i/780) + " = 1\n")
	}
	if _, err := Parse("mine", []byte(many.String())); len(complaints(err)) > 2*mostComplaints {
		t.Errorf("%d complaints", len(complaints(err)))
	}
}

// What TOML writes is what Parse reads, whatever the profile says.
func TestTOMLComesBack(t *testing.T) {
	for _, p := range Builtin() {
		got, err := Parse("mine", p.TOML())
		want := p
		want.Name = "mine"
		if err != nil || got != want {
			t.Errorf("%s came back as %+v, %v", p.Name, got, err)
		}
		if !strings.Contains(string(p.TOML()), "based_on = \""+p.Name+"\"\n") {
			t.Errorf("%s does not say what it starts from", p.Name)
		}
	}
	rapid.Check(t, func(t *rapid.T) {
		p := usual
		p.Name = "mine"
		for _, f := range fields[1:] {
			switch v := f.in(&p); {
			case f.Words != nil:
				v.SetString(rapid.SampledFrom(f.words()).Draw(t, f.Name))
			case f.Numbers != nil:
				v.SetInt(int64(rapid.SampledFrom(f.Numbers).Draw(t, f.Name)))
			case v.Kind() == reflect.Float64:
				v.SetFloat(math.Round(rapid.Float64Range(f.Low, f.High).Draw(t, f.Name)*1e4) / 1e4)
			default:
				v.SetString(rapid.String().Draw(t, f.Name))
			}
		}
		if p.Validate() != nil {
			return
		}
		got, err := Parse("mine", p.TOML())
		if err != nil || got != p {
			t.Fatalf("got  %+v, %v\nwant %+v", got, err, p)
		}
	})
}

func TestLoadNamesTheFile(t *testing.T) {
	dir := t.TempDir()
	bad := put(t, dir, "mine.toml", "based_on = 'talk'\nride.lift_db = 99\n")
	for path, says := range map[string]string{
		bad:                             bad + ": ride.lift_db: 99 is not between 0 and 40 (line 2)",
		filepath.Join(dir, "gone.toml"): filepath.Join(dir, "gone.toml") + ": no such file or directory",
		put(t, dir, "mine.txt", ""):     "a profile's file is called NAME.toml",
		put(t, dir, "talk.toml", "based_on = 'film'"): "name: talk is a built-in profile: call this one something else",
		put(t, dir, "Loud Music.toml", ""):            `name: "Loud Music" is not 1 to 40 of a-z, 0-9 and -`,
		put(t, dir, "folder.toml/x", ""):              "", // makes a folder of that name
		filepath.Join(dir, "folder.toml"):             "is not a file",
		filepath.Join(dir, "nowhere", "x.txt"):        "a profile's file is called NAME.toml",
	} {
		if says == "" {
			continue
		}
		_, err := Load(path)
		if err == nil || !strings.Contains(err.Error(), says) || !strings.HasPrefix(err.Error(), path+": ") {
			t.Errorf("%s: %v; want %q", path, err, says)
		}
	}
	pipe := filepath.Join(dir, "pipe.toml")
	if err := syscall.Mkfifo(pipe, 0o600); err != nil {
		t.Fatal(err)
	}
	if _, err := Load(pipe); err == nil { // and does not wait for somebody to write
		t.Error("a pipe passes")
	}
}

func put(t *testing.T, dir, name, text string) string {
	t.Helper()
	path := filepath.Join(dir, name)
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

func TestGather(t *testing.T) {
	dir := t.TempDir()
	put(t, dir, "villages.toml", "based_on = 'film'")
	put(t, dir, "bells.toml", "based_on = 'concert'")
	put(t, dir, "broken.toml", "based_on = 'concert'\nride.lift_db = 99\nharm.order = 2\n")
	put(t, dir, "talk.toml", "based_on = 'film'")
	put(t, dir, "twin.toml", "based_on = 'talk'")
	put(t, dir, "twin.TOML", "based_on = 'film'")
	put(t, dir, ".villages.toml", "half wri")
	put(t, dir, "notes.txt", "not a profile")
	put(t, dir, "old/past.toml", "based_on = 'talk'")
	s := Gather(dir)
	var got []string
	for _, l := range s.All {
		got = append(got, l.Name)
		if own := l.Source == Own; own != (l.File != "") || own != (l.Name == "bells" || l.Name == "villages") {
			t.Errorf("%s is %s, from %q", l.Name, l.Source, l.File)
		}
	}
	if want := "bells concert film rotation talk transmitter untouched villages"; strings.Join(got, " ") != want {
		t.Errorf("got %v, want %s", got, want)
	}
	for _, says := range []string{"broken.toml: ride.lift_db: 99 is", "broken.toml: harm.order: 2 is", "talk.toml: name: talk is a built-in profile",
		"twin.toml: name: twin.TOML, twin.toml would all be called twin", "twin.TOML: name: "} {
		if !strings.Contains(s.Problems.Error(), says) {
			t.Errorf("nothing says %q in\n%v", says, s.Problems)
		}
	}
	if len(s.Problems) != 5 {
		t.Errorf("%d problems:\n%v", len(s.Problems), s.Problems)
	}
	own, problems := LoadFolder(dir)
	if len(own) != 2 || own[0].Name != "bells" || own[1].Name != "villages" || len(problems) != len(s.Problems) {
		t.Errorf("LoadFolder gives %v, %v", own, problems)
	}
	if gone := Gather(filepath.Join(dir, "gone")); len(gone.All) != len(builtin) || len(gone.Problems) != 1 {
		t.Errorf("a folder that is gone: %v", gone.Problems)
	}
	if none := Gather(""); len(none.All) != len(builtin) || none.Problems != nil {
		t.Errorf("no folder: %+v", none)
	}

	if l, err := s.Find("villages"); err != nil || l.Target != -23 || l.Source != Own {
		t.Errorf("%+v, %v", l, err)
	}
	if l, err := s.Find("rotation"); err != nil || l.Source != BuiltIn {
		t.Errorf("%+v, %v", l, err)
	}
	if l, err := s.Find(filepath.Join(dir, "old", "past.toml")); err != nil || l.Name != "past" || l.File != "past.toml" {
		t.Errorf("%+v, %v", l, err)
	}
	if _, err := s.Find("broken"); len(complaints(err)) != 2 {
		t.Errorf("a file with faults is found as %v", err)
	}
	if _, err := s.Find("nobody"); !errors.Is(err, ErrUnknown) || !strings.Contains(err.Error(), "villages") {
		t.Errorf("%v", err)
	}
	if _, err := s.Named(filepath.Join(dir, "old", "past.toml")); !errors.Is(err, ErrUnknown) {
		t.Errorf("Named reads a file: %v", err)
	}
}

// FuzzParse looks for a text that breaks the reader, and for one that is taken but does not mean what it says.
func FuzzParse(f *testing.F) {
	f.Add([]byte("based_on = 'film'\nride = {strength = 'gentle', lift_db = 3}\n[harm]\norder = 0.5\n"))
	f.Add([]byte("summary = 'x'\nanchor = 'speech'\ntarget_lufs = -2_0\nride.speed = \"none\"\n[[ride]]\n"))
	f.Add([]byte("\"\" = 1\n'a.b'.c = {d = {e = []}}\n[ride.\"x\\u0000\"]\n1979-05-27T07:32:00Z = inf\n"))
	p := builtin[3]
	f.Add(p.TOML())
	f.Fuzz(func(t *testing.T, text []byte) {
		p, err := Parse("mine", text)
		if err != nil {
			if len(complaints(err)) == 0 || strings.TrimSpace(err.Error()) == "" {
				t.Fatalf("a refusal without a word: %#v", err)
			}
			return
		}
		if err := p.Validate(); err != nil {
			t.Fatalf("was taken, but is not valid: %v", err)
		}
		if again, err := Parse("mine", p.TOML()); err != nil || again != p || again.Version() != p.Version() {
			t.Fatalf("came back as %+v, %v; was %+v", again, err, p)
		}
	})
}
