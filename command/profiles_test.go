package command

import (
	"bytes"
	"encoding/json"
	"log/slog"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/profile"
)

// lonely runs the program without the profiles of whoever runs the tests.
func lonely(t *testing.T, args ...string) (code int, stdout, stderr string) {
	t.Helper()
	return run(t, append([]string{"--data", t.TempDir()}, args...)...)
}

func TestProfilesAreListed(t *testing.T) {
	code, out, stderr := lonely(t, "profiles")
	if code != exitFine || stderr != "" || strings.Count(out, "\n") != len(profile.Builtin()) {
		t.Errorf("exit code %d, %q:\n%s", code, stderr, out)
	}
	for _, p := range profile.Builtin() {
		if !strings.Contains(out, p.Name+" ") || !strings.Contains(out, "built-in  "+p.Summary) {
			t.Errorf("%s is not in\n%s", p.Name, out)
		}
	}
	data := t.TempDir()
	write(t, filepath.Join(data, "profiles", "villages.toml"), "based_on = 'film'\nsummary = 'Films of the village archive.'\n")
	bad := write(t, filepath.Join(data, "profiles", "broken.toml"), "based_on = 'film'\nride.lift_db = 99\n")
	code, out, stderr = run(t, "--data", data, "profiles")
	if code != exitSome || !strings.Contains(out, "Films of the village archive.") || !strings.Contains(out, "rotation") ||
		!strings.Contains(stderr, bad+": ride.lift_db: 99 is not between 0 and 40 (line 2)") {
		t.Errorf("exit code %d, %q:\n%s", code, stderr, out)
	}
	// A folder that is named goes before the one in the data folder, in each of the ways to name it.
	other := t.TempDir()
	write(t, filepath.Join(other, "bells.toml"), "based_on = 'concert'")
	check := func(args ...string) {
		t.Helper()
		code, out, _ := run(t, append([]string{"--data", data}, args...)...)
		if code != exitFine || !strings.Contains(out, "bells ") || strings.Contains(out, "villages") {
			t.Errorf("%v: exit code %d:\n%s", args, code, out)
		}
	}
	check("--profiles", other, "profiles")
	check("--config", write(t, filepath.Join(t.TempDir(), "options.toml"), "profiles = '"+other+"'\n"), "profiles")
	t.Setenv("EVENSHELF_PROFILES", other)
	check("profiles")
	t.Setenv("EVENSHELF_PROFILES", filepath.Join(other, "gone"))
	if code, _, stderr := run(t, "profiles"); code != exitUsage || !strings.Contains(stderr, "gone is not a folder") {
		t.Errorf("exit code %d, %q", code, stderr)
	}
}

func TestProfilesAreShown(t *testing.T) {
	code, out, _ := lonely(t, "profiles", "talk")
	if code != exitFine || !strings.HasPrefix(out, "talk (built-in; version ") || !strings.Contains(out, "\nHeld for you when\n  ") ||
		!strings.Contains(out, "  Speech is brought to −16 LUFS") {
		t.Errorf("exit code %d:\n%s", code, out)
	}
	if code, _, stderr := lonely(t, "profiles", "nobody"); code != exitUsage || !strings.Contains(stderr, `no such profile: "nobody"; there are concert`) {
		t.Errorf("exit code %d, %q", code, stderr)
	}
	code, out, _ = lonely(t, "profiles", "--json")
	lines := strings.Split(strings.TrimSpace(out), "\n")
	if code != exitFine || len(lines) != len(profile.Builtin()) {
		t.Errorf("exit code %d:\n%s", code, out)
	}
	for i, line := range lines {
		var got profile.Described
		if err := json.Unmarshal([]byte(line), &got); err != nil || got.Profile != profile.Builtin()[i] || got.Source != profile.BuiltIn || got.Words == nil {
			t.Errorf("%v in %s", err, line)
		}
	}
	if code, _, stderr := lonely(t, "profiles", "--toml"); code != exitUsage || !strings.Contains(stderr, "--toml needs") {
		t.Errorf("exit code %d, %q", code, stderr)
	}
}

