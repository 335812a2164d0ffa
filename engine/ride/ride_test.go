package ride

import (
	"math"
	"math/rand/v2"
	"reflect"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

var negInf = float32(math.Inf(-1))

func TestTooLittleIsLeftAlone(t *testing.T) {
	level := func(n int, l float32) []float32 {
		v := make([]float32, n)
		fill(v, l)
		return v
	}
	for _, c := range []struct {
		name   string
		level  []float32
		anchor float64
	}{
		{"nothing", nil, math.NaN()},
		{"one step", level(1, -20), math.NaN()},
		{"shorter than a block", level(3, -20), math.NaN()},
		{"shorter than a window", level(29, -20), -20},
		{"silence", level(600, negInf), math.NaN()},
		{"under the gate", level(600, -75), math.NaN()},
		{"no numbers", level(600, float32(math.NaN())), math.NaN()},
	} {
		for style, s := range styles {
			r := Solve(Course{Level: c.level}, s)
			if len(r.Gain) != len(c.level)+1 || slices.ContainsFunc(r.Gain, func(g float32) bool { return g != 0 }) {
				t.Errorf("%s, %s: gain %v", c.name, style, r.Gain)
			}
			if !(math.Abs(r.Anchor-c.anchor) < 0.01 || math.IsNaN(r.Anchor) && math.IsNaN(c.anchor)) || !math.IsNaN(r.Range) {
				t.Errorf("%s, %s: anchor %v, want %v; range %v", c.name, style, r.Anchor, c.anchor, r.Range)
			}
			if !r.Idle() || len(r.Level) != len(c.level) || len(r.Active) != len(c.level) {
				t.Errorf("%s, %s: %+v", c.name, style, r)
			}
		}
	}
	if r := Solve(Course{Level: level(600, -20)}, Settings{}); !r.Idle() || math.Abs(r.Anchor+20) > 0.01 {
		t.Errorf("no settings: anchor %v, reach %v", r.Anchor, r.Reach())
	}
}

// anyCourse is made of runs of a level with some spread, silence and nonsense.
func anyCourse(t *rapid.T) Course {
	seed := rapid.Uint64().Draw(t, "seed")
	rng := rand.New(rand.NewPCG(seed, seed))
	var c Course
	for range rapid.IntRange(0, 30).Draw(t, "runs") {
		n, level := rapid.IntRange(1, 80).Draw(t, "length"), rapid.Float64Range(-90, 10).Draw(t, "level")
		spread, spoken := rapid.SampledFrom([]float64{0, 0.5, 4, 10}).Draw(t, "spread"), rapid.Bool().Draw(t, "spoken")
		for range n {
			c.Level = append(c.Level, float32(level+spread*rng.NormFloat64()))
			if spoken {
				c.Speech = append(c.Speech, 0.9)
			} else {
				c.Speech = append(c.Speech, 0.1)
			}
			c.Moved = append(c.Moved, float32(-3*rng.Float64()))
		}
	}
	for range rapid.IntRange(0, 5).Draw(t, "odd") {
		if len(c.Level) > 0 {
			odd := rapid.SampledFrom([]float32{negInf, -negInf, float32(math.NaN()), 3e38, -3e38}).Draw(t, "value")
			c.Level[rng.IntN(len(c.Level))] = odd
			c.Moved[rng.IntN(len(c.Level))] = odd
		}
	}
	if rapid.Bool().Draw(t, "no speech") {
		c.Speech = nil
	}
	if rapid.Bool().Draw(t, "nothing moved") {
		c.Moved = nil
	}
	return c
}

func anySettings(t *rapid.T) Settings {
	s := styles[rapid.SampledFrom(slices.Sorted(keys(styles))).Draw(t, "style")]
	s.Fades = rapid.Bool().Draw(t, "fades")
	return s
}

func TestAnyCourseHasASoundRide(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c, s := anyCourse(t), anySettings(t)
		r := Solve(c, s)
		n := len(c.Level)
		if len(r.Gain) != n+1 || len(r.Level) != n || len(r.Active) != n {
			t.Fatalf("%d steps: %d gains, %d levels, %d active", n, len(r.Gain), len(r.Level), len(r.Active))
		}
		for i, g := range r.Gain {
			if !(float64(g) <= s.Lift+0.006 && float64(g) >= -s.Cut-0.006) {
				t.Fatalf("gain %d is %v dB", i, g)
			}
		}
		for _, spans := range [][]Span{r.Fades, r.Steps} {
			for _, v := range spans {
				if v.From < 0 || v.To < v.From || v.To > n {
					t.Fatalf("%v in %d steps", v, n)
				}
			}
		}
		if !(r.Kept >= 0 && r.Kept <= 1) || !(r.FloorLift >= 0) || math.IsInf(r.Anchor, 0) || math.IsInf(r.Range, 0) {
			t.Fatalf("%+v", r)
		}
		if again := Solve(c, s); !reflect.DeepEqual(r.Gain, again.Gain) {
			t.Fatal("the same course was ridden in another way")
		}
	})
}

func TestNonsenseSettings(t *testing.T) {
	p := orchestra(1, 60)
	for _, v := range []float64{math.NaN(), math.Inf(1), math.Inf(-1), -1, 1e300} {
		s := Settings{Speed: Speed{v, v}, Range: v, Deadband: v, Keep: v, Lift: v, Cut: v, Step: v, Silence: v}
		for i, g := range Solve(courseOf(p), s).Gain {
			if !(math.Abs(float64(g)) <= 100) {
				t.Fatalf("%v: gain %d is %v dB", v, i, g)
			}
		}
	}
}

