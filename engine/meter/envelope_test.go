package meter

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"pgregory.net/rapid"

	"evenshelf/engine/audio"
)

// envelopeOf runs x through an envelope in blocks of random length and takes the delay out.
func envelopeOf(e *Envelope, rng *rand.Rand, x ...[]float32) []float32 {
	src := audio.NewBlock(len(x), len(x[0])+e.Delay())
	for c := range x {
		copy(src[c], x[c])
	}
	dst, view := make([]float32, src.Frames()), make(audio.Block, len(x))
	for at := 0; at < len(dst); {
		to := min(len(dst), at+rng.IntN(150))
		e.Process(dst[at:to], src.Cut(view, at, to))
		at = to
	}
	return dst[e.Delay():]
}

// Without a floor, the envelope is the largest grid point of every interval.
func TestEnvelopeIsTheGrid(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x := anySound(t)
		y := slices.Clone(x)
		slices.Reverse(y)
		got := envelopeOf(NewEnvelope(2), rand.New(rand.NewPCG(1, 1)), x, y)
		for i := range x {
			want := float32(max(slices.Max(intervalPoints(x, i)), slices.Max(intervalPoints(y, i))))
			if got[i] != want {
				t.Fatalf("frame %d: %g, want %g", i, got[i], want)
			}
		}
	})
}

// intervalPoints returns the magnitudes at the grid points from sample i of x to sample i+1.
func intervalPoints(x []float32, i int) []float64 {
	var w [taps]float64
	for k := range w {
		if j := i + k - (reach - 1); j >= 0 && j < len(x) {
			w[k] = float64(x[j])
		}
	}
	points := make([]float64, phases+1)
	for p := range points {
		points[p] = interpolator().at(p, &w)
	}
	return points
}

// A floor may only blur what lies below it.
func TestEnvelopeAboveItsFloor(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x := anySound(t)
		exact := envelopeOf(NewEnvelope(1), rand.New(rand.NewPCG(2, 2)), x)
		floor := rapid.Float64Range(0, 2).Draw(t, "floor")
		e := NewEnvelope(1)
		e.SetFloor(floor)
		for i, got := range envelopeOf(e, rand.New(rand.NewPCG(3, 3)), x) {
			sample := float32(math.Abs(float64(x[i])))
			if i+1 < len(x) {
				sample = max(sample, float32(math.Abs(float64(x[i+1]))))
			}
			switch {
			case float64(exact[i]) > floor && got != exact[i]:
				t.Fatalf("frame %d: %g, want %g, above the floor of %g", i, got, exact[i], floor)
			case got < sample || got > exact[i]:
				t.Fatalf("frame %d: %g is not between the samples, %g, and the envelope, %g", i, got, sample, exact[i])
			}
		}
	})
}

func TestEnvelopeReset(t *testing.T) {
	x := music(6, 44100, 5000)[0]
	want := envelopeOf(NewEnvelope(1), rand.New(rand.NewPCG(4, 4)), x)
	e := NewEnvelope(1)
	e.Process(make([]float32, 777), audio.Block{x[:777]})
	e.Reset()
	if got := envelopeOf(e, rand.New(rand.NewPCG(4, 4)), x); !slices.Equal(got, want) {
		t.Error("Reset leaves something behind")
	}
}

func BenchmarkEnvelope(b *testing.B) {
	for _, bench := range []struct {
		name  string
		floor float64
	}{{"ceiling", 0.9}, {"10dB", 0.3}, {"exact", 0}} {
		b.Run(bench.name, func(b *testing.B) {
			f := audio.Format{Rate: 44100, Layout: audio.Stereo}
			sound := musicLike(f, 5)
			e, dst, view := NewEnvelope(2), make([]float32, audio.BlockFrames), make(audio.Block, 2)
			e.SetFloor(bench.floor)
			b.ReportAllocs()
			for b.Loop() {
				for at := 0; at < sound.Frames(); at += audio.BlockFrames {
					to := min(at+audio.BlockFrames, sound.Frames())
					e.Process(dst[:to-at], sound.Cut(view, at, to))
				}
			}
			b.ReportMetric(5*float64(b.N)/b.Elapsed().Seconds(), "x-realtime")
		})
	}
}