// What --toml prints is a profile at once: saved under a name it checks well, is shown, and does the same.
func TestProfileOfOnesOwnStartsFromTOML(t *testing.T) {
	_, out, _ := lonely(t, "profiles", "film", "--toml")
	file := write(t, filepath.Join(t.TempDir(), "villages.toml"), out)
	code, out, _ := lonely(t, "profiles", "check", file)
	if code != exitFine || !strings.HasPrefix(out, file+": fine: profile villages, version ") {
		t.Errorf("exit code %d: %s", code, out)
	}
	_, builtIn, _ := lonely(t, "profiles", "film")
	code, own, _ := lonely(t, "profiles", file)
	_, want, _ := strings.Cut(builtIn, "\n")
	head, got, _ := strings.Cut(own, "\n")
	if code != exitFine || got != want || !strings.HasPrefix(head, "villages (own, villages.toml; version ") {
		t.Errorf("exit code %d:\n%s", code, own)
	}
}

func TestProfilesAreChecked(t *testing.T) {
	dir := t.TempDir()
	good := write(t, filepath.Join(dir, "good.toml"), "based_on = 'talk'\n")
	bad := write(t, filepath.Join(dir, "bad.toml"), "based_on = 'talk'\ntarget_lufs = 3\n[ride]\nlift = 5\n\"\\u001b[31m\" = 1\n")
	gone := filepath.Join(dir, "gone.toml")
	code, out, stderr := lonely(t, "profiles", "check", good, bad, gone)
	for _, line := range []string{
		good + ": fine: ",
		bad + ": target_lufs: 3 is not between -40 and -8 (line 2)\n",
		bad + ": ride.lift: is not a field of a profile; did you mean ride.lift_db or harm.lift_db? (line 4)\n",
		gone + ": no such file or directory\n",
	} {
		if !strings.Contains(out, line) {
			t.Errorf("%q is not in\n%s", line, out)
		}
	}
	if code != exitSome || !strings.Contains(stderr, "2 of 3") || strings.Contains(out, "\x1b") {
		t.Errorf("exit code %d, %q:\n%s", code, stderr, out)
	}
	if code, _, _ := lonely(t, "profiles", "check"); code != exitUsage {
		t.Errorf("without a file: exit code %d", code)
	}
}

func TestProfileFieldsAreExplained(t *testing.T) {
	code, out, _ := lonely(t, "profiles", "explain", "ride.deadband_db")
	if code != exitFine || !strings.HasPrefix(out, "ride.deadband_db\nWhat is no further") || !strings.Contains(out, "0 to 20 dB") ||
		!strings.Contains(out, "else 0 dB") || !strings.Contains(out, "in concert") {
		t.Errorf("exit code %d:\n%s", code, out)
	}
	for _, f := range profile.Fields() {
		if code, out, _ := lonely(t, "profiles", "explain", f.Name); code != exitFine || !strings.Contains(out, f.Allowed()) {
			t.Errorf("%s: exit code %d:\n%s", f.Name, code, out)
		}
	}
	if code, out, _ := lonely(t, "profiles", "explain"); code != exitFine || strings.Count(out, "\n") != len(profile.Fields()) {
		t.Errorf("exit code %d:\n%s", code, out)
	}
	if code, _, stderr := lonely(t, "profiles", "explain", "deadband_db"); code != exitUsage || !strings.Contains(stderr, "did you mean ride.deadband_db?") {
		t.Errorf("exit code %d, %q", code, stderr)
	}
}