// What is louder by so many dB is ridden in the same way, as long as nothing crosses the gate of −70 LUFS.
func TestLoudnessDoesNotMatter(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		rng := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 1))
		var c, louder Course
		more := rapid.Float64Range(-10, 10).Draw(t, "more")
		for range rapid.IntRange(2, 12).Draw(t, "runs") {
			level, spread := -40+25*rng.Float64(), 5*rng.Float64()
			for range 20 + rng.IntN(100) {
				l := max(-55, level+spread*rng.NormFloat64())
				c.Level, louder.Level = append(c.Level, float32(l)), append(louder.Level, float32(l+more))
			}
		}
		s := anySettings(t)
		a, b := Solve(c, s), Solve(louder, s)
		for i := range a.Gain {
			if math.Abs(float64(a.Gain[i]-b.Gain[i])) > 0.03 {
				t.Fatalf("%.2f dB louder: gain %d is %v dB instead of %v", more, i, b.Gain[i], a.Gain[i])
			}
		}
	})
}

// A recording that has been ridden is even, and is left alone: its levels, ±0.3 dB as another encoding might leave
// them, are not ridden again. That holds where the first ride came to its range.
func TestRiddenOnceIsIdle(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 9))
	ridden := 0
	again := func(name string, c Course, s Settings) {
		r := Solve(c, s)
		even := Course{Level: slices.Clone(c.Level), Speech: c.Speech}
		bound := 0
		for i := range even.Level {
			g := float64(r.Gain[i]+r.Gain[i+1]) / 2
			even.Level[i] += float32(g + 0.3*rng.NormFloat64())
			if r.Active[i] && (g > s.Lift-0.1 || g < 0.1-s.Cut) {
				bound++
			}
		}
		if r.Range > s.Range+0.2 || bound*50 > len(c.Level) {
			return
		}
		if !r.Idle() {
			ridden++
		}
		if r2 := Solve(even, s); !r2.Idle() {
			t.Errorf("%s: ridden once its range was %.1f LU, its reach %.2f dB, then %.2f", name, r.Range, r.Reach(), r2.Reach())
		}
	}
	for style, s := range styles {
		for _, difference := range []float64{0, 3, 6, 9, 12, 15, 18} {
			c := conversation(t, rng, difference, 0.4, 1.5).course(rng)
			c.Speech = make([]float32, len(c.Level))
			fill(c.Speech, 1)
			again(style+", talk", c, s)
		}
		s.Speech = false // nobody speaks, so that cannot be the anchor
		for name, p := range pieces(t) {
			c := courseOf(p)
			c.Speech = make([]float32, len(c.Level))
			again(style+", "+name, c, s)
		}
	}
	if t.Logf("%d were ridden", ridden); ridden < 30 {
		t.Errorf("only %d were ridden at all", ridden)
	}
}

// Where the range is as asked for, voices are brought together if they stand clearly apart, and else left: what a ride at
// the end of its lift and cut leaves between two would be ridden again and again.
func TestVoicesNearEachOtherAreLeft(t *testing.T) {
	s := styles["film"]
	s.Even = true
	for _, difference := range []float64{2, 6} {
		rng := rand.New(rand.NewPCG(2, 7))
		r := Solve(conversation(t, rng, difference, 0.4, 1.5).course(rng), s)
		t.Logf("%v dB apart: reach %.2f dB, idle %v", difference, r.Reach(), r.Idle())
		if r.Idle() != (difference == 2) || r.Over != 0 {
			t.Errorf("%v dB apart: reach %.2f dB, idle %v, %.1f LU over", difference, r.Reach(), r.Idle(), r.Over)
		}
	}
}

// Music between speech is ridden too, but does not say where speech belongs.
func TestSpeechIsTheAnchor(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 14))
	_, c := film(t, rng)
	loud := slices.Clone(c.Level)
	for i, s := range c.Speech {
		if s < 0.5 && loud[i] > -40 {
			loud[i] += 6
		}
	}
	a := Solve(c, styles["film"]).Anchor
	b := Solve(Course{Level: loud, Speech: c.Speech}, styles["film"]).Anchor
	if math.Abs(a-b) > 0.3 {
		t.Errorf("louder effects moved the anchor from %.2f to %.2f", a, b)
	}
}

// hours is a course of one hour, six pieces, again and again.
func hours(n int) (c Course) {
	for i := range 6 * n {
		c.Level = append(c.Level, courseOf(orchestra(uint64(i%6), 600)).Level...)
	}
	return c
}

func BenchmarkSolve(b *testing.B) {
	rng := rand.New(rand.NewPCG(1, 1))
	var talk Course
	for len(talk.Level) < 36000 {
		talk.Level = append(talk.Level, conversation(b, rng, 12, 0.4, 1.5).course(rng).Level...)
	}
	talk.Level = talk.Level[:36000]
	for _, k := range []struct {
		name, style string
		hours       int
		course      Course
	}{{"talk, 1 h", "talk", 1, talk}, {"rotation, 1 h", "rotation", 1, hours(1)}, {"rotation, 4 h", "rotation", 4, hours(4)}} {
		b.Run(k.name, func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				Solve(k.course, styles[k.style])
			}
			b.ReportMetric(float64(k.hours*b.N)/b.Elapsed().Seconds(), "hours/s")
		})
	}
}
