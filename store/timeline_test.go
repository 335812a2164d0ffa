package store

import (
	"math"
	"testing"

	"pgregory.net/rapid"

	"evenshelf/engine/meter"
)

// tolTimeline is half a hundredth of a dB, plus what float32 cannot tell apart at 328 (2⁻¹⁶ · 2).
const tolTimeline = 0.005 + 2.0/(1<<16)

func TestTimelineKeepsItsPromise(t *testing.T) {
	special := []float32{float32(math.Inf(-1)), float32(math.NaN()), 0, -0.005, 0.005, 327.66, -327.66, -70, 12}
	rapid.Check(t, func(t *rapid.T) {
		value := rapid.OneOf(rapid.Float32Range(-327.66, 327.66), rapid.SampledFrom(special))
		n := rapid.IntRange(0, 300).Draw(t, "n")
		curve := rapid.SliceOfN(value, n, n)
		in := meter.Timeline{Step: 0.1, Momentary: curve.Draw(t, "momentary"), ShortTerm: curve.Draw(t, "short-term"), Peak: curve.Draw(t, "peak")}
		packed, err := packTimeline(in)
		if err != nil {
			t.Fatal(err)
		}
		out, err := unpackTimeline(0.1, packed)
		if err != nil {
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

func TestTimelineCutsWhatIsOutOfRange(t *testing.T) {
	for in, want := range map[float32]float32{400: 327.67, -400: -327.66, float32(math.Inf(1)): 327.67} {
		if got := unpackLevel(packLevel(in)); got != want {
			t.Errorf("%v became %v, want %v", in, got, want)
		}
	}
}

func TestTimelineRefusesDamage(t *testing.T) {
	good, err := packTimeline(meter.Timeline{Momentary: make([]float32, 100), ShortTerm: make([]float32, 100), Peak: make([]float32, 100)})
	if err != nil {
		t.Fatal(err)
	}
	for what, bad := range map[string][]byte{"empty": nil, "cut": good[:len(good)-3], "not zlib": []byte("abc"), "flipped": append([]byte{good[0], good[1], good[2] ^ 0x55}, good[3:]...)} {
		if _, err := unpackTimeline(0.1, bad); err == nil {
			t.Errorf("%s: no error", what)
		}
	}
	if _, err := packTimeline(meter.Timeline{Momentary: make([]float32, 2)}); err == nil {
		t.Error("curves of different lengths: no error")
	}
}