func TestLevelTakesAProfileOfOnesOwn(t *testing.T) {
	dir := t.TempDir()
	song := excerpt(t, filepath.Join(dir, "in", "song.wav"))
	file := write(t, filepath.Join(dir, "quiet.toml"), "based_on = 'untouched'\ntarget_lufs = -31\n")
	code, out, stderr := lonely(t, "level", "--profile", file, "--out", filepath.Join(dir, "a"), "--json", song)
	var r struct{ After map[string]any }
	if err := json.Unmarshal([]byte(out), &r); err != nil || code != exitFine {
		t.Fatalf("exit code %d, %v: %s%s", code, err, out, stderr)
	}
	if got, ok := r.After["integrated_lufs"].(float64); !ok || got < -31.3 || got > -30.7 { // the profile's tolerance
		t.Errorf("came out at %v LUFS, want −31 ± 0.3", r.After["integrated_lufs"])
	}
	if code, _, stderr := lonely(t, "--profiles", dir, "level", "--profile", "quiet", "--out", filepath.Join(dir, "b"), song); code != exitFine {
		t.Errorf("by name: exit code %d, %s", code, stderr)
	}
	if err := os.WriteFile(file, []byte("based_on = 'untouched'\ntarget_lufs = 31\n"), 0o644); err != nil {
		t.Fatal(err)
	}
	for _, name := range []string{file, "quiet"} {
		code, _, stderr := lonely(t, "--profiles", dir, "level", "--profile", name, "--out", filepath.Join(dir, "c"), song)
		if code != exitUsage || !strings.Contains(stderr, "target_lufs: 31 is not between -40 and -8") {
			t.Errorf("%s: exit code %d, %q", name, code, stderr)
		}
	}
}

// A server reads the folder for each request, also one that was not there at its start, and tells of a bad file once.
func TestServerReadsProfilesAnew(t *testing.T) {
	var log bytes.Buffer
	a := &app{cli: &cli{Data: t.TempDir()}, log: slog.New(slog.NewTextHandler(&log, nil))}
	profiles := a.watchedProfiles()
	has := func(name string) bool { _, err := profiles().Named(name); return err == nil }
	if has("villages") || !has("rotation") || log.Len() > 0 {
		t.Errorf("without a folder: %s", &log)
	}
	file := write(t, filepath.Join(a.Data, "profiles", "villages.toml"), "based_on = 'talk'\n")
	if !has("villages") {
		t.Error("a new file is not among the profiles")
	}
	write(t, file, "based_on = 'talk'\nride.lift_db = 99\n")
	for range 3 {
		if has("villages") || !has("rotation") {
			t.Error("a bad file is used, or hides the others")
		}
	}
	if n := strings.Count(log.String(), "ride.lift_db: 99 is not between 0 and 40"); n != 1 || !strings.Contains(log.String(), "file=villages.toml") {
		t.Errorf("told %d times:\n%s", n, &log)
	}
	write(t, file, "based_on = 'talk'\n")
	if !has("villages") {
		t.Error("a mended file is not among the profiles")
	}
	if code, _, stderr := lonely(t, "--profiles", filepath.Join(a.Data, "gone"), "serve", "--listen", "127.0.0.1:0"); code != exitUsage || !strings.Contains(stderr, "gone is not a folder") {
		t.Errorf("exit code %d, %q", code, stderr)
	}
}

// What README.md says of profiles: its table has the figures of the built-in ones, and its example can be used.
func TestReadmeKnowsTheProfiles(t *testing.T) {
	b, err := os.ReadFile(filepath.Join("..", "README.md"))
	if err != nil {
		t.Fatal(err)
	}
	for _, p := range profile.Builtin() {
		row := regexp.MustCompile("(?m)^\\| `" + p.Name + "` \\|.*$").FindString(string(b))
		says := []string{audio.Number(float64(p.Target), 0) + " LUFS"}
		if p.Ride.Speed != profile.Still {
			says = append(says, string(p.Ride.Speed), audio.Number(float64(p.Ride.Range), 0)+" LU")
		}
		if p.Anchor == profile.Programme && p.Ride.Speed != profile.Still {
			says = append(says, "the programme to")
		}
		for _, s := range says {
			if !strings.Contains(row, s) {
				t.Errorf("%s: %q is not in %q", p.Name, s, row)
			}
		}
	}
	example := regexp.MustCompile(`(?m)^    based_on[^\n]*\n(?:(?:    .*)?\n)*?\n    evenshelf`).FindString(string(b))
	text := strings.TrimSuffix(strings.ReplaceAll(strings.ReplaceAll(example, "\n    ", "\n"), "    based_on", "based_on"), "evenshelf")
	p, err := profile.Parse("evening-tales", []byte(text))
	if err != nil || p.Target != -20 || p.Ride.Silence != 2 {
		t.Errorf("%+v, %v from\n%s", p, err, text)
	}
}
