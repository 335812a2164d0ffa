package level

import (
	"math"
	"strings"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/faults"
	"evenshelf/engine/meter"
	"evenshelf/engine/profile"
)

func named(t testing.TB, name string) profile.Profile {
	t.Helper()
	p, err := profile.Named(name)
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func reading(integrated audio.LUFS, peak audio.DBTP) *Analysis {
	return &Analysis{Reading: meter.Reading{Integrated: integrated, TruePeak: peak, SamplePeak: audio.DBFS(peak), Duration: 60}}
}

// The arithmetic of a plan, worked by hand: gain = target − integrated, bounded by ceiling − peak + limiting.
func TestMakePlan(t *testing.T) {
	for _, c := range []struct {
		name, profile string
		before        *Analysis
		gain          audio.DB
		limit         bool
		untouched     bool
	}{
		{"quiet, peaks have room", "rotation", reading(-30, -14), 12, false, false},
		{"quiet, peaks are in the way", "rotation", reading(-30, -8), 12, true, false},
		{"too loud", "rotation", reading(-8, 0.5), -10, false, false},
		{"needs more limiting than allowed", "rotation", reading(-40, -10), 19, true, false},
		{"already there", "rotation", reading(-18.2, -1.5), 0, false, true},
		{"at the target, but over the ceiling", "rotation", reading(-18, -0.2), 0, true, false},
		{"no dynamics: stops at the ceiling", "untouched", reading(-30, -8), 7, false, false},
		{"no dynamics: room enough", "untouched", reading(-30, -14), 12, false, false},
		{"no dynamics: peaks at the ceiling already", "untouched", reading(-24, -1.02), 0, false, true},
		{"no dynamics: over the ceiling", "untouched", reading(-24, 1), -2, false, false},
	} {
		plan, err := MakePlan(Task{Profile: named(t, c.profile)}, c.before, Encoder{})
		if err != nil {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		if math.Abs(float64(plan.Gain-c.gain)) > 1e-9 || plan.Limit != c.limit || plan.Untouched != c.untouched {
			t.Errorf("%s: gain %.2f, limit %v, untouched %v; want %.2f, %v, %v",
				c.name, plan.Gain, plan.Limit, plan.Untouched, c.gain, c.limit, c.untouched)
		}
		if plan.Reason == "" {
			t.Errorf("%s: no reason in words", c.name)
		}
	}
}

// An encoder's gain is made up for and its overshoot kept clear of, worked by hand; what is within the profile is left
// alone all the same.
func TestMakePlanForAnEncoder(t *testing.T) {
	mp3 := Encoder{Gain: -0.44, Over: 0.5}
	for _, c := range []struct {
		name, profile  string
		before         *Analysis
		shared         *Shared
		gain           audio.DB
		aim            audio.LUFS
		limit, leaveIt bool
	}{
		{"room enough", "rotation", reading(-30, -20), nil, 12.44, -18, false, false},
		{"peaks come near the ceiling", "rotation", reading(-30, -13.8), nil, 12.44, -18, true, false},
		{"within", "rotation", reading(-18.2, -1.1), nil, 0, -18, false, true},
		{"no dynamics: the encoder moves peaks by its gain", "untouched", reading(-30, -8), nil, 7.44, -18, false, false},
		{"no dynamics: near enough to the ceiling already", "untouched", reading(-24, -1.04), nil, 0, -18, false, true},
		{"a gain shared with others", "untouched", reading(-30, -20), &Shared{Integrated: -28, TruePeak: -15}, 10.44, -20, false, false},
	} {
		plan, err := MakePlan(Task{Profile: named(t, c.profile), Shared: c.shared}, c.before, mp3)
		if err != nil || math.Abs(float64(plan.Gain-c.gain)) > 1e-9 || math.Abs(float64(plan.Aim-c.aim)) > 1e-9 || plan.Limit != c.limit || plan.Untouched != c.leaveIt {
			t.Errorf("%s: gain %.2f, aim %.2f, limit %v, untouched %v, %v", c.name, plan.Gain, plan.Aim, plan.Limit, plan.Untouched, err)
		}
	}
}

func TestNothingToLevelIsSaid(t *testing.T) {
	silent, short, faint := reading(audio.LUFS(audio.Undefined), 0), reading(audio.LUFS(audio.Undefined), -3), reading(audio.LUFS(audio.Undefined), -80)
	silent.SamplePeak = audio.DBFS(math.Inf(-1))
	short.Duration = 0.3
	for want, a := range map[string]*Analysis{"silent": silent, "too short": short, "louder than −70": faint} {
		if _, err := MakePlan(Task{Profile: named(t, "rotation")}, a, Encoder{}); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, want a reason with %q", err, want)
		}
	}
}

func TestJudge(t *testing.T) {
	rotation, untouched := named(t, "rotation"), named(t, "untouched")
	clipped := reading(-8, 0)
	clipped.Faults = []faults.Fault{{Code: "clipped", Severity: faults.Serious, Words: "clipped all over"}}
	noted := reading(-8, -1)
	noted.Faults = []faults.Fault{{Code: "dual-mono", Severity: faults.Note, Words: "both channels are the same"}}
	shorter := reading(-18, -1)
	shorter.Duration = 59
	for _, c := range []struct {
		name          string
		p             profile.Profile
		before, after *Analysis
		gain          audio.DB
		state         State
		words         string
	}{
		{"all well", rotation, reading(-30, -9), reading(-18.1, -1), 12, Done, ""},
		{"a note is no doubt", rotation, noted, reading(-18, -2), -10, Done, ""},
		{"damaged source", rotation, clipped, reading(-18, -10), -10, Held, "clipped all over"},
		{"lifted too far", rotation, reading(-60, -50), reading(-18, -6), 42, Held, "noise"},
		{"over the ceiling", rotation, reading(-30, -9), reading(-18, -0.8), 12, Held, "ceiling"},
		{"target missed", rotation, reading(-40, -10), reading(-20, -1), 19, Held, "could not be reached"},
		{"length changed", rotation, reading(-18, -1), shorter, 1, Held, "shorter or longer"},
		{"no loudness read back", rotation, reading(-18, -1), reading(audio.LUFS(audio.Undefined), -1), 1, Held, "could not be reached"},
		{"as far as peaks allow", untouched, reading(-30, -8), reading(-23, -1), 7, Done, "short of the target"},
		{"no dynamics, yet target missed with room to spare", untouched, reading(-30, -8), reading(-26, -4), 4, Held, "could not be reached"},
	} {
		r := rendering{Reading: c.after.Reading, anchored: c.after.Integrated}
		v := judge(c.p, c.before, Plan{Gain: c.gain, Aim: c.p.Target, Ceiling: c.p.Ceiling}, r, treatmentOf(c.before, r))
		if v.State != c.state || !strings.Contains(v.Reason, c.words) || (c.words == "") != (v.Reason == "") {
			t.Errorf("%s: %s, %q; want %s with %q", c.name, v.State, v.Reason, c.state, c.words)
		}
	}
}
