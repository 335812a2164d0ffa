package dynamics

import (
	"math"
	"slices"
	"testing"

	"pgregory.net/rapid"

	"evenshelf/engine/audio"
)

var talk = Compression{Threshold: -20, Ratio: 3, Knee: 6, Release: 0.08}

// levels returns what an ear hears of x, one value a millisecond, the first of the start.
func levels(f audio.Format, x audio.Block) (out []float64) {
	e := newEar(f)
	view := make(audio.Block, len(x))
	for at := 0; at < x.Frames(); at += audio.BlockFrames {
		e.hear(x.Cut(view, at, min(at+audio.BlockFrames, x.Frames())), func(power float64) {
			out = append(out, -0.691+10*math.Log10(power))
		})
	}
	return out[breadth/2-1:]
}

// EBU Tech 3341, case 1: a stereo tone of about 1 kHz at −23 dBFS in each channel is −23 LUFS; here at every moment,
// since the level has no ripple. At 11.025 kHz a millisecond is no whole number of frames.
func TestLevelIsOnTheScaleOfLUFS(t *testing.T) {
	for _, rate := range []int{8000, 11025, 44100, 48000, 192000} {
		f := audio.Format{Rate: rate, Layout: audio.Stereo}
		for k, level := range levels(f, sine(f, 997, -23, 0.5))[100:] {
			if math.Abs(level+23) > 0.02 {
				t.Fatalf("%d Hz: %.4f dB after %d ms", rate, level, k+100)
			}
		}
	}
}

// The printed response of BS.1770-5 Annex 1 is −13.28 dB at 20 Hz, −2.90 at 60, −1.13 at 100, 0.04 at 500, 3.07 at
// 2000, 4.01 at 5000, 4.04 at 10000 (of its coefficients, by scipy's sosfreqz). The shelf here is a simpler one.
func TestWeightingIsNearThatOfLoudness(t *testing.T) {
	f := audio.Format{Rate: 48000, Layout: audio.Mono}
	for hz, want := range map[float64]float64{20: -13.28, 60: -2.90, 100: -1.13, 500: 0.04, 2000: 3.07, 5000: 4.01, 10000: 4.04} {
		power, n := 0.0, 0
		for _, level := range levels(f, sine(f, hz, 0, 1))[500:] {
			power, n = power+math.Pow(10, (level+0.691)/10), n+1
		}
		if got := 10 * math.Log10(2*power/float64(n)); got > want+0.15 || got < want-1.35 {
			t.Errorf("%g Hz: %.2f dB, loudness has %.2f", hz, got, want)
		}
	}
}

// BS.1770-5 Table 4: surrounds count 1.41 times, and LFE not at all.
func TestEveryChannelCountsAsInLoudness(t *testing.T) {
	f := audio.Format{Rate: 48000, Layout: audio.UsualLayout(6)}
	tone := sine(audio.Format{Rate: 48000, Layout: audio.Mono}, 997, -20, 0.3)[0]
	for c, want := range []float64{1, 1, 1, 0, 1.41, 1.41} {
		x := audio.NewBlock(6, len(tone))
		copy(x[c], tone)
		got := math.Pow(10, (levels(f, x)[200]+20+0.691-0.691+3.01)/10)
		if math.Abs(got-want) > 0.01 {
			t.Errorf("channel %d counts %.3f times, want %g", c, got, want)
		}
	}
}

// A steady tone comes out where the static curve has it, all channels alike, and quiet sound untouched.
func TestCompressorFollowsItsCurve(t *testing.T) {
	f := audio.Format{Rate: 44100, Layout: audio.Stereo}
	for level := audio.DB(-40); level <= 0; level += 2.5 {
		x := sine(f, 997, level, 1)
		out := through(NewCompressor(f, talk), x, whole)
		want := talk.Reduction(float64(level))
		got := float64(level) - audio.ToDB(peak(audio.Block{out[0][20000:40000]}))
		if math.Abs(got-want) > 0.01 {
			t.Errorf("%g dB: lowered by %.4f dB, want %.4f", level, got, want)
		}
		if want == 0 && !slices.Equal(out[0], x[0]) {
			t.Errorf("%g dB: changed, though it is under the knee", level)
		}
	}
}

