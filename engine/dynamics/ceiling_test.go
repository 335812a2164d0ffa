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

// processor is a Ceiling or a Compressor.
type processor interface {
	Process(audio.Block) audio.Block
	Flush() audio.Block
	Work() Work
}

// through runs x through c in blocks whose lengths cut gives.
func through(c processor, x audio.Block, cut func() int) audio.Block {
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

// Promise: nothing overshoots, for any input, rate and timing. Full-band noise, a tone, clicks and bursts, far over
// the ceiling.
func TestNothingPassesTheCeiling(t *testing.T) {
	worst := -99.0
	rapid.Check(t, func(t *rapid.T) {
		rate := rapid.OneOf(rapid.SampledFrom([]int{8000, 44100, 48000, 96000}), rapid.IntRange(8000, 192000)).Draw(t, "rate")
		frames := rapid.IntRange(1, 2500).Draw(t, "frames")
		x := noise(2, frames, rapid.Float64Range(0, 2).Draw(t, "noise"), rapid.Uint64().Draw(t, "seed"))
		tone, step := rapid.Float64Range(0, 3).Draw(t, "tone"), rapid.Float64Range(0, 2.95).Draw(t, "step")
		burst, pause := rapid.IntRange(1, 1000).Draw(t, "burst"), rapid.IntRange(0, 1000).Draw(t, "pause")
		for c := range x {
			for i := range x[c] {
				x[c][i] += float32(tone * math.Sin(step*float64(i)+float64(c)))
				if i%(burst+pause) >= burst {
					x[c][i] = 0
				}
			}
		}
		for range rapid.IntRange(0, 5).Draw(t, "clicks") {
			x[rapid.IntRange(0, 1).Draw(t, "channel")][rapid.IntRange(0, frames-1).Draw(t, "at")] =
				float32(rapid.Float64Range(-8, 8).Draw(t, "click"))
		}
		timing := Timing{rapid.Float64Range(0.002, 0.02).Draw(t, "look"), rapid.Float64Range(0, 0.02).Draw(t, "hold"),
			rapid.Float64Range(0.02, 0.5).Draw(t, "release")}
		at := audio.DBTP(rapid.Float64Range(-20, 0).Draw(t, "ceiling"))
		out := through(ceiling(audio.Format{Rate: rate, Layout: audio.Stereo}, at, timing), x, whole)
		dB := audio.ToDB(truePeak(out) / at.Linear())
		worst = max(worst, dB)
		if dB > 0.05 {
			t.Fatalf("true peak %.4f dB over the ceiling", dB)
		}
	})
	t.Logf("worst: %.4f dB", worst)
}

// Full-band noise with its true peak 0.1 dB under the ceiling, and silence with one click as high.
func TestQuietSoundPassesBitForBit(t *testing.T) {
	click := audio.NewBlock(2, 3000)
	click[1][1234] = 1
	for _, x := range []audio.Block{noise(2, 50000, 0.5, 3), click} {
		x = driven(x, audio.DB(-1.1-audio.ToDB(truePeak(x))))
		out := through(ceiling(stereo48, -1, ForMusic), x, whole)
		for c := range x {
			if !slices.Equal(x[c], out[c]) {
				t.Errorf("channel %d was changed or moved", c)
			}
		}
	}
}

// Whatever comes in, whatever the timing: as many frames come out, no sample larger than it was or than the
// ceiling, the same bits however it is cut; what is not a number is silence.
func TestCeilingBearsAnything(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		rate := rapid.SampledFrom([]int{500, 8000, 11025, 44100, 192000}).Draw(t, "rate")
		channels := rapid.SampledFrom([]int{1, 2, 6}).Draw(t, "channels")
		frames := rapid.IntRange(0, 9000).Draw(t, "frames")
		x := noise(channels, frames, rapid.Float64Range(0, 2).Draw(t, "amplitude"), rapid.Uint64().Draw(t, "seed"))
		odd := []float32{float32(math.NaN()), float32(math.Inf(1)), float32(math.Inf(-1)), math.MaxFloat32, -1e30, math.SmallestNonzeroFloat32}
		for range rapid.IntRange(0, 6).Draw(t, "odd ones") {
			if frames > 0 {
				x[rapid.IntRange(0, channels-1).Draw(t, "channel")][rapid.IntRange(0, frames-1).Draw(t, "at")] = rapid.SampledFrom(odd).Draw(t, "odd")
			}
		}
		for range rapid.IntRange(0, 3).Draw(t, "pauses") { // in which the second stage need not read
			from := rapid.IntRange(0, frames).Draw(t, "from")
			for c := range x {
				clear(x[c][from:min(frames, from+rapid.IntRange(0, 5000).Draw(t, "length"))])
			}
		}
		seconds := rapid.OneOf(rapid.Float64Range(0, 0.03), rapid.SampledFrom([]float64{0, -1, 10, math.NaN(), math.Inf(1)}))
		timing := Timing{seconds.Draw(t, "look"), seconds.Draw(t, "hold"), seconds.Draw(t, "release")}
		f, at := audio.Format{Rate: rate, Layout: audio.UsualLayout(channels)}, audio.DBTP(rapid.Float64Range(-20, 0).Draw(t, "ceiling"))
		out := through(ceiling(f, at, timing), x, func() int { return rapid.IntRange(1, audio.BlockFrames).Draw(t, "cut") })
		again := through(ceiling(f, at, timing), x, whole)
		if out.Frames() != frames {
			t.Fatalf("%d frames in, %d out", frames, out.Frames())
		}
		for c := range x {
			if !slices.Equal(out[c], again[c]) {
				t.Fatalf("channel %d depends on how the sound is cut", c)
			}
			for i, v := range x[c] {
				if v-v != 0 {
					v = 0
				}
				if y := float64(out[c][i]); !(math.Abs(y) <= min(math.Abs(float64(v)), at.Linear())) {
					t.Fatalf("frame %d: %g became %g under %g", i, v, y, at.Linear())
				}
			}
		}
	})
}

// Where the first stage does nothing the second takes its readings over. That must not alter a bit: against a ceiling
// whose second stage always reads for itself. Bursts, between them noise just under the ceiling.
func TestReadingOnceIsEnough(t *testing.T) {
	x := noise(2, 120000, 1, 11)
	x = driven(x, audio.DB(-1.2-audio.ToDB(truePeak(audio.Block{x[0][:20000], x[1][:20000]}))))
	for i := range x[0] {
		if i%24000 < 1000 {
			x[0][i] *= 3
		}
	}
	timing := Timing{LookAhead: 0.002, Hold: 0.002, Release: 0.005}
	want := ceiling(stereo48, -1, timing)
	alone := through(want, x, func() int { want.still = math.MinInt32; return 500 })
	for _, size := range []int{64, 1000, audio.BlockFrames} {
		once := 0
		c := ceiling(stereo48, -1, timing)
		out := through(c, x, func() int {
			if c.wide.stale {
				once++
			}
			return size
		})
		if once == 0 {
			t.Errorf("blocks of %d: the second stage always reads", size)
		}
		for ch := range x {
			if !slices.Equal(out[ch], alone[ch]) {
				t.Errorf("blocks of %d: channel %d differs", size, ch)
			}
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
	take := func(l levelled) { got = append(got, l.sound[0]...) }
	take(stage.process(x.Cut(view, 0, 4096)))
	take(stage.process(x.Cut(view, 4096, frames)))
	for b := stage.line.tail(); b != nil; b = stage.line.tail() {
		take(stage.run(b))
	}

	half, hold := 96, 144
	limit, alpha := audio.DBTP(-1).Linear(), math.Exp(-1/(timing.Release*48000))
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
