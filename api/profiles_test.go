package api

import (
	"net/http"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"evenshelf/engine/profile"
	"evenshelf/store"
)

// ownProfiles gives the house a folder with profiles of its operator's.
func ownProfiles(t *testing.T) (dir string, change func(*Options)) {
	t.Helper()
	dir = t.TempDir()
	return dir, func(o *Options) { o.Profiles = func() profile.Set { return profile.Gather(dir) } }
}

func putProfile(t *testing.T, dir, name, text string) {
	t.Helper()
	if err := os.WriteFile(filepath.Join(dir, name), []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
}

func TestProfilesAreListedWithTheirSourceAndWords(t *testing.T) {
	dir, change := ownProfiles(t)
	h := open(t, change)
	list := func() (all map[string]profile.Described, problems []unusable) {
		var got struct {
			Profiles []profile.Described
			Problems []unusable
		}
		h.get(at("/profiles")).into(t, 200, &got)
		all = map[string]profile.Described{}
		for _, p := range got.Profiles {
			all[p.Name] = p
		}
		return all, got.Problems
	}
	if all, problems := list(); len(all) != len(profile.Builtin()) || len(problems) != 0 {
		t.Errorf("an empty folder: %d profiles, problems %v", len(all), problems)
	}
	for _, want := range profile.Builtin() {
		var got profile.Described
		h.get(at("/profiles/%s", want.Name)).into(t, 200, &got)
		if got.Profile != want || got.Version != want.Version() || got.Source != profile.BuiltIn || len(got.Words) != len(want.Words()) {
			t.Errorf("%s came as %+v", want.Name, got)
		}
	}
	// The folder is read anew: what was put there is there, and a bad file hides nothing.
	putProfile(t, dir, "villages.toml", "based_on = 'talk'\ntarget_lufs = -19\n")
	putProfile(t, dir, "broken.toml", "based_on = 'talk'\nride.lift_db = 99\n")
	all, problems := list()
	if len(all) != len(profile.Builtin())+1 || all["villages"].Target != -19 || all["villages"].Source != profile.Own {
		t.Errorf("%+v", all["villages"])
	}
	if len(problems) != 1 || problems[0] != (unusable{"broken.toml", "ride.lift_db: 99 is not between 0 and 40 (line 2)"}) {
		t.Errorf("problems: %+v", problems)
	}
	h.get(at("/profiles/nobody")).wantProblem(t, kindNotFound, "nobody")
	h.get(at("/profiles/broken")).wantProblem(t, kindNotFound, "ride.lift_db: 99")
	h.get(at("/profiles/%s", "..%2Fvillages.toml")).wantProblem(t, kindNotFound, "")
}

// A run keeps the profile it was started with, also after its file has changed.
func TestRunsTakeProfilesOfOnesOwn(t *testing.T) {
	dir, change := ownProfiles(t)
	h := open(t, change)
	putProfile(t, dir, "villages.toml", "based_on = 'talk'\ntarget_lufs = -19\n")
	start := func() (run store.Run) {
		h.ask(http.MethodPost, at("/runs"), `{"shelf_id":1,"profile":"villages","delivery":"copy"}`).into(t, 201, &run)
		return run
	}
	first := start()
	putProfile(t, dir, "villages.toml", "based_on = 'talk'\ntarget_lufs = -21\n")
	second := start()
	if first.Target != -19 || second.Target != -21 || first.ProfileVersion == second.ProfileVersion {
		t.Errorf("first %+v, second %+v", first, second)
	}
	jobs, err := h.db.Jobs(t.Context(), store.JobQuery{RunID: first.ID})
	if err != nil {
		t.Fatal(err)
	}
	work, err := h.db.StartJob(t.Context(), jobs[0].ID)
	if err != nil || work.Profile.Target != -19 || work.Profile.Version() != first.ProfileVersion {
		t.Errorf("the job levels with %+v, %v", work.Profile, err)
	}
	path := filepath.Join(dir, "villages.toml")
	for name, says := range map[string]string{"nobody": `no profile is called "nobody"`, path: "no profile is called"} {
		h.ask(http.MethodPost, at("/runs"), `{"shelf_id":1,"profile":"`+name+`","delivery":"copy"}`).wantProblem(t, kindInvalid, says)
	}
	putProfile(t, dir, "villages.toml", "based_on = 'talk'\ntarget_lufs = 0\n")
	h.ask(http.MethodPost, at("/runs"), `{"shelf_id":1,"profile":"villages","delivery":"copy"}`).
		wantProblem(t, kindInvalid, "profile: villages.toml: target_lufs: 0 is not between -40 and -8")
}

func TestProfilesAreChecked(t *testing.T) {
	h := open(t, nil)
	check := func(text, contentType string) reply {
		return h.ask(http.MethodPost, at("/profiles/check"), text, "Content-Type", contentType)
	}
	var got checkedProfile
	check("based_on = 'film'\nname = 'villages'\nride.lift_db = 12\n", "application/toml").into(t, 200, &got)
	if !got.Valid || got.Profile == nil || got.Profile.Ride.Lift != 12 || got.Profile.Name != "villages" || got.Problems == nil || len(got.Problems) != 0 {
		t.Errorf("%+v", got)
	}
	got = checkedProfile{}
	check("based_on = 'film'\nride.lift_db = 99\nrange = 3\n", "text/plain; charset=utf-8").into(t, 200, &got)
	if got.Valid || got.Profile != nil || len(got.Problems) != 2 || got.Problems[0] != (profile.Complaint{Line: 2, Field: "ride.lift_db", Words: "99 is not between 0 and 40"}) {
		t.Errorf("%+v", got)
	}
	got = checkedProfile{}
	check("["+strings.Repeat("a.", 32000)+"a]", "text/plain").into(t, 200, &got)
	if got.Valid || len(got.Problems) != 1 || got.Problems[0].Words != "is nested deeper than 8: no profile is" {
		t.Errorf("%+v", got)
	}
	got = checkedProfile{}
	check("RIFF\x00\x00WAVE", "text/plain").into(t, 200, &got)
	if got.Valid || len(got.Problems) != 1 || got.Problems[0].Words != "is not text" {
		t.Errorf("%+v", got)
	}
	check("{}", "application/json").wantProblem(t, kindMediaType, "application/toml")
	check(strings.Repeat("#", profile.LargestFile+1), "text/plain").wantProblem(t, kindTooLarge, "64.0 KiB")
	check(strings.Repeat("#", profile.LargestFile), "text/plain").into(t, 200, &got)
}

// The document bounds each field as validation does, and names no other.
func TestProfileSchemaHasTheBoundsOfTheProfile(t *testing.T) {
	s, _ := operations(t)
	root, err := s.ref("#/components/schemas/Profile")
	if err != nil {
		t.Fatal(err)
	}
	found := 0
	for _, f := range profile.Fields() {
		at, name := root, f.Name
		if table, rest, inOne := strings.Cut(f.Name, "."); inOne {
			at, name = mapOf(mapOf(root["properties"])[table]), rest
		}
		schema, err := s.deref(mapOf(mapOf(at["properties"])[name]))
		if err != nil || schema == nil {
			t.Errorf("%s is not in the document: %v", f.Name, err)
			continue
		}
		found++
		var words []any
		for _, w := range f.Words {
			words = append(words, w.Word)
		}
		for _, n := range f.Numbers {
			words = append(words, float64(n))
		}
		enum, _ := schema["enum"].([]any)
		if len(enum) != len(words) {
			t.Errorf("%s: the document has %v, want %v", f.Name, enum, words)
		}
		for i := range min(len(enum), len(words)) {
			if enum[i] != words[i] {
				t.Errorf("%s: the document has %v, want %v", f.Name, enum, words)
			}
		}
		if f.Low < f.High && (schema["minimum"] != f.Low || schema["maximum"] != f.High) {
			t.Errorf("%s: the document has %v to %v, want %s", f.Name, schema["minimum"], schema["maximum"], f.Allowed())
		}
	}
	if found < 30 {
		t.Errorf("only %d fields", found)
	}
}
