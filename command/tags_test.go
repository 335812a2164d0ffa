package command

import (
	"bytes"
	"encoding/json"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"evenshelf/engine/media"
	"evenshelf/engine/tags"
)

// Gain tags go into the file itself; its original is in the attic first, bit for bit. A format that has none is left as it is.
func TestLevelWritesTags(t *testing.T) {
	for _, name := range []string{"song.flac", "song.wav"} {
		dir := t.TempDir()
		song, attic := excerpt(t, filepath.Join(dir, "in", name)), filepath.Join(dir, "attic")
		original, err := os.ReadFile(song)
		if err != nil {
			t.Fatal(err)
		}
		code, out, stderr := run(t, "level", "--delivery", "tags", "--group", "folder", "--attic", attic, filepath.Join(dir, "in"))
		now, err := os.ReadFile(song)
		if err != nil {
			t.Fatal(err)
		}
		var kept []string
		filepath.WalkDir(attic, func(p string, d os.DirEntry, err error) error {
			if err == nil && !d.IsDir() {
				kept = append(kept, p)
			}
			return nil
		})
		if media.Find().Retag(t.Context(), song, filepath.Join(dir, "try"), tags.Gains{}) != nil { // it has none
			if code != exitFine || !strings.Contains(out, "left as it is: there are no gain tags in WAV") || !bytes.Equal(now, original) || len(kept) > 0 {
				t.Errorf("%s: exit code %d, %s%s, kept %q", name, code, out, stderr, kept)
			}
			continue
		}
		if code != exitFine || !strings.Contains(out, "gain tags written") || bytes.Equal(now, original) || len(kept) != 1 {
			t.Fatalf("%s: exit code %d, %s%s, kept %q", name, code, out, stderr, kept)
		}
		if b, err := os.ReadFile(kept[0]); err != nil || !bytes.Equal(b, original) {
			t.Errorf("%s: the original in the attic is another: %v", name, err)
		}
		found, err := media.Find().Tags(t.Context(), song)
		if err != nil || found["replaygain_track_gain"] == "" || found["replaygain_album_gain"] != found["replaygain_track_gain"] {
			t.Errorf("%s: %v %v", name, found, err)
		}
		if code, out, _ := run(t, "level", "--delivery", "tags", "--group", "folder", "--attic", attic, song); code != exitFine || !strings.Contains(out, "right already") {
			t.Errorf("%s again: exit code %d, %s", name, code, out)
		}
	}
}

func TestTagsWrongUsage(t *testing.T) {
	dir := t.TempDir()
	in := filepath.Dir(excerpt(t, filepath.Join(dir, "in", "song.wav")))
	out, attic := filepath.Join(dir, "out"), filepath.Join(dir, "attic")
	for want, args := range map[string][]string{
		"--attic is needed":          {"--delivery", "tags"},
		"there is no --out":          {"--delivery", "tags", "--attic", attic, "--out", out},
		"has no dry run":             {"--delivery", "tags", "--attic", attic, "--dry-run"},
		"is inside":                  {"--delivery", "tags", "--attic", filepath.Join(in, "attic")},
		"mean nothing":               {"--delivery", "tags", "--attic", attic, "--format", "mp3"},
		"--profile is needed":        {"--out", out},
		"delivered.format":           {"--profile", "rotation", "--out", out, "--format", "tape"},
		"does not go with the group": {"--profile", "rotation", "--out", out, "--group", "album"},
	} {
		if code, _, stderr := run(t, append(append([]string{"level"}, args...), in)...); code != exitUsage || !strings.Contains(stderr, want) {
			t.Errorf("%q: exit code %d, %q, want %q", args, code, stderr, want)
		}
	}
	for _, path := range []string{out, attic} {
		if _, err := os.Stat(path); err == nil {
			t.Errorf("%s was made", path)
		}
	}
}

// What is asked for beside the profile comes out: a format and a bit rate, or one gain for an album.
func TestLevelWithWishes(t *testing.T) {
	dir := t.TempDir()
	in := filepath.Join(dir, "in")
	excerpt(t, filepath.Join(in, "x", "1.flac"), "-metadata", "album=One")
	excerpt(t, filepath.Join(in, "y", "2.flac"), "-metadata", "ALBUM=one", "-ss", "3")
	excerpt(t, filepath.Join(in, "y", "3.flac"), "-ss", "3")
	level := func(args ...string) map[string]float64 {
		t.Helper()
		args = append([]string{"level", "--json", "--profile", "untouched", "--out", filepath.Join(dir, args[1])}, args...)
		code, stdout, stderr := run(t, append(args, in)...)
		if code != exitFine {
			t.Fatalf("exit code %d\n%s%s", code, stdout, stderr)
		}
		gains := map[string]float64{}
		for line := range strings.Lines(stdout) {
			var r struct {
				Path, Output string
				After        struct{ Format string }
				Plan         struct {
					Gain float64 `json:"gain_db"`
				}
			}
			if err := json.Unmarshal([]byte(line), &r); err != nil {
				t.Fatal(err)
			}
			if r.After.Format != args[7] || strings.HasSuffix(r.Output, ".flac."+args[7]) == (args[7] == "flac") {
				t.Errorf("%s: %+v", args[7], r)
			}
			gains[filepath.Base(r.Path)] = r.Plan.Gain
		}
		return gains
	}
	if g := level("--format", "flac", "--group", "album"); g["1.flac"] != g["2.flac"] || g["3.flac"] == g["2.flac"] {
		t.Errorf("gains of an album: %v", g)
	}
	level("--format", "mp3", "--bit-rate", "96")
	rate, err := exec.Command("ffprobe", "-v", "error", "-show_entries", "stream=bit_rate", "-of", "csv=p=0", filepath.Join(dir, "mp3", "x", "1.flac.mp3")).Output()
	if err != nil || strings.TrimSpace(string(rate)) != "96000" {
		t.Errorf("ffprobe says %q %v", rate, err)
	}
}
