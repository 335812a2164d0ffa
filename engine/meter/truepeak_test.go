package meter

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"pgregory.net/rapid"

	"evenshelf/engine/audio"
)

// tolPeak is what true peak is held to up to 0.45 of the rate. EBU R 128 allows ±0.3 dB.
const tolPeak = 0.05 // dB

// faded returns a stereo tone of a tenth of a second at a fraction of the rate, with linear fades of 10 ms.
func faded(rate int, fraction, amplitude, degrees float64) audio.Block {
	b := audio.NewBlock(2, rate/10)
	for i := range b[0] {
		fade := min(1, float64(i)/(0.01*float64(rate)), float64(len(b[0])-1-i)/(0.01*float64(rate)))
		v := float32(fade * amplitude * math.Sin(2*math.Pi*fraction*float64(i)+degrees*math.Pi/180))
		b[0][i], b[1][i] = v, v
	}
	return b
}

func TestTech3341TruePeakTones(t *testing.T) { // cases 15 to 19
	tests := []struct {
		name                         string
		fraction, amplitude, degrees float64
		ideal                        float64 // dBTP
	}{
		{"15", 1.0 / 4, 0.5, 0, -6.02},
		{"16", 1.0 / 4, 0.5, 45, -6.02},
		{"17", 1.0 / 6, 0.5, 60, -6.02},
		{"18", 1.0 / 8, 0.5, 67.5, -6.02},
		{"19", 1.0 / 4, 1.41, 45, 2.98},
	}
	for _, test := range tests {
		for _, rate := range rates {
			r, _ := measure(t, rate, audio.Stereo, faded(rate, test.fraction, test.amplitude, test.degrees))
			near(t, fmt.Sprintf("case %s at %d Hz", test.name, rate), r.TruePeak, test.ideal, 0.02)
		}
	}
}

func TestTech3341TruePeakBursts(t *testing.T) { // cases 20 to 23, from a signal at four times the rate
	var fine []float64
	wave := func(amplitude float64, period, n int) {
		for k := range n {
			fine = append(fine, amplitude*math.Sin(2*math.Pi*float64(k)/float64(period)))
		}
	}
	wave(0.5, 24, 60*24)
	wave(1, 16, 16)
	wave(0.5, 24, 60*24)
	for i := range 240 {
		fine[i] *= float64(i) / 240
		fine[len(fine)-1-i] *= float64(i) / 240
	}
	low := make([]float64, 511) // Kaiser low-pass, β = 9, cut off at 0.12
	for i := range low {
		d := float64(i - 255)
		low[i] = 2 * 0.12 * bessel0(9*math.Sqrt(1-d*d/(255*255))) / bessel0(9)
		if d != 0 {
			low[i] *= math.Sin(2*math.Pi*0.12*d) / (2 * math.Pi * 0.12 * d)
		}
	}
	for offset := range 4 {
		var x []float32
		for at := offset; at < len(fine); at += 4 {
			sum := 0.0
			for i, h := range low {
				if j := at + i - 255; j >= 0 && j < len(fine) {
					sum += h * fine[j]
				}
			}
			x = append(x, float32(sum))
		}
		r, _ := measure(t, 48000, audio.Stereo, audio.Block{x, x})
		near(t, fmt.Sprint("case ", 20+offset), r.TruePeak, -0.08, 0.03)
		near(t, fmt.Sprint("case ", 20+offset, " sample peak"), r.SamplePeak, []float64{-0.13, -0.47, -2.52, -0.47}[offset], 0.01)
	}
}

