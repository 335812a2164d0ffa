package dynamics

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"pgregory.net/rapid"

	"evenshelf/engine/audio"
)

// samplePeaks is the simplest peak reader there is: the envelope of the samples themselves. It keeps
// these tests about the gain; the true-peak reader has tests of its own.
type samplePeaks struct{ last float32 }

func (s *samplePeaks) Delay() int       { return 1 }
func (s *samplePeaks) SetFloor(float64) {}

func (s *samplePeaks) Process(dst []float32, src audio.Block) {
	for i := range dst {
		var now float32
		for _, x := range src {
			now = max(now, float32(math.Abs(float64(x[i]))))
		}
		dst[i], s.last = max(s.last, now), now
	}
}

func newTestCeiling(f audio.Format, at audio.DBTP, t Timing) *Ceiling {
	return NewCeiling(f, at, t, func() PeakReader { return &samplePeaks{} })
}

// through runs x through the ceiling in blocks whose lengths cut gives.
func through(c *Ceiling, x audio.Block, cut func() int) audio.Block {
	out := make(audio.Block, len(x))
	take := func(b audio.Block) {
		for ch := range b {
			out[ch] = append(out[ch], b[ch]...)
		}
	}
	for at := 0; at < x.Frames(); {
		n := min(cut(), x.Frames()-at)
		view := make(audio.Block, len(x))
		take(c.Process(x.Cut(view, at, at+n)))
		at += n
	}
	for b := c.Flush(); b != nil; b = c.Flush() {
		take(b)
	}
	return out
}

func whole() int { return audio.BlockFrames }

var stereo48 = audio.Format{Rate: 48000, Layout: audio.Stereo}

func noise(channels, frames int, amplitude float64, seed uint64) audio.Block {
	rng := rand.New(rand.NewPCG(seed, 1))
	b := audio.NewBlock(channels, frames)
	for _, x := range b {
		for i := range x {
			x[i] = float32(amplitude * (2*rng.Float64() - 1))
		}
	}
	return b
}

func peak(b audio.Block) (p float64) {
	for _, x := range b {
		for _, v := range x {
			p = max(p, math.Abs(float64(v)))
		}
	}
	return p
}

// Promise: nothing overshoots, for any input. Clicks, bursts and full-band noise far over the ceiling.
func TestNothingPassesTheCeiling(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		rate := rapid.SampledFrom([]int{8000, 44100, 48000, 96000}).Draw(t, "rate")
		frames := rapid.IntRange(1, 20000).Draw(t, "frames")
		x := noise(2, frames, rapid.Float64Range(0, 2).Draw(t, "noise"), rapid.Uint64().Draw(t, "seed"))
		for range rapid.IntRange(0, 5).Draw(t, "clicks") {
			x[rapid.IntRange(0, 1).Draw(t, "channel")][rapid.IntRange(0, frames-1).Draw(t, "at")] =
				float32(rapid.Float64Range(-8, 8).Draw(t, "click"))
		}
		timing := Timing{rapid.Float64Range(0, 0.02).Draw(t, "look"), rapid.Float64Range(0, 0.02).Draw(t, "hold"),
			rapid.Float64Range(0.001, 0.5).Draw(t, "release")}
		ceiling := audio.DBTP(rapid.Float64Range(-20, 0).Draw(t, "ceiling"))
		format := audio.Format{Rate: rate, Layout: audio.Stereo}
		out := through(newTestCeiling(format, ceiling, timing), x, func() int { return rapid.IntRange(1, audio.BlockFrames).Draw(t, "cut") })
		if out.Frames() != frames {
			t.Fatalf("%d frames in, %d out", frames, out.Frames())
		}
		if p := peak(out); p > ceiling.Linear() {
			t.Fatalf("peak %.4f dB over a ceiling of %.2f", audio.ToDB(p/ceiling.Linear()), ceiling)
		}
	})
}

func TestQuietSoundPassesBitForBit(t *testing.T) {
	x := noise(2, 50000, audio.DB(-1.1).Linear(), 3)
	out := through(newTestCeiling(stereo48, -1, ForMusic), x, whole)
	for c := range x {
		if !slices.Equal(x[c], out[c]) {
			t.Errorf("channel %d was changed or moved", c)
		}
	}
}

func TestBlockLengthsAreInaudible(t *testing.T) {
	x := noise(2, 30000, 1.5, 4)
	rng := rand.New(rand.NewPCG(9, 9))
	want := through(newTestCeiling(stereo48, -1, ForMusic), x, whole)
	got := through(newTestCeiling(stereo48, -1, ForMusic), x, func() int { return 1 + rng.IntN(700) })
	for c := range want {
		if !slices.Equal(want[c], got[c]) {
			t.Errorf("channel %d depends on how the sound is cut into blocks", c)
		}
	}
}

