package meter

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"sync"
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

// peakCase is one of cases 15 to 19.
func peakCase(name string, fraction, amplitude, degrees float64) ebuCase {
	return ebuCase{name, amplitude > 1, func(e *ebu) {
		r, _ := e.measure(e.depth.hold(faded(e.rate, fraction, amplitude, degrees)))
		e.reads(float64(r.TruePeak), audio.ToDB(amplitude))
	}}
}

// burstCase is one of cases 20 to 23. They are given in fractions of the rate, so that every rate has the
// same samples. The ideal is the peak of the signal they are taken from.
func burstCase(name string, offset int) ebuCase {
	return ebuCase{name, false, func(e *ebu) {
		fine, peak := burst()
		var x []float32
		largest := 0.0
		for at := offset; at < len(fine); at += 4 {
			x = append(x, fine[at])
			largest = max(largest, math.Abs(float64(fine[at])))
		}
		r, _ := e.measure(e.depth.hold(audio.Block{x, slices.Clone(x)}))
		e.reads(float64(r.TruePeak), peak)
		e.reads(float64(r.SamplePeak), audio.ToDB(largest))
	}}
}

// burst returns the signal of cases 20 to 23 at four times the rate, low-passed, and its true peak in dB:
// one period of a quarter of the rate at full scale amid a sixth of the rate at half.
var burst = sync.OnceValues(func() ([]float32, float64) {
	var raw []float64
	wave := func(amplitude float64, period, n int) {
		for k := range n {
			raw = append(raw, amplitude*math.Sin(2*math.Pi*float64(k)/float64(period)))
		}
	}
	wave(0.5, 24, 60*24)
	wave(1, 16, 16)
	wave(0.5, 24, 60*24)
	for i := range 240 {
		raw[i] *= float64(i) / 240
		raw[len(raw)-1-i] *= float64(i) / 240
	}
	low := lowPass(255, 0.12, 9)
	fine := make([]float32, len(raw))
	for at := range fine {
		sum := 0.0
		for i, h := range low {
			if j := at + i - 255; j >= 0 && j < len(raw) {
				sum += h * raw[j]
			}
		}
		fine[at] = float32(sum)
	}
	peak := 0.0 // of the middle; the rest is half as loud
	for i := 16 * (60*24 - 20); i < 16*(60*24+36); i++ {
		peak = max(peak, math.Abs(naiveAt(fine, float64(i)/16)))
	}
	return fine, audio.ToDB(peak)
})

// lowPass returns a Kaiser low-pass of 2·half + 1 taps, cut off at a fraction of the rate.
func lowPass(half int, cutoff, beta float64) []float64 {
	h := make([]float64, 2*half+1)
	for i := range h {
		d := float64(i - half)
		h[i] = 2 * cutoff * audio.Bessel0(beta*math.Sqrt(1-d*d/float64(half*half))) / audio.Bessel0(beta)
		if d != 0 {
			h[i] *= math.Sin(2*math.Pi*cutoff*d) / (2 * math.Pi * cutoff * d)
		}
	}
	return h
}

// Overs are kept: case 19 at every rate reads the 2.98 dB it has.
func TestOversArePreserved(t *testing.T) {
	for _, rate := range []int{8000, 44100, 192000, 384000} {
		r, _ := measure(t, rate, audio.Stereo, faded(rate, 1.0/4, 1.41, 45))
		near(t, fmt.Sprint("true peak at ", rate), r.TruePeak, audio.ToDB(1.41), tenth)
		near(t, fmt.Sprint("sample peak at ", rate), r.SamplePeak, audio.ToDB(1.41*math.Sqrt(0.5)), tenth)
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
		rate := []int{8000, 44100, 192000}[rng.IntN(3)]
		r, _ := measure(t, rate, audio.Mono, audio.Block{x})
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
		low := lowPass(70, 0.43, 8.5) // −90 dB from 0.45 on
		x := make([]float32, 260)
		for i := range x {
			sum := 0.0
			for k, h := range low {
				sum += h * float64(white[i+k])
			}
			x[i] = float32(sum * (0.5 - 0.5*math.Cos(2*math.Pi*float64(i)/260)))
		}
		r, _ := measure(t, 44100, audio.Mono, audio.Block{x})
		near(t, "true peak of noise", r.TruePeak, audio.ToDB(naiveTruePeak(x)), tolPeak)
	}
}

// A sound that is there from the first frame to the last, with silence beyond both, has its peak at either
// end, over full scale, as steep as 0.45 of the rate allows. Against the same long windowed sinc, at rates
// whose steps and chunks fall differently. A tone cut off between two samples is steeper than that: it has
// sound up to half the rate, and is logged apart.
func TestTruePeakAtTheEnds(t *testing.T) {
	rng := rand.New(rand.NewPCG(9, 9))
	low := lowPass(70, 0.43, 8.5)
	steep, cutOff := 0.0, 0.0
	for i := range 12 {
		rate := []int{8000, 44100, 192000}[i%3]
		tone := make([]float64, 70)
		w, phase, end := math.Pi*(0.2+0.7*rng.Float64()), 2*math.Pi*rng.Float64(), rng.IntN(2)
		for i := range tone {
			at := float64(i) / float64(len(tone)-1)
			tone[i] = 1.7 * math.Sin(w*float64(i)+phase) * math.Abs(float64(end)-at)
		}
		err := func(x []float32) float64 {
			r, _ := measure(t, rate, audio.Mono, audio.Block{x})
			return math.Abs(float64(r.TruePeak) - audio.ToDB(naiveTruePeak(x)))
		}
		x, rough := make([]float32, len(tone)+len(low)-1), make([]float32, len(tone))
		for i := range x {
			sum := 0.0
			for k, h := range low {
				if j := i - k; j >= 0 && j < len(tone) {
					sum += h * tone[j]
				}
			}
			x[i] = float32(sum)
		}
		for i, v := range tone {
			rough[i] = float32(v)
		}
		steep, cutOff = max(steep, err(x)), max(cutOff, err(rough))
	}
	t.Logf("largest error %.4f dB; of tones cut off %.4f dB", steep, cutOff)
	if steep > tolPeak || cutOff > 0.3 { // EBU R 128 allows 0.3
		t.Errorf("true peak is off by %.4f dB, of tones cut off by %.4f dB", steep, cutOff)
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
		m := newMeter(t, rapid.SampledFrom([]int{8000, 11025, 48000}).Draw(t, "rate"), audio.Mono)
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
