package ride

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"testing"
)

// vectors are what testdata/vectors.py wrote: results of NumPy and SciPy, found in other ways than here.
type vectors struct {
	Whittaker []struct {
		Tau     float64
		W, Y, X []float64
		Every   int
	}
	Gamma []struct {
		Tau         float64
		W, Level, S []float64
	}
	Potts []struct {
		Worth              float64
		Heard, Level, Cost []float64
		Cuts               []int
	}
	Range []struct {
		Level []float64
		LRA   float64
	}
	Loudness []struct {
		Level []float64
		LUFS  float64
	}
	Pchip struct {
		Curve, DB []float64
		Rate      int
		Frame     []int64
	}
}

func readVectors(t *testing.T) (v vectors) {
	b, err := os.ReadFile("testdata/vectors.json")
	if err == nil {
		err = json.Unmarshal(b, &v)
	}
	if err != nil {
		t.Fatal(err)
	}
	return v
}

func powersOf(levels []float64) []float64 {
	p := make([]float64, len(levels))
	for i, l := range levels {
		p[i] = math.Pow(10, l/10)
	}
	return p
}

func TestPenalisedLeastSquares(t *testing.T) { // scipy.linalg.solveh_banded
	var m smoother
	for _, v := range readVectors(t).Whittaker {
		s := make([]float64, len(v.W))
		m.penalty(len(s), v.Tau)
		m.right = sized(m.right, len(s))
		for i, w := range v.W {
			m.right[i] = w * v.Y[i]
		}
		m.solve(s, v.W)
		for i, want := range v.X {
			if got := s[i*v.Every]; math.Abs(got-want) > 1e-4 {
				t.Fatalf("n %d, τ %v: x[%d] is %v, SciPy has %v", len(s), v.Tau, i*v.Every, got, want)
			}
		}
	}
}

func TestSlowLevelIsMostLikely(t *testing.T) { // scipy.optimize.minimize and dense Newton steps
	var m smoother
	for _, v := range readVectors(t).Gamma {
		s := make([]float64, len(v.W))
		m.level(s, powersOf(v.Level), v.W, v.Tau/StepsPerSecond)
		for i, want := range v.S {
			if math.Abs(s[i]-want) > 0.005 {
				t.Fatalf("n %d, τ %v: S[%d] is %.4f dB, SciPy has %.4f", len(s), v.Tau, i, s[i], want)
			}
		}
	}
}

func TestVoicesAreCutBest(t *testing.T) { // every way to cut
	for _, v := range readVectors(t).Potts {
		var p []phrase
		for i := range v.Level {
			p = append(p, phrase{level: v.Level[i], long: v.Heard[i], cost: v.Cost[i]})
		}
		var cuts []int
		for i, c := range voicesApart(p, v.Worth) {
			if c {
				cuts = append(cuts, i)
			}
		}
		if len(cuts) != len(v.Cuts) {
			t.Fatalf("%d phrases, worth %v: cut at %v, best is %v", len(p), v.Worth, cuts, v.Cuts)
		}
		for i := range cuts {
			if cuts[i] != v.Cuts[i] {
				t.Fatalf("%d phrases, worth %v: cut at %v, best is %v", len(p), v.Worth, cuts, v.Cuts)
			}
		}
	}
}

func TestRangeAndLoudness(t *testing.T) { // NumPy by EBU Tech 3342 and ITU-R BS.1770
	v := readVectors(t)
	for _, r := range v.Range {
		if got := new(ranger).of(powersOf(r.Level)); math.Abs(got-r.LRA) > 1e-6 {
			t.Errorf("range of %d steps is %v LU, NumPy has %v", len(r.Level), got, r.LRA)
		}
	}
	for _, l := range v.Loudness {
		if got := integrated(powersOf(l.Level)); math.Abs(got-l.LUFS) > 1e-6 {
			t.Errorf("loudness of %d steps is %v LUFS, NumPy has %v", len(l.Level), got, l.LUFS)
		}
	}
}

// EBU Tech 3342, minimum requirements 1 to 4: tones of 20 s each.
func TestRangeOfTones(t *testing.T) {
	for _, c := range []struct {
		levels []float64
		want   float64
	}{{[]float64{-20, -30}, 10}, {[]float64{-20, -15}, 5}, {[]float64{-40, -20}, 20}, {[]float64{-50, -35, -20, -35, -50}, 15}} {
		var p []float64
		for _, l := range c.levels {
			for range 20 * StepsPerSecond {
				p = append(p, power(l))
			}
		}
		if got := new(ranger).of(p); math.Abs(got-c.want) > 0.1 {
			t.Errorf("%v: %.2f LU, the standard says %v", c.levels, got, c.want)
		}
	}
}

func TestRanked(t *testing.T) { // sorting
	rng := rand.New(rand.NewPCG(1, 1))
	for n := 1; n < 400; n += 1 + n/7 {
		for _, kinds := range []int{1, 3, 1 << 30} {
			v := make([]float64, n)
			for i := range v {
				v[i] = float64(rng.IntN(kinds))
			}
			sorted := slices.Sorted(slices.Values(v))
			for range 5 {
				if k := rng.IntN(n); ranked(v, k) != sorted[k] {
					t.Fatalf("%d values: the one of rank %d is wrong", n, k)
				}
			}
		}
	}
}