// Two channels of one sound at different levels keep their difference to the rounding of float32: a gain for all, at
// the same frame.
func TestCompressorKeepsTheImage(t *testing.T) {
	f := audio.Format{Rate: 48000, Layout: audio.Stereo}
	x := steppedNoise(48000, 1, 48000)
	x = audio.Block{x[0], driven(x, -20)[0]}
	for name, p := range map[string]processor{"compressor": NewCompressor(f, talk), "ceiling": ceiling(f, -12, ForMusic)} {
		out := through(p, x, whole)
		worst := 0.0
		for i := range x[0] {
			if a, b := float64(x[0][i]), float64(x[1][i]); math.Abs(b) > 1e-6 {
				worst = max(worst, math.Abs((float64(out[1][i])/float64(out[0][i]))/(b/a)-1))
			}
		}
		t.Logf("%s: image error %.2g", name, worst)
		if worst > 2.5e-7 { // each channel is rounded to 24 bits once, or twice
			t.Errorf("%s: the channels' ratio changes by %.2g", name, worst)
		}
	}
}

// Whatever comes in: as many frames come out, finite, no sample larger than it was, the same bits however it is
// cut; what is not a number is silence.
func TestCompressorBearsAnything(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		rate := rapid.SampledFrom([]int{500, 999, 8000, 11025, 44100, 192000}).Draw(t, "rate")
		channels := rapid.SampledFrom([]int{1, 2, 6, 10}).Draw(t, "channels")
		frames := rapid.IntRange(0, 9000).Draw(t, "frames")
		x := noise(channels, frames, rapid.Float64Range(0, 2).Draw(t, "amplitude"), rapid.Uint64().Draw(t, "seed"))
		odd := []float32{float32(math.NaN()), float32(math.Inf(1)), float32(math.Inf(-1)), math.MaxFloat32, -1e30, math.SmallestNonzeroFloat32}
		for range rapid.IntRange(0, 6).Draw(t, "odd ones") {
			if frames > 0 {
				x[rapid.IntRange(0, channels-1).Draw(t, "channel")][rapid.IntRange(0, frames-1).Draw(t, "at")] = rapid.SampledFrom(odd).Draw(t, "odd")
			}
		}
		number := func(name string, low, high float64) float64 {
			return rapid.OneOf(rapid.Float64Range(low, high), rapid.SampledFrom([]float64{0, -2, math.NaN(), math.Inf(1), math.Inf(-1)})).Draw(t, name)
		}
		c := Compression{audio.DB(number("threshold", -60, 0)), number("ratio", 1, 30), audio.DB(number("knee", 0, 20)), number("release", 0, 1)}
		f := audio.Format{Rate: rate, Layout: audio.UsualLayout(channels)}
		out := through(NewCompressor(f, c), x, func() int { return rapid.IntRange(1, audio.BlockFrames).Draw(t, "cut") })
		again := through(NewCompressor(f, c), x, whole)
		if out.Frames() != frames {
			t.Fatalf("%d frames in, %d out", frames, out.Frames())
		}
		for ch := range x {
			if !slices.Equal(out[ch], again[ch]) {
				t.Fatalf("channel %d depends on how the sound is cut", ch)
			}
			for i, v := range x[ch] {
				if v-v != 0 {
					v = 0
				}
				if y := out[ch][i]; !(math.Abs(float64(y)) <= math.Abs(float64(v))) {
					t.Fatalf("frame %d: %g became %g", i, v, y)
				}
			}
		}
	})
}

// At no time is less taken off than the static curve asks for: the gain has fallen before the sound gets loud.
func TestCompressorIsInTime(t *testing.T) {
	f := audio.Format{Rate: 48000, Layout: audio.Mono}
	x := steppedNoise(48000, 1, 48000)
	out := through(NewCompressor(f, talk), x, whole)
	for k, level := range levels(f, x) {
		i := 48 * k
		if math.Abs(float64(x[0][i])) < 1e-3 {
			continue
		}
		if got, want := -audio.ToDB(float64(out[0][i])/float64(x[0][i])), talk.Reduction(level); got < want-1e-5 {
			t.Errorf("%d ms: %.4f dB off, the curve asks for %.4f", k, got, want)
		}
	}
}
