//go:build !race

package level

import (
	"encoding/binary"
	"fmt"
	"math"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/media"
	"evenshelf/engine/profile"
)

// lossyForms are lossy formats at bit rates from poor to good.
var lossyForms = map[string][]string{
	"64.mp3": {"-b:a", "64k"}, "128.mp3": {"-b:a", "128k"}, "320.mp3": {"-b:a", "320k"},
	"64.m4a": {"-c:a", "aac", "-b:a", "64k"}, "160.m4a": {"-c:a", "aac", "-b:a", "160k"},
	"64.opus": {"-ar", "48000", "-b:a", "64k"}, "128.opus": {"-ar", "48000", "-b:a", "128k"},
	"1.ogg": {"-c:a", "libvorbis", "-q:a", "1"}, "6.ogg": {"-c:a", "libvorbis", "-q:a", "6"},
}

// peaky makes a file of 12 s of real music, soft but for a swell of 18 dB every four seconds.
func peaky(t *testing.T, dir, name string, args ...string) string {
	t.Helper()
	const rate = 44100
	raw, _ := ffmpeg(t, nil, "-ss", "20", "-t", "12", "-i", music, "-f", "f32le", "-ar", "44100", "-ac", "2", "-")
	for i := 0; i < len(raw); i += 4 {
		gain := 0.05
		if at := i / 8 % (4 * rate); at < rate/6 {
			gain *= 1 + 7*math.Pow(math.Sin(math.Pi*float64(at)/(rate/6)), 2)
		}
		v := float64(math.Float32frombits(binary.LittleEndian.Uint32(raw[i:])))
		binary.LittleEndian.PutUint32(raw[i:], math.Float32bits(float32(v*gain)))
	}
	path := filepath.Join(dir, name)
	ffmpeg(t, raw, append(append([]string{"-f", "f32le", "-ar", "44100", "-ac", "2", "-i", "-"}, args...), path)...)
	return path
}

// Without dynamics a lossy copy goes as far as its peaks allow, by FFmpeg's own meter too, and says what is left.
func TestLossyCopiesReachTheCeiling(t *testing.T) {
	for name, args := range lossyForms {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			dir := t.TempDir()
			target := filepath.Join(dir, "copy"+filepath.Ext(name))
			o := levelInto(t, "untouched", peaky(t, dir, name, args...), target)
			_, peak := secondOpinion(t, target)
			left := -1 - peak
			if o.Verdict.State != Done || left < -0.1 || left > leastEncoded || !strings.Contains(o.Verdict.Reason, "short of the target") {
				t.Errorf("%d encodings, %.1f dBTP: %+v", o.Renders, peak, o.Verdict)
			}
			if left > 0.15 && !strings.Contains(o.Verdict.Reason, "but for") {
				t.Errorf("%.1f dB are left, which is not said: %s", left, o.Verdict.Reason)
			}
		})
	}
}

// What has been levelled is left as it is when it is levelled again, whatever an encoder did to it.
func TestLossyCopiesComeToRest(t *testing.T) {
	for _, p := range profile.Builtin() {
		for name, args := range lossyForms {
			if p.Name != "untouched" && !slices.Contains([]string{"128.mp3", "160.m4a", "64.opus", "6.ogg"}, name) {
				continue // these move more themselves than an encoder does
			}
			t.Run(fmt.Sprint(p.Name, " ", name), func(t *testing.T) {
				t.Parallel()
				dir := t.TempDir()
				first := filepath.Join(dir, "copy"+filepath.Ext(name))
				var source string
				if p.Name == "untouched" {
					source = peaky(t, dir, name, args...)
				} else {
					source = excerpt(t, dir, name, 0.3, args...)
				}
				o := levelInto(t, p.Name, source, first)
				if o.Verdict.State != Done || o.Renders == 0 {
					t.Fatalf("%+v", o.Verdict)
				}
				if again := levelInto(t, p.Name, first, filepath.Join(dir, "again")); !again.Plan.Untouched || again.Verdict.State != Done {
					t.Errorf("%s; at first %d encodings, %s", again.Plan.Reason, o.Renders, o.Plan.Reason)
				}
			})
		}
	}
}

// A copy whose peaks leave a little is not encoded again for that, and says what they leave; but where they leave
// more, or are not what keeps it from the target, it is. Worked by hand.
func TestLittleIsNotWorthAnotherEncoding(t *testing.T) {
	lossy := Encoder{Gain: -0.44, Over: 0.5, Least: 1}
	for _, c := range []struct {
		name    string
		before  *Analysis
		e       Encoder
		leaveIt bool
		words   string
	}{
		{"0.6 dB are left", reading(-24, -1.6), lossy, true, "but for 0.6 dB"},
		{"0.6 dB are left, and nothing is lost by them", reading(-24, -1.6), Encoder{}, false, "lift by 0.6 dB, as far"},
		{"nothing is left", reading(-24, -1.01), lossy, true, "as its peaks allow"},
		{"1.2 dB are left", reading(-24, -2.2), lossy, false, "lift by 1.6 dB"},
		{"0.8 LU are wanted, and there is room", reading(-18.8, -6), lossy, false, "lift by 1.2 dB"},
	} {
		plan, err := MakePlan(Task{Profile: named(t, "untouched")}, c.before, c.e)
		if err != nil || plan.Untouched != c.leaveIt || !strings.Contains(plan.Reason, c.words) || c.words == "as its peaks allow" && strings.Contains(plan.Reason, "but for") {
			t.Errorf("%s: untouched %v, %s, %v", c.name, plan.Untouched, plan.Reason, err)
		}
	}
}

// A peak that comes out too high lowers what is made next, also where the gain had left it room under the ceiling.
func TestPeaksThatTheEncoderRaised(t *testing.T) {
	p := named(t, "untouched")
	j := &turn{task: Task{Profile: p}, before: reading(-28, -11.5), most: 10.5, spec: media.Spec{Codec: "mp3"}}
	after := reading(-18, -0.8) // 0.7 dB more than foreseen
	next, more := j.again(Plan{Gain: 10, Aim: -18, Ceiling: -1}, after, 1)
	if want := audio.DB(9.7); !more || math.Abs(float64(next.Gain-want)) > 1e-9 {
		t.Errorf("%v, gain %v dB, want %v", more, next.Gain, want)
	}
}
