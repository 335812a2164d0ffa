package command

import (
	"bytes"
	"context"
	"encoding/json"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"

	"github.com/alecthomas/kong"
)

// Real music from Debian's asc-music.
const realMusic = "/usr/share/games/asc/music/time_to_strike.mp3"

// run calls the program as a shell would.
func run(t *testing.T, args ...string) (code int, stdout, stderr string) {
	t.Helper()
	var out, errs bytes.Buffer
	code = Run(context.Background(), args, &out, &errs)
	return code, out.String(), errs.String()
}

// excerpt writes some seconds of real music in the format the name says.
func excerpt(t *testing.T, path string, args ...string) string {
	t.Helper()
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		t.Fatal(err)
	}
	args = append([]string{"-nostdin", "-v", "error", "-y", "-ss", "30", "-t", "6", "-i", realMusic}, append(args, path)...)
	if out, err := exec.Command("ffmpeg", args...).CombinedOutput(); err != nil {
		t.Fatalf("ffmpeg: %v\n%s(the tests need Debian's ffmpeg and asc-music: see 'make test')", err, out)
	}
	return path
}

func write(t *testing.T, path, content string) string {
	t.Helper()
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(path, []byte(content), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

func TestWrongUsageIsTwo(t *testing.T) {
	dir := t.TempDir()
	song := excerpt(t, filepath.Join(dir, "in", "song.wav"))
	for name, args := range map[string][]string{
		"no command":             {},
		"no such option":         {"measure", "--no-such-thing", song},
		"no path":                {"measure"},
		"an empty folder":        {"measure", t.TempDir()},
		"no such profile":        {"level", "--profile", "nobody", "--out", filepath.Join(dir, "out"), song},
		"out inside the source":  {"level", "--profile", "rotation", "--out", filepath.Join(dir, "in", "out"), filepath.Join(dir, "in")},
		"out is the source":      {"level", "--profile", "rotation", "--out", filepath.Join(dir, "in"), filepath.Join(dir, "in")},
		"reachable from outside": {"serve", "--listen", "0.0.0.0:0", "--data", t.TempDir()},
	} {
		if code, _, stderr := run(t, args...); code != exitUsage || stderr == "" {
			t.Errorf("%s: exit code %d, %q; want 2 and a word why", name, code, stderr)
		}
	}
}

// A codec that was asked for by name and cannot be run is an error, not a reason to do without in silence.
func TestFFmpegThatCannotRunIsSaid(t *testing.T) {
	path := write(t, filepath.Join(t.TempDir(), "ffmpeg"), "not a program")
	if code, _, stderr := run(t, "--ffmpeg", path, "version"); code != exitSome || !strings.Contains(stderr, path) {
		t.Errorf("exit code %d, %q", code, stderr)
	}
}

func TestHelpNamesEveryCommand(t *testing.T) {
	code, out, _ := run(t, "--help")
	if code != exitFine {
		t.Errorf("exit code %d", code)
	}
	for _, command := range []string{"serve", "measure", "level", "runs", "restore", "profiles", "try", "version"} {
		if !regexp.MustCompile(`(?m)^  ` + command + `\b`).MatchString(out) {
			t.Errorf("--help does not name %s", command)
		}
	}
}

func TestMeasureReadsWhatItCanAndSaysWhatItCannot(t *testing.T) {
	dir := t.TempDir()
	excerpt(t, filepath.Join(dir, "a.wav"))
	excerpt(t, filepath.Join(dir, "deep", "b.mp3"))
	write(t, filepath.Join(dir, "c.mp3"), "no sound in here\n")
	write(t, filepath.Join(dir, "notes.txt"), "not a recording\n")
	code, out, stderr := run(t, "measure", "--json", dir)
	if code != exitSome || !strings.Contains(stderr, "1 of 3") {
		t.Errorf("exit code %d, %q; want 1 and the count", code, stderr)
	}
	lines := strings.Split(strings.TrimSpace(out), "\n")
	if len(lines) != 3 {
		t.Fatalf("%d lines for 3 recordings:\n%s", len(lines), out)
	}
	for _, line := range lines {
		var m map[string]any
		if err := json.Unmarshal([]byte(line), &m); err != nil {
			t.Fatal(err)
		}
		for _, field := range []string{"path", "format", "sample_rate_hz", "channels", "frames", "duration_s", "integrated_lufs",
			"loudness_range_lu", "max_momentary_lufs", "max_short_term_lufs", "true_peak_dbtp", "sample_peak_dbfs", "plr_lu",
			"min_psr_lu", "rms_dbfs", "crest_factor_db", "noise_floor_lufs", "mono_rule", "head_silence_s", "tail_silence_s", "correlation",
			"balance_db", "dc_offset", "active_s", "speech_s", "speech_lufs", "decoder", "faults", "error"} {
			if _, ok := m[field]; !ok {
				t.Errorf("%v has no field %s", m["path"], field)
			}
		}
		path := m["path"].(string)
		if broken := strings.HasSuffix(path, "c.mp3"); broken != (m["error"] != nil) || broken != (m["integrated_lufs"] == nil) || broken != (m["faults"] == nil) {
			t.Errorf("%s: error %v, integrated %v, faults %v", path, m["error"], m["integrated_lufs"], m["faults"])
		} else if broken && !strings.Contains(m["error"].(string), "c.mp3") {
			t.Errorf("the error does not name the file: %v", m["error"])
		}
	}
}

// A path that leads nowhere stands in nobody's way, and is told once, by its name.
func TestPathsThatLeadNowhere(t *testing.T) {
	dir := t.TempDir()
	song, gone := excerpt(t, filepath.Join(dir, "a.wav")), filepath.Join(dir, "gone.wav")
	code, out, stderr := run(t, "measure", gone, song)
	if code != exitSome || !strings.HasPrefix(out, "could not be read: "+gone+": no such file or directory\n") || !strings.Contains(out, " LUFS ") || !strings.Contains(stderr, "1 of 2") {
		t.Errorf("measure: exit code %d\n%s%s", code, out, stderr)
	}
	code, out, stderr = run(t, "level", "--profile", "rotation", "--out", filepath.Join(dir, "out"), gone, gone, song)
	if code != exitSome || strings.Count(out, "failed  "+gone+": no such file or directory\n") != 2 || !strings.Contains(out, "done ") {
		t.Errorf("level: exit code %d\n%s%s", code, out, stderr)
	}
}

// A figure that is not defined is null: a silent file and one too short for a gating block.
func TestUndefinedFiguresAreNull(t *testing.T) {
	dir := t.TempDir()
	for name, filter := range map[string]string{"silent.wav": "anullsrc=d=2", "short.wav": "sine=d=0.2"} {
		path := filepath.Join(dir, name)
		if out, err := exec.Command("ffmpeg", "-nostdin", "-v", "error", "-f", "lavfi", "-i", filter, path).CombinedOutput(); err != nil {
			t.Fatalf("ffmpeg: %v\n%s", err, out)
		}
		_, out, _ := run(t, "measure", "--json", path)
		var m map[string]any
		if err := json.Unmarshal([]byte(out), &m); err != nil {
			t.Fatal(err)
		}
		if m["integrated_lufs"] != nil || m["loudness_range_lu"] != nil || m["plr_lu"] != nil || m["speech_lufs"] != nil {
			t.Errorf("%s: %s", name, out)
		}
	}
}

func TestLevelMirrorsTheTreeAndKeepsOriginals(t *testing.T) {
	dir, out := t.TempDir(), t.TempDir()
	original := excerpt(t, filepath.Join(dir, "a.wav"))
	excerpt(t, filepath.Join(dir, "deep", "er", "b.flac"))
	write(t, filepath.Join(dir, "broken.flac"), "fLaC but not really")
	before, _ := os.ReadFile(original)
	code, stdout, _ := run(t, "level", "--profile", "rotation", "--out", out, "--json", dir)
	if code != exitSome {
		t.Errorf("exit code %d, want 1 since one is broken", code)
	}
	states := map[string]string{}
	for _, line := range strings.Split(strings.TrimSpace(stdout), "\n") {
		var r struct {
			Path, State, Reason string
			Output              *string
			Before, After       map[string]any
			Gain                *float64 `json:"gain_db"`
		}
		if err := json.Unmarshal([]byte(line), &r); err != nil {
			t.Fatal(err)
		}
		rel, _ := filepath.Rel(dir, r.Path)
		states[rel] = r.State
		if r.State == "failed" {
			if r.Reason == "" || r.Output != nil {
				t.Errorf("%s failed with reason %q and output %v", rel, r.Reason, r.Output)
			}
			continue
		}
		if *r.Output != filepath.Join(out, rel) {
			t.Errorf("%s went to %s", rel, *r.Output)
		}
		if _, err := os.Stat(*r.Output); err != nil {
			t.Error(err)
		}
	}
	if states["a.wav"] != "done" || states["deep/er/b.flac"] != "done" || states["broken.flac"] != "failed" {
		t.Errorf("states: %v", states)
	}
	if after, _ := os.ReadFile(original); !bytes.Equal(before, after) {
		t.Error("the original was changed")
	}
	// A second time the copies are there: nothing is replaced unless asked for.
	if code, stdout, _ := run(t, "level", "--profile", "rotation", "--out", out, original); code != exitSome || !strings.Contains(stdout, "already there") {
		t.Errorf("exit code %d: %s", code, stdout)
	}
	if code, stdout, _ := run(t, "level", "--profile", "rotation", "--out", out, "--overwrite", original); code != exitFine {
		t.Errorf("with --overwrite: exit code %d: %s", code, stdout)
	}
}

// The same names in three places, the more deliberate one winning: command line, environment, file.
func TestOptionsFromThreePlaces(t *testing.T) {
	file := write(t, filepath.Join(t.TempDir(), "evenshelf.toml"), "data = '/from/file'\nworkers = 3\nlog-level = 'warn'\n"+
		"shelf = { radio = '/srv/radio', old = '/srv/old' }\nshelf-roots = ['/srv', '/mnt']\n")
	parse := func(args ...string) cli {
		t.Helper()
		var c cli
		parser, err := newParser(&c, new(bytes.Buffer), new(bytes.Buffer), func(int) {})
		if err != nil {
			t.Fatal(err)
		}
		if _, err := parser.Parse(append(args, "serve")); err != nil {
			t.Fatal(err)
		}
		return c
	}
	c := parse("--config", file)
	if c.Data != "/from/file" || c.Workers != 3 {
		t.Errorf("from the file: data %q, workers %d", c.Data, c.Workers)
	}
	if len(c.Serve.Shelf) != 2 || c.Serve.Shelf["old"] != "/srv/old" || !slices.Equal(c.Serve.ShelfRoots, []string{"/srv", "/mnt"}) {
		t.Errorf("from the file: shelves %v, roots %v", c.Serve.Shelf, c.Serve.ShelfRoots)
	}
	t.Setenv("EVENSHELF_CONFIG", file)
	if c := parse(); c.Workers != 3 {
		t.Errorf("a file named in the environment is not read: workers %d", c.Workers)
	}
	t.Setenv("EVENSHELF_DATA", "/from/environment")
	if c := parse("--config", file); c.Data != "/from/environment" || c.Workers != 3 {
		t.Errorf("the environment does not go before the file: data %q, workers %d", c.Data, c.Workers)
	}
	if c := parse("--config", file, "--data", "/from/option"); c.Data != "/from/option" {
		t.Errorf("the command line does not go before the environment: data %q", c.Data)
	}
	misspelt := write(t, filepath.Join(t.TempDir(), "bad.toml"), "wrokers = 3\n")
	if code, _, stderr := run(t, "--config", misspelt, "version"); code != exitUsage || !strings.Contains(stderr, "wrokers") {
		t.Errorf("a misspelt option in the file: exit code %d, %q", code, stderr)
	}
}

// Files that name options outside Go code: each name has to be one the program has.
func TestFilesNameRealOptions(t *testing.T) {
	var c cli
	parser, err := newParser(&c, new(bytes.Buffer), new(bytes.Buffer), func(int) {})
	if err != nil {
		t.Fatal(err)
	}
	real := map[string]bool{}
	_ = kong.Visit(parser.Model, func(n kong.Visitable, next kong.Next) error {
		if f, ok := n.(*kong.Flag); ok {
			for _, env := range f.Envs {
				real[env] = true
			}
		}
		return next(nil)
	})
	real["EVENSHELF_MUSIC"] = true // a folder's name in docker-compose.yml, not an option
	found := 0
	for _, file := range []string{"Dockerfile", "docker-compose.yml", "README.md", "DEVELOPERS.md"} {
		b, err := os.ReadFile(filepath.Join("..", file))
		if err != nil {
			t.Fatal(err)
		}
		for _, name := range regexp.MustCompile(`\bEVENSHELF_[A-Z_]+\b`).FindAllString(string(b), -1) {
			if found++; !real[name] {
				t.Errorf("%s names %s, which is no option", file, name)
			}
		}
	}
	if found < 5 {
		t.Errorf("only %d names found: is the test looking in the right place?", found)
	}
}
