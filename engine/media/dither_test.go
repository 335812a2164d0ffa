package media

import (
	"fmt"
	"math"
	"testing"

	"evenshelf/engine/audio"
)

// The figures of these tests are those of S. P. Lipshitz, R. A. Wannamaker, J. Vanderkooy, "Quantization and
// Dither: A Theoretical Survey", J. Audio Eng. Soc. 40(5), 1992: with triangular dither the total error has mean
// 0 and power Δ²/4 whatever the signal, and is white; plain rounding has Δ²/12 at best, and harmonics.

// tone returns 997 Hz at 48 kHz, the reference of AES17, in LSB of so many bits: whole periods in every second.
func tone(bits, seconds int, dBFS float64) []float64 {
	x := make([]float64, seconds*48000)
	for i := range x {
		x[i] = math.Ldexp(audio.DB(dBFS).Linear(), bits-1) * math.Sin(2*math.Pi*997*float64(i)/48000)
	}
	return x
}

// partial returns the power in x of the tone at hz, whole in its length.
func partial(x []float64, hz float64) float64 {
	var re, im float64
	w := 2 * math.Pi * hz / 48000
	for i, v := range x {
		s, c := math.Sincos(math.Mod(w*float64(i), 2*math.Pi))
		re, im = re+v*c, im+v*s
	}
	n := float64(len(x))
	return 2 * (re*re + im*im) / (n * n)
}

func TestDitherPower(t *testing.T) {
	for _, bits := range []int{16, 24} {
		signals := map[string][]float64{"tone at −60 dBFS": tone(bits, 4, -60), "tone at −100 dBFS": tone(bits, 4, -100)}
		for _, offset := range []float64{0.1, 0.25, 0.5, -0.9, 7.3, -100.5} {
			x := make([]float64, 200_000)
			for i := range x {
				x[i] = offset
			}
			signals[fmt.Sprint("offset of ", offset)] = x
		}
		for name, x := range signals {
			_, errs := quantiseAll(bits, 0, x)
			mean, power := moments(errs)
			if dB := 10 * math.Log10(power/0.25); math.Abs(dB) > 0.1 || math.Abs(mean) > 0.006 {
				t.Errorf("%d bits, %s: noise %.3f dB over Δ²/4, mean %.4f LSB", bits, name, dB, mean)
			}
		}
	}
}

// The mean power in each of 33 bands of the error, over n stretches, is that of white noise to 5/√n.
func TestDitherSpectrumIsFlat(t *testing.T) {
	const size, stretches = 64, 3000
	_, errs := quantiseAll(16, 1, tone(16, 4, -40))
	for k := range size/2 + 1 {
		sum := 0.0
		for at := range stretches {
			var re, im float64
			for i, v := range errs[at*size : (at+1)*size] {
				s, c := math.Sincos(2 * math.Pi * float64(k*i%size) / size)
				re, im = re+v*c, im+v*s
			}
			sum += re*re + im*im
		}
		spread := 1.0
		if k == 0 || k == size/2 {
			spread = math.Sqrt2 // real: one square instead of two
		}
		if r := sum / stretches / (size * 0.25); math.Abs(r-1) > 5*spread/math.Sqrt(stretches) {
			t.Errorf("band %d has %.3f of the power it should", k, r)
		}
	}
}

// Five seconds put the noise in one bin at 2·Δ²/4/n. It has an exponential distribution: 16 times its mean
// happens once in 9 million. Plain rounding of the same tone stands out.
func TestDitherMakesNoHarmonics(t *testing.T) {
	const seconds = 5
	floor := 2 * 0.25 / float64(seconds*48000)
	for _, dBFS := range []float64{-60, -80, -90.3, -100} {
		worst := func(plain bool) (most float64) {
			spec := words(1, 16)
			spec.Plain = plain
			_, errs := quantiseAs(spec, 0, tone(16, seconds, dBFS))
			for harmonic := 1; harmonic <= 9; harmonic++ { // 1: the gain for the tone itself
				most = max(most, partial(errs, 997*float64(harmonic)))
			}
			return most
		}
		if dithered, plain := worst(false)/floor, worst(true)/floor; dithered > 16 || plain < 100 {
			t.Errorf("%g dBFS: harmonics %.1f dB over the noise with dither, %.1f without", dBFS, 10*math.Log10(dithered), 10*math.Log10(plain))
		}
	}
}

// AES17's dynamic range, unweighted: what is left beside a 997 Hz tone at −60 dBFS, re a full-scale sine. Theory
// says 93.3 dB at 16 bits: (2^15)²/2 over ¼.
func TestDynamicRange(t *testing.T) {
	out, _ := quantiseAll(16, 0, tone(16, 10, -60))
	x := make([]float64, len(out))
	for i, v := range out {
		x[i] = float64(v)
	}
	_, power := moments(x)
	dB := 10 * math.Log10(math.Ldexp(1, 30)/2/(power-partial(x, 997)))
	t.Logf("dynamic range %.2f dB", dB)
	if dB < 93 || dB > 93.6 {
		t.Errorf("dynamic range %.2f dB, want 93.3", dB)
	}
}

