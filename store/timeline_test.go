package store

import (
	"math"
	"slices"
	"testing"

	"pgregory.net/rapid"

	"evenshelf/engine/level"
	"evenshelf/engine/meter"
	"evenshelf/engine/speech"
)

// tolTimeline is half a hundredth of a dB, plus what float32 cannot tell apart at 328 (2⁻¹⁶ · 2).
const tolTimeline = 0.005 + 2.0/(1<<16)

func TestTimelineKeepsItsPromise(t *testing.T) {
	special := []float32{float32(math.Inf(-1)), float32(math.NaN()), 0, -0.005, 0.005, 327.66, -327.66, -70, 12}
	rapid.Check(t, func(t *rapid.T) {
		value := rapid.OneOf(rapid.Float32Range(-327.66, 327.66), rapid.SampledFrom(special))
		n := rapid.IntRange(0, 300).Draw(t, "n")
		curve := rapid.SliceOfN(value, n, n)
		in := curves(curve.Draw(t, "momentary"), curve.Draw(t, "short-term"), curve.Draw(t, "peak"))
		packed, err := packLevels(in)
		if err != nil {
			t.Fatal(err)
		}
		var out level.Timeline
		if err := unpackLevels(&out, packed); err != nil {
			t.Fatal(err)
		}
		for c, pair := range [][2][]float32{{in.Momentary, out.Momentary}, {in.ShortTerm, out.ShortTerm}, {in.Peak, out.Peak}} {
			if len(pair[0]) != len(pair[1]) {
				t.Fatalf("curve %d: %d values, want %d", c, len(pair[1]), len(pair[0]))
			}
			for i, want := range pair[0] {
				got, w := float64(pair[1][i]), float64(want)
				same := math.IsNaN(w) && math.IsNaN(got) || math.IsInf(w, -1) && math.IsInf(got, -1) || math.Abs(got-w) <= tolTimeline
				if !same {
					t.Fatalf("curve %d value %d: %v became %v", c, i, want, got)
				}
			}
		}
	})
}

func curves(momentary, shortTerm, peak []float32) level.Timeline {
	return level.Timeline{Timeline: meter.Timeline{Momentary: momentary, ShortTerm: shortTerm, Peak: peak}}
}

func TestTimelineCutsWhatIsOutOfRange(t *testing.T) {
	for in, want := range map[float32]float32{400: 327.67, -400: -327.66, float32(math.Inf(1)): 327.67} {
		if got := unpackLevel(packLevel(in)); got != want {
			t.Errorf("%v became %v, want %v", in, got, want)
		}
	}
}

// A likelihood comes back less than 0.01 lower, on the same side of each whole percent.
func TestCourseKeepsItsPromise(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(0, 300).Draw(t, "n")
		in := speech.Course{Active: make([]bool, n), Speech: make([]float32, n)}
		for i := range n {
			if in.Active[i] = rapid.Bool().Draw(t, "active"); in.Active[i] {
				in.Speech[i] = rapid.OneOf(rapid.Float32Range(0, 1), rapid.SampledFrom([]float32{0, 0.5, math.Nextafter32(0.5, 0), 1})).Draw(t, "speech")
			}
		}
		packed, err := packCourse(in, n)
		if err != nil {
			t.Fatal(err)
		}
		out, err := unpackCourse(packed, n)
		if err != nil {
			t.Fatal(err)
		}
		if out.Speech == nil || !slices.Equal(out.Active, in.Active) || len(out.Speech) != n {
			t.Fatalf("%+v became %+v", in, out)
		}
		for i, want := range in.Speech {
			got := out.Speech[i]
			if got > want+1e-7 || got <= want-0.01-1e-7 || (got >= 0.5) != (want >= 0.5) {
				t.Fatalf("%v became %v", want, got)
			}
		}
	})
}

// What was not looked for is kept as nothing, not as a recording without a word.
func TestCourseThatWasNotLookedFor(t *testing.T) {
	packed, err := packCourse(speech.Course{}, 3)
	if err != nil || packed != nil {
		t.Fatalf("packed as %v: %v", packed, err)
	}
	if out, err := unpackCourse(nil, 3); err != nil || out.Active != nil || out.Speech != nil {
		t.Errorf("came back as %+v: %v", out, err)
	}
}

func TestTimelineRefusesDamage(t *testing.T) {
	levels, err := packLevels(curves(make([]float32, 100), make([]float32, 100), make([]float32, 100)))
	if err != nil {
		t.Fatal(err)
	}
	course, err := packCourse(speech.Course{Active: make([]bool, 100), Speech: make([]float32, 100)}, 100)
	if err != nil {
		t.Fatal(err)
	}
	damaged := func(good []byte) map[string][]byte {
		return map[string][]byte{"empty": {}, "cut": good[:len(good)-3], "not zlib": []byte("abc"), "flipped": append([]byte{good[0], good[1], good[2] ^ 0x55}, good[3:]...)}
	}
	for what, bad := range damaged(levels) {
		if err := unpackLevels(new(level.Timeline), bad); err == nil {
			t.Errorf("levels, %s: no error", what)
		}
	}
	for what, bad := range damaged(course) {
		if _, err := unpackCourse(bad, 100); err == nil {
			t.Errorf("course, %s: no error", what)
		}
	}
	if _, err := unpackCourse(course, 99); err == nil {
		t.Error("a course longer than the levels: no error")
	}
	unknown, err := squeeze([]byte{0, 100, 101})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := unpackCourse(unknown, 3); err == nil {
		t.Error("101 percent of speech: no error")
	}
	if _, err := packLevels(curves(make([]float32, 2), nil, nil)); err == nil {
		t.Error("curves of different lengths: no error")
	}
	for what, bad := range map[string]speech.Course{
		"too short":      {Active: make([]bool, 1), Speech: make([]float32, 2)},
		"half of it":     {Active: make([]bool, 2)},
		"past certain":   {Active: make([]bool, 2), Speech: []float32{0, 1.01}},
		"not a number":   {Active: make([]bool, 2), Speech: []float32{0, float32(math.NaN())}},
		"less than none": {Active: make([]bool, 2), Speech: []float32{-0.01, 0}},
	} {
		if _, err := packCourse(bad, 2); err == nil {
			t.Errorf("a course that is %s: no error", what)
		}
	}
}