// A sum of tones under a slow envelope can be evaluated between its samples without any interpolator:
// that is the reference here, on a grid of 64 points a sample.
func TestTruePeakOfTones(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	worst := 0.0
	for range 150 {
		type component struct{ amplitude, w, phase float64 }
		parts := make([]component, 1+rng.IntN(4))
		for i := range parts {
			parts[i] = component{0.1 + rng.Float64(), 2 * math.Pi * 0.45 * rng.Float64(), 2 * math.Pi * rng.Float64()}
		}
		if len(parts) == 1 {
			parts[0].w = 2 * math.Pi * (0.35 + 0.1*rng.Float64())
		}
		const n = 600
		value := func(at float64) (v float64) {
			for _, p := range parts {
				v += p.amplitude * math.Sin(p.w*at+p.phase)
			}
			return v * (0.5 - 0.5*math.Cos(2*math.Pi*at/n)) / 8
		}
		x := make([]float32, n)
		for i := range x {
			x[i] = float32(value(float64(i)))
		}
		want := 0.0
		for i := range n * 64 {
			want = max(want, math.Abs(value(float64(i)/64)))
		}
		r, _ := measure(t, 48000, audio.Mono, audio.Block{x})
		worst = max(worst, math.Abs(float64(r.TruePeak)-audio.ToDB(want)))
	}
	t.Logf("largest error %.4f dB", worst)
	if worst > tolPeak {
		t.Errorf("true peak is off by %.4f dB", worst)
	}
}

// Noise up to 0.45 of the rate, against a windowed sinc six times as long on a grid of 64 points.
func TestTruePeakOfNoise(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	for range 2 {
		white := make([]float32, 400)
		for i := range white {
			white[i] = float32(rng.NormFloat64() / 4)
		}
		x := make([]float32, 260) // low-passed at 0.43, 141 taps: −90 dB from 0.45 on
		for i := range x {
			sum := 0.0
			for k := range 141 {
				d := float64(k - 70)
				h := 2 * 0.43 * bessel0(8.5*math.Sqrt(1-d*d/(70*70))) / bessel0(8.5)
				if d != 0 {
					h *= math.Sin(2*math.Pi*0.43*d) / (2 * math.Pi * 0.43 * d)
				}
				sum += h * float64(white[i+k])
			}
			x[i] = float32(sum * (0.5 - 0.5*math.Cos(2*math.Pi*float64(i)/260)))
		}
		r, _ := measure(t, 44100, audio.Mono, audio.Block{x})
		near(t, "true peak of noise", r.TruePeak, audio.ToDB(naiveTruePeak(x)), tolPeak)
	}
}

// Silence is taken before and after: a programme that starts or stops on a loud sample rings past it.
func TestTruePeakBeyondTheEnds(t *testing.T) {
	for _, n := range []int{1, 2, 31, 32, 33, 64, 1000, 1023, 1024, 1025} {
		x := make([]float32, n)
		for i := range x {
			x[i] = float32(1 - 2*(i%2)) // half the rate, where truncation shows most
		}
		m := newMeter(t, 48000, audio.Mono)
		m.Write(audio.Block{x})
		r, _ := m.Finish()
		want := 0.0
		for _, interval := range gridPeaks(x) {
			want = max(want, slices.Max(interval[:]))
		}
		near(t, fmt.Sprint(n, " samples"), r.TruePeak, audio.ToDB(want), 1e-9)
	}
}

// anySound draws samples of many kinds, those the bounds like least among them.
func anySound(t *rapid.T) []float32 {
	rng := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 0))
	x := make([]float32, rapid.IntRange(1, 3000).Draw(t, "frames"))
	kind := rapid.SampledFrom([]string{"noise", "signs", "tone", "clicks", "walk", "huge"}).Draw(t, "kind")
	w, walk := math.Pi*rng.Float64(), 0.0
	for i := range x {
		switch kind {
		case "noise":
			x[i] = float32(rng.NormFloat64())
		case "signs":
			x[i] = float32(1 - 2*rng.IntN(2))
		case "tone":
			x[i] = float32(math.Sin(w * float64(i)))
		case "clicks":
			if rng.IntN(40) == 0 {
				x[i] = float32(rng.NormFloat64())
			}
		case "walk":
			walk = 0.99*walk + 0.1*rng.NormFloat64()
			x[i] = float32(walk)
		case "huge":
			x[i] = float32(rng.NormFloat64() * 1e37)
		}
	}
	return x
}

// What the bounds skip could not have mattered.
func TestSkippingChangesNothing(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x := anySound(t)
		m := newMeter(t, 48000, audio.Mono)
		m.Write(audio.Block{x})
		m.Finish()
		want := 0.0
		for _, interval := range gridPeaks(x) {
			want = max(want, slices.Max(interval[:]))
		}
		if m.truePeak != want {
			t.Fatalf("true peak %g, of the whole grid %g", m.truePeak, want)
		}
	})
}