// No pair of six channels has noise in common.
func TestDitherOfChannelsIsUnrelated(t *testing.T) {
	const n = 100_000
	x := make([]float64, n)
	for i := range x {
		x[i] = 0.37
	}
	var errs [6][]float64
	for c := range errs {
		_, errs[c] = quantiseAs(words(6, 16), c, x)
	}
	for a := range errs {
		for b := range a {
			sum := 0.0
			for i := range n {
				sum += errs[a][i] * errs[b][i]
			}
			if r := sum / n / 0.25; math.Abs(r) > 5/math.Sqrt(n) {
				t.Errorf("channels %d and %d: correlation %.4f", a, b, r)
			}
		}
	}
}

// Plain rounding is off by no more than half a step, and by Δ²/12 over a signal that is anywhere between two.
func TestPlainRounding(t *testing.T) {
	spec := words(1, 16)
	spec.Plain = true
	x := tone(16, 4, -6)
	_, errs := quantiseAs(spec, 0, x)
	if _, power := moments(errs); math.Abs(power*12-1) > 0.02 {
		t.Errorf("power of the error is %.4f of Δ²/12", power*12)
	}
	for i, e := range errs {
		if math.Abs(e) > 0.5 {
			t.Fatalf("sample %d is off by %.3f LSB", i, e)
		}
	}
	out, _ := quantiseAs(spec, 0, []float64{40000, -40000, math.NaN(), 0.4, -0.6})
	for i, want := range []int32{32767, -32768, 0, 0, -1} {
		if out[i] != want {
			t.Errorf("value %d became %d, want %d", i, out[i], want)
		}
	}
}

// What the spec says about dither reaches every writer.
func TestEveryWriterCanRoundPlainly(t *testing.T) {
	snd := programme(2, 5000, 24, 0.7)
	for name, test := range map[string]struct {
		box  *Toolbox
		spec Spec
	}{
		"wav":         {withoutFFmpeg(), wavSpec(16, false)},
		"flac":        {withFFmpeg(t), flacSpec(16, 48000)},
		"flac native": {withoutFFmpeg(), flacSpec(16, 48000)},
	} {
		for _, plain := range []bool{false, true} {
			test.spec.Plain, test.spec.Format = plain, stereo(48000)
			path := t.TempDir() + "/a.part"
			write(t, test.box, path, test.spec, snd)
			got, _ := decode(t, test.box, path)
			worst := 0.0
			for c := range snd {
				for i := range snd[c] {
					worst = max(worst, math.Abs(float64(got[c][i]-snd[c][i]))*32768)
				}
			}
			if (worst <= 0.5) != plain {
				t.Errorf("%s, plain %v: off by up to %.2f LSB", name, plain, worst)
			}
		}
	}
}

// Slack is reached, nearly, and never passed.
func TestSlackBoundsRounding(t *testing.T) {
	for _, plain := range []bool{false, true} {
		for _, bits := range []int{16, 24} {
			spec := words(1, bits)
			spec.Plain = plain
			full := math.Ldexp(1, bits-1)
			most := 0.0
			for part := range 16 { // between two whole numbers
				x := make([]float64, 20_000)
				for i := range x {
					x[i] = math.Floor(full*audio.DBTP(-12).Linear()) + float64(part)/16
				}
				_, errs := quantiseAs(spec, 0, x)
				for _, e := range errs {
					most = max(most, e)
				}
			}
			slack := (spec.Slack(-12).Linear() - 1) * audio.DBTP(-12).Linear() * full
			if most > slack+1e-6 || most < 0.75*slack {
				t.Errorf("%d bits, plain %v: up to %.3f LSB over, slack %.3f", bits, plain, most, slack)
			}
		}
	}
	if (Spec{BitDepth: 32, Float: true}).Slack(-1) != 0 || (Spec{Codec: "mp3"}).Slack(-1) != 0 {
		t.Error("slack where nothing is rounded")
	}
}

// Slack is how far, dB, rounding can carry a sample over a peak: 1 LSB of dither and ½ of rounding. It is 0 for
// floating point and lossy codecs. At 16 bits and −1 dBTP it is 0.0004 dB.
func (s Spec) Slack(peak audio.DBTP) audio.DB {
	if s.Float || s.BitDepth == 0 {
		return 0
	}
	steps := 1.5
	if s.Plain {
		steps = 0.5
	}
	return audio.DB(audio.ToDB(1 + steps*math.Ldexp(1, 1-s.BitDepth)/peak.Linear()))
}
