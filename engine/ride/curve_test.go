package ride

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

func TestCurveComesBackExactly(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		var c Curve
		for _, h := range rapid.SliceOf(rapid.IntRange(-20000, 20000)).Draw(t, "hundredths") {
			c = append(c, float32(float64(h)/perHundred))
		}
		b, err := json.Marshal(c)
		if err != nil {
			t.Fatal(err)
		}
		var back Curve
		if err := json.Unmarshal(b, &back); err != nil {
			t.Fatal(err)
		}
		if !slices.Equal(c, back) || (c == nil) != (back == nil) {
			t.Fatalf("%v came back as %v", c, back)
		}
	})
}

// A curve in JSON, made by hand by the documented rule: 0, +1, −1.28 and 200 dB are the differences 0, 100, −228 and
// 20128, as signed variable-length integers 00, c8 01, c7 03 and c0 ba 02 (Protocol Buffers, "Signed Integers").
func TestCurveInJSON(t *testing.T) {
	b, err := json.Marshal(Curve{0, 1, -1.28, 200})
	if err != nil {
		t.Fatal(err)
	}
	if want := `"AMgBxwPAugI="`; string(b) != want {
		t.Errorf("%s, want %s", b, want)
	}
}

func TestMalformedCurves(t *testing.T) {
	for text, why := range map[string]string{
		`7`:              "a string of base64",
		`["AA=="]`:       "a string of base64",
		`"!"`:            "illegal base64",
		`"AA"`:           "illegal base64",
		`"gA=="`:         "byte 0 begins no whole number",
		`"AID/"`:         "byte 1 begins no whole number",
		`"wrgC"`:         "value 0 is beyond ±200 dB",
		`"////////////"`: "byte 0 begins no whole number",
	} {
		c := Curve{1}
		if err := json.Unmarshal([]byte(text), &c); err == nil || !strings.Contains(err.Error(), why) {
			t.Errorf("%s: error %v, want one with %q", text, err, why)
		}
		if !slices.Equal(c, Curve{1}) {
			t.Errorf("%s: the curve was changed to %v", text, c)
		}
	}
	for _, v := range []float32{float32(math.NaN()), float32(math.Inf(1)), 201} {
		if _, err := json.Marshal(Curve{0, v}); err == nil {
			t.Errorf("a gain of %v was written", v)
		}
	}
	var c Curve
	if err := json.Unmarshal([]byte("null"), &c); err != nil || c != nil {
		t.Errorf("null: %v, %v", c, err)
	}
}

func FuzzCurve(f *testing.F) {
	f.Add([]byte(`"AMgBxwPAugI="`))
	f.Add([]byte(`"gICAgA=="`))
	f.Fuzz(func(t *testing.T, b []byte) {
		var c, again Curve
		if json.Unmarshal(b, &c) != nil {
			return
		}
		text, err := json.Marshal(c)
		if err != nil {
			t.Fatal(err)
		}
		if err := json.Unmarshal(text, &again); err != nil || !slices.Equal(c, again) {
			t.Fatalf("%v was read from what it wrote as %v: %v", c, again, err)
		}
	})
}

func TestFillIsAMonotoneCubic(t *testing.T) { // scipy.interpolate.PchipInterpolator
	v := readVectors(t).Pchip
	var c Curve
	for _, g := range v.Curve {
		c = append(c, float32(g))
	}
	for i, frame := range v.Frame {
		var dst [1]float64
		c.Fill(dst[:], frame, v.Rate)
		if got := 20 * math.Log10(dst[0]); math.Abs(got-v.DB[i]) > 0.001 {
			t.Fatalf("frame %d: %.5f dB, SciPy has %.5f", frame, got, v.DB[i])
		}
	}
}

// steep is a curve that moves as a ride does in pauses, and faster.
func steep(n int) Curve {
	rng := rand.New(rand.NewPCG(3, 4))
	c := make(Curve, n)
	for i := 1; i < n; i++ {
		c[i] = c[i-1]
		if rng.IntN(3) == 0 {
			c[i] = float32(math.Round(rng.NormFloat64()*800)) / 100
		}
	}
	return c
}

func TestFillBetweenNodesAndBlocks(t *testing.T) {
	c := steep(60)
	for _, rate := range []int{8000, 11025, 44100, 48000, 96000, 192000} {
		n := rate * 7
		whole, worst := make([]float64, n), 0.0
		from := int64(-rate / 2)
		c.Fill(whole, from, rate)
		for i, got := range whole {
			want := c.decibels(from+int64(i), int64(rate))
			worst = max(worst, math.Abs(20*math.Log10(got)-want))
			k := min(max(int(from)+i, 0)*StepsPerSecond/rate, len(c)-1)
			low, high := float64(min(c[k], c[min(k+1, len(c)-1)])), float64(max(c[k], c[min(k+1, len(c)-1)]))
			if want < low-1e-9 || want > high+1e-9 {
				t.Fatalf("%d Hz, frame %d: %v dB is not between %v and %v", rate, i, want, low, high)
			}
		}
		if worst > 0.001 {
			t.Errorf("%d Hz: the straight between nodes misses the cubic by %.5f dB", rate, worst)
		}
		rng := rand.New(rand.NewPCG(1, 2))
		parts := make([]float64, n)
		for i := 0; i < n; {
			k := min(1+rng.IntN(3000), n-i)
			c.Fill(parts[i:i+k], from+int64(i), rate)
			i += k
		}
		if !slices.Equal(whole, parts) {
			t.Errorf("%d Hz: the gain depends on how the sound is cut", rate)
		}
	}
}

func TestFillAtItsEnds(t *testing.T) {
	dst := make([]float64, 10)
	for name, c := range map[string]Curve{"nil": nil, "empty": {}, "zero": {0, 0}} {
		c.Fill(dst, 123456, 48000)
		if slices.Min(dst) != 1 || slices.Max(dst) != 1 {
			t.Errorf("%s: %v", name, dst)
		}
	}
	c := Curve{-6, 3, 6}
	for _, v := range []struct {
		from int64
		want float64
	}{{-math.MaxInt64, -6}, {-100, -6}, {4800, 3}, {9600, 6}, {1 << 40, 6}, {math.MaxInt64 - 100, 6}} {
		c.Fill(dst[:1], v.from, 48000)
		if got := 20 * math.Log10(dst[0]); math.Abs(got-v.want) > 1e-9 {
			t.Errorf("frame %d: %v dB, want %v", v.from, got, v.want)
		}
	}
	c.Fill(dst, 0, 0)
	c.Fill(nil, 0, 48000)
}

func TestFillDoesNotAllocate(t *testing.T) {
	c, dst := steep(600), make([]float64, 4096)
	if n := testing.AllocsPerRun(10, func() { c.Fill(dst, 100000, 44100) }); n != 0 {
		t.Errorf("%v allocations", n)
	}
}

func BenchmarkFill(b *testing.B) {
	for name, c := range map[string]Curve{"moving": steep(6000), "still": make(Curve, 6000)} {
		b.Run(name, func(b *testing.B) {
			dst := make([]float64, 4096)
			b.ReportAllocs()
			at := int64(0)
			for b.Loop() {
				c.Fill(dst, at%(500*44100), 44100)
				at += int64(len(dst))
			}
			b.ReportMetric(float64(at)/44100/b.Elapsed().Seconds(), "x-realtime")
		})
	}
}
