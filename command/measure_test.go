package command

import (
	"encoding/json"
	"math"
	"os/exec"
	"path/filepath"
	"reflect"
	"strings"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/faults"
	"evenshelf/engine/level"
)

// tone makes one channel of a 997 Hz sine whose peaks reach −20 dBFS.
func tone(t *testing.T) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "tone.wav")
	if out, err := exec.Command("ffmpeg", "-nostdin", "-v", "error", "-f", "lavfi", "-i", "aevalsrc=0.1*sin(2*PI*997*t):d=4:s=48000",
		"-c:a", "pcm_s24le", path).CombinedOutput(); err != nil {
		t.Fatalf("ffmpeg: %v\n%s", err, out)
	}
	return path
}

func measureJSON(t *testing.T, args ...string) (m map[string]any) {
	t.Helper()
	code, out, stderr := run(t, append([]string{"measure", "--json"}, args...)...)
	if code != exitFine {
		t.Fatalf("exit code %d, %s", code, stderr)
	}
	if err := json.Unmarshal([]byte(out), &m); err != nil {
		t.Fatal(err)
	}
	return m
}

// BS.1770-5: a 997 Hz sine at 0 dBFS in one channel reads −3.01 LKFS; from two loudspeakers the power is twice that.
func TestMonoRule(t *testing.T) {
	path := tone(t)
	for rule, want := range map[string]float64{"": -23.01, "one-channel": -23.01, "two-loudspeakers": -20} {
		args, said := []string{path}, "one-channel"
		if rule != "" {
			args, said = append(args, "--mono", rule), rule
		}
		m := measureJSON(t, args...)
		if got := m["integrated_lufs"].(float64); math.Abs(got-want) > 0.01 || m["mono_rule"] != said {
			t.Errorf("--mono %q: %.3f LUFS by rule %v, want %.2f", rule, got, m["mono_rule"], want)
		}
	}
	if code, _, stderr := run(t, "measure", "--mono", "both-ears", path); code != exitUsage || !strings.Contains(stderr, "two-loudspeakers") {
		t.Errorf("an unknown rule: exit code %d, %q; want 2 and the rules there are", code, stderr)
	}
	if _, out, _ := run(t, "measure", "--details", "--mono", "two-loudspeakers", path); !strings.Contains(out, "its channel is counted as two loudspeakers play it") {
		t.Errorf("the details do not say how the channel was counted:\n%s", out)
	}
}

// Every field is there whatever was asked for; what was not looked for is null, which is not the same as none.
func TestLoudnessOnly(t *testing.T) {
	path := tone(t)
	all, only := measureJSON(t, path), measureJSON(t, "--loudness-only", path)
	for name, v := range all {
		got, ok := only[name]
		switch name {
		case "faults", "active_s", "speech_s", "speech_lufs", "head_silence_s", "tail_silence_s", "correlation", "balance_db", "dc_offset":
			if got != nil || !ok {
				t.Errorf("%s is %v (there: %v), want null", name, got, ok)
			}
		default:
			if !reflect.DeepEqual(got, v) {
				t.Errorf("%s is %v, want %v", name, got, v)
			}
		}
	}
	if all["faults"] == nil || all["active_s"] == nil {
		t.Errorf("with everything looked for: faults %v, active_s %v", all["faults"], all["active_s"])
	}
	if _, out, _ := run(t, "measure", "--details", "--loudness-only", path); strings.Count(out, "not looked for") != 2 {
		t.Errorf("the details do not say twice that something was not looked for:\n%s", out)
	}
}

func TestDetailsOrJSON(t *testing.T) {
	if code, _, stderr := run(t, "measure", "--details", "--json", tone(t)); code != exitUsage || stderr == "" {
		t.Errorf("exit code %d, %q; want 2 and a word why", code, stderr)
	}
}

// figures returns every figure of an analysis by its name in JSON, so that a test can change it.
func figures(a *level.Analysis) map[string]reflect.Value {
	found := map[string]reflect.Value{}
	for _, part := range []any{&a.Reading, &a.Condition, &a.Dialogue} {
		v := reflect.ValueOf(part).Elem()
		for i := range v.NumField() {
			if v.Field(i).CanFloat() {
				found[v.Type().Field(i).Tag.Get("json")] = v.Field(i)
			}
		}
	}
	return found
}

// A figure that is measured and not shown would be of no use to anybody at a terminal.
func TestDetailsShowEveryFigure(t *testing.T) {
	a := level.Analysis{Faults: []faults.Fault{}}
	for _, v := range figures(&a) {
		v.SetFloat(10)
	}
	shown := details(&a)
	if len(figures(&a)) < 23 {
		t.Fatalf("only %d figures found", len(figures(&a)))
	}
	for name, v := range figures(&a) {
		for _, other := range []float64{7, audio.Undefined} {
			v.SetFloat(other)
			if details(&a) == shown {
				t.Errorf("%s is not shown: %g reads as 10", name, other)
			}
		}
		v.SetFloat(10)
	}
}

// The plain line tells of speech where there is some, and keeps quiet where there is none.
func TestLineTellsOfSpeech(t *testing.T) {
	a := level.Unmeasured()
	if got := spoken(&a); got != "" {
		t.Errorf("without speech: %q", got)
	}
	a.ActiveTime, a.SpeechTime = 200, 0.8 // too little to have a loudness
	if got := spoken(&a); got != "" {
		t.Errorf("a word between songs: %q", got)
	}
	if got := details(&a); !strings.Contains(got, "0:00.8  (under 1 %)") || strings.Contains(got, "no speech") {
		t.Errorf("the details of a word between songs:\n%s", got)
	}
	a.ActiveTime, a.SpeechTime, a.SpeechLoudness = 100, 84.4, -22.44
	if got := spoken(&a); got != "  (speech: 84 %, −22.4 LUFS)" {
		t.Errorf("got %q", got)
	}
}