// The gain of one stage against the three formulas of the package comment, computed directly in float64
// over the whole recording.
func TestGainFollowsItsDefinition(t *testing.T) {
	const frames = 6000
	x := noise(1, frames, 0.4, 5)
	for _, at := range []int{700, 702, 2500, 4000} {
		x[0][at] = 1.6
	}
	timing := Timing{LookAhead: 0.002, Hold: 0.003, Release: 0.02}
	format := audio.Format{Rate: 48000, Layout: audio.Mono}
	stage := newStage(format, -1, timing, &samplePeaks{})
	var got []float32
	view := make(audio.Block, 1)
	got = append(got, stage.process(x.Cut(view, 0, 4096))[0]...)
	got = append(got, stage.process(x.Cut(view, 4096, frames))[0]...)
	for b := stage.flush(); b != nil; b = stage.flush() {
		got = append(got, b[0]...)
	}

	half, hold := 96, 144
	limit, alpha := audio.DBTP(-1-margin).Linear(), math.Exp(-1/(timing.Release*48000))
	pad := 2000
	need := make([]float64, frames+2*pad)
	for n := range need {
		i := n - pad
		var p float64
		for _, j := range []int{i, i + 1} { // between frames i and i+1
			if j >= 0 && j < frames {
				p = max(p, math.Abs(float64(x[0][j])))
			}
		}
		if p > limit {
			need[n] = 1 - limit/p
		}
	}
	released := make([]float64, len(need))
	for n := range released {
		for k := max(0, n-half-1-hold); k <= min(len(need)-1, n+half+1); k++ {
			released[n] = max(released[n], need[k])
		}
		if n > 0 {
			released[n] = max(released[n], alpha*released[n-1])
		}
	}
	m := float64(half + 1)
	worst := 0.0
	for i := range frames {
		var reduction float64
		for k := -half; k <= half; k++ {
			reduction += (m - math.Abs(float64(k))) / (m * m) * released[i+pad+k]
		}
		want := float64(x[0][i]) * (1 - reduction)
		worst = max(worst, math.Abs(want-float64(got[i])))
	}
	// float32 output rounds to 6e-8; a reduction is a whole number of 2^-36.
	if worst > 2e-7 {
		t.Errorf("gain is off by up to %.2g", worst)
	}
}

// A steady tone under steady limiting has to stay a tone. The hold of 10 ms is longer than half a period
// of 60 Hz, so the gain must not follow the wave (levelling study: hold 0 gives −74 dB, 5 ms is enough).
func TestLowToneStaysClean(t *testing.T) {
	const rate, frames = 48000, 96000
	x := audio.NewBlock(2, frames)
	for i := range frames {
		v := float32(1.6 * math.Sin(2*math.Pi*60*float64(i)/rate))
		x[0][i], x[1][i] = v, v
	}
	out := through(newTestCeiling(stereo48, -1, ForMusic), x, whole)
	y := out[0][rate/2 : rate/2+rate] // one second: 60 whole periods
	var total, re, im float64
	for i, v := range y {
		s, c := math.Sincos(2 * math.Pi * 60 * float64(i) / rate)
		re, im, total = re+float64(v)*c, im+float64(v)*s, total+float64(v)*float64(v)
	}
	tone := 2 * (re*re + im*im) / rate
	if rest := 10 * math.Log10(max(total-tone, 1e-30)/total); rest > -90 {
		t.Errorf("distortion and noise of a limited 60 Hz tone are %.1f dB, want below −90", rest)
	}
}

func TestSlidingMaxAgainstBruteForce(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		size := rapid.IntRange(1, 40).Draw(t, "size")
		values := rapid.SliceOfN(rapid.Int64Range(0, 9), 1, 300).Draw(t, "values")
		w := newSlidingMax(size)
		for i, v := range values {
			if got, want := w.push(v), slices.Max(values[max(0, i-size+1):i+1]); got != want {
				t.Fatalf("value %d: %d, want %d", i, got, want)
			}
		}
	})
}

func BenchmarkCeiling(b *testing.B) {
	for name, amplitude := range map[string]float64{"idle": 0.5, "busy": 1.5} {
		b.Run(name, func(b *testing.B) {
			x := noise(2, audio.BlockFrames, amplitude, 6)
			c := newTestCeiling(stereo48, -1, ForMusic)
			b.ReportAllocs()
			for b.Loop() {
				c.Process(x)
			}
			b.ReportMetric(float64(b.N)*audio.BlockFrames/48000/b.Elapsed().Seconds(), "x-realtime")
		})
	}
}
