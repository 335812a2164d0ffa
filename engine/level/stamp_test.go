package level

import (
	"encoding/json"
	"math"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
)

// A broadcast wave (made by FFmpeg, version 1, without figures) comes out with those of its own reading after levelling,
// in hundredths, and a line in its history that says by what; FFmpeg's meter agrees with the first to a tenth.
func TestBroadcastWaveIsStamped(t *testing.T) {
	dir := t.TempDir()
	source := excerpt(t, dir, "source.wav", 0.1, "-c:a", "pcm_s24le", "-write_bext", "1", "-metadata", "description=Evening music",
		"-metadata", "coding_history=A=ANALOGUE,M=stereo,T=Tape\r\n")
	copied := filepath.Join(dir, "copy.wav")
	o := levelInto(t, "rotation", source, copied)
	out, err := exec.Command("/usr/bin/python3", "-c", `
import json, struct, sys
b = open(sys.argv[1], "rb").read()
at = b.index(b"bext")
n, = struct.unpack("<I", b[at+4:at+8])
print(json.dumps({"version": struct.unpack("<H", b[at+354:at+356])[0], "figures": struct.unpack("<5h", b[at+420:at+430]),
  "history": b[at+610:at+8+n].decode().rstrip("\0"), "description": b[at+8:at+264].decode().rstrip("\0")}))`, copied).Output()
	if err != nil {
		t.Fatal(err)
	}
	var got struct {
		Version              int
		Figures              [5]float64
		History, Description string
	}
	if err := json.Unmarshal(out, &got); err != nil {
		t.Fatal(err)
	}
	a := o.After
	for i, want := range []float64{float64(a.Integrated), float64(a.Range), float64(a.TruePeak), float64(a.MaxMomentary), float64(a.MaxShortTerm)} {
		if got.Figures[i] != math.Round(100*want) {
			t.Errorf("figure %d is %g, read was %g", i, got.Figures[i], want)
		}
	}
	if i, _ := secondOpinion(t, copied); math.Abs(float64(i)-got.Figures[0]/100) > 0.1 {
		t.Errorf("FFmpeg's meter reads %.1f LUFS, bext says %.2f", i, got.Figures[0]/100)
	}
	if want := "A=ANALOGUE,M=stereo,T=Tape\r\nA=PCM,F=44100,W=24,M=stereo,T=Evenshelf engine " + Version + "; rotation\r\n"; got.History != want {
		t.Errorf("history %q, want %q", got.History, want)
	}
	if got.Version != 2 || got.Description != "Evening music" {
		t.Errorf("version %d, description %q", got.Version, got.Description)
	}
}

// A delivery that replaces its original needs the very extension: one of AIFF's three stays.
func TestExtensionStays(t *testing.T) {
	dir := t.TempDir()
	for _, name := range []string{"a.aif", "b.aiff"} {
		source := excerpt(t, dir, name, 0.1, "-f", "aiff", "-c:a", "pcm_s16be")
		o := levelInto(t, "rotation", source, filepath.Join(dir, "copy"))
		if o.Extension != filepath.Ext(name) || !strings.HasPrefix(o.After.Decoder, "evenshelf aiff") || o.After.FormatName != "aiff" {
			t.Errorf("%s: %q, decoded by %q", name, o.Extension, o.After.Decoder)
		}
	}
}
