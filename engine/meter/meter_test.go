package meter

import (
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"

	"pgregory.net/rapid"

	"evenshelf/engine/audio"
)

// music draws something with a beat, pauses and two different channels.
func music(seed uint64, rate, frames int) audio.Block {
	rng := rand.New(rand.NewPCG(seed, 1))
	b := audio.NewBlock(2, frames)
	phrase := max(1, rate*7/10)
	for c := range b {
		level, low := 0.0, 0.0
		for i := range b[c] {
			if i%phrase == 0 {
				level = math.Pow(10, -3*rng.Float64())
			}
			white := rng.NormFloat64()
			low += 0.1 * (white - low)
			b[c][i] = float32(level * (low + 0.1*white))
		}
	}
	return b
}

// The fast meter reads what the slow one reads: gating is exact, also at rates of which 100 ms are not whole
// samples. There the standard's "to the nearest sample" can be read in two ways, of the edges or of the
// length of a block; they do not differ by as much as 0.005 LU.
func TestAgainstTheSlowMeter(t *testing.T) {
	for _, rate := range []int{8000, 11025, 16000, 22050, 44100, 48000} {
		for seed := range uint64(3) {
			b := music(seed, rate, rate*6+int(seed)*3333)
			r, _ := measure(t, rate, audio.Stereo, b)
			slow := naiveMeasure(b, rate)
			near(t, "integrated", r.Integrated, slow.integrated, 1e-6)
			near(t, "integrated over blocks of one length", r.Integrated, slow.equalBlocks, 0.005)
			near(t, "range", r.Range, slow.lra, 1e-6)
			near(t, "max momentary", r.MaxMomentary, slow.maxMomentary, 1e-6)
			near(t, "max short-term", r.MaxShortTerm, slow.maxShortTerm, 1e-6)
		}
	}
}

func TestBlocksDoNotMatter(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		rate := rapid.SampledFrom([]int{8000, 11025, 44100, 48000}).Draw(t, "rate")
		b := music(rapid.Uint64().Draw(t, "seed"), rate, rapid.IntRange(0, 4*rate).Draw(t, "frames"))
		whole, wholeLine := measure(t, rate, audio.Stereo, b)
		m := newMeter(t, rate, audio.Stereo)
		view := make(audio.Block, 2)
		for at := 0; at < b.Frames(); {
			to := min(b.Frames(), at+rapid.IntRange(0, 30000).Draw(t, "block"))
			m.Write(b.Cut(view, at, to))
			at = to
		}
		parts, partsLine := m.Finish()
		if got, want := fmt.Sprintf("%v", parts), fmt.Sprintf("%v", whole); got != want {
			t.Fatalf("in blocks %s, at once %s", got, want)
		}
		if !reflect.DeepEqual(partsLine, wholeLine) {
			t.Fatal("the timelines differ")
		}
	})
}

func TestGainShiftsTheReading(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		gain := rapid.Float64Range(-10, 20).Draw(t, "gain")
		b := music(rapid.Uint64().Draw(t, "seed"), 16000, 16000*5)
		for c := range b {
			for i := range b[c] { // keep every block above the absolute gate, which does not shift
				b[c][i] += float32(0.01 * math.Sin(float64(i)))
			}
		}
		r, _ := measure(t, 16000, audio.Stereo, b)
		scale(b[0], audio.DB(gain).Linear())
		scale(b[1], audio.DB(gain).Linear())
		s, _ := measure(t, 16000, audio.Stereo, b)
		compareReadings(t, "after the gain", s, r, gain, 1e-5)
	})
}

func TestChannelsChangePlaces(t *testing.T) {
	b := music(1, 44100, 5*44100)
	r, _ := measure(t, 44100, audio.Stereo, b)
	s, _ := measure(t, 44100, audio.Stereo, audio.Block{b[1], b[0]})
	compareReadings(t, "left and right exchanged", s, r, 0, 0)
}

// LFE counts for peaks and for nothing else.
func TestLowFrequencyIsLeftOut(t *testing.T) {
	front := music(2, 48000, 4*48000)
	scale(front[0], 0.1)
	scale(front[1], 0.1)
	silence := make([]float32, front.Frames())
	lfe := tone(48000, 40, 1, part{4, 0})[0]
	with, _ := measure(t, 48000, audio.UsualLayout(6), audio.Block{front[0], front[1], silence, lfe, silence, silence})
	without, _ := measure(t, 48000, audio.Stereo, front)
	if with.Integrated != without.Integrated || with.Range != without.Range {
		t.Errorf("with LFE %+v, without %+v", with, without)
	}
	near(t, "sample peak", with.SamplePeak, 0, 0.001)
}

// Silence after a programme adds three blocks that hold its last 300, 200 and 100 ms (BS.1770 counts
// them); what follows is gated. So the reading stays, to the last bit, from 400 ms of silence on, and
// before that it is the slow meter's.
func TestSilenceAfterTheProgramme(t *testing.T) {
	b := music(3, 48000, 5*48000)
	followed := func(seconds float64) audio.Block {
		out := audio.NewBlock(2, b.Frames()+int(seconds*48000))
		copy(out[0], b[0])
		copy(out[1], b[1])
		return out
	}
	reference, _ := measure(t, 48000, audio.Stereo, followed(0.4))
	for _, seconds := range []float64{0.5, 1, 10, 60} {
		r, _ := measure(t, 48000, audio.Stereo, followed(seconds))
		r.RMS, r.CrestFactor, r.Range = reference.RMS, reference.CrestFactor, reference.Range // of more, and quieter, sound
		r.ShortTerm10, r.ShortTerm50, r.ShortTerm95 = reference.ShortTerm10, reference.ShortTerm50, reference.ShortTerm95
		compareReadings(t, fmt.Sprintf("after %g s of silence", seconds), r, reference, 0, 0)
	}
	for _, seconds := range []float64{0, 0.1, 0.2, 0.3} {
		r, _ := measure(t, 48000, audio.Stereo, followed(seconds))
		near(t, fmt.Sprintf("after %g s of silence", seconds), r.Integrated, naiveMeasure(followed(seconds), 48000).integrated, 1e-6)
	}
}

// What cannot be measured is null, never 0 and never a made-up figure.
func TestUndefinedFigures(t *testing.T) {
	defined := func(r Reading) string {
		j, err := json.Marshal(r)
		if err != nil {
			t.Fatal(err)
		}
		var names []string
		for _, pair := range strings.Split(strings.Trim(string(j), "{}"), ",") {
			if name, value, _ := strings.Cut(pair, ":"); value != "null" && name != `"mono_rule"` {
				names = append(names, strings.Trim(name, `"`))
			}
		}
		return strings.Join(names, " ")
	}
	const always = "sample_rate_hz channels layout frames duration_s"
	const peaks = " true_peak_dbtp sample_peak_dbfs"
	const percentiles = " short_term_p10_lufs short_term_p50_lufs short_term_p95_lufs"
	const all = always + " integrated_lufs loudness_range_lu max_momentary_lufs max_short_term_lufs" +
		percentiles + peaks + " plr_lu min_psr_lu rms_dbfs crest_factor_db noise_floor_lufs"
	tests := []struct {
		name  string
		parts []part
		want  string
	}{
		{"nothing at all", nil, always},
		{"silence", []part{{10, silent}}, always},
		{"399 ms", []part{{0.399, -20}}, always + peaks + " rms_dbfs crest_factor_db"},
		{"400 ms", []part{{0.4, -20}}, always + " integrated_lufs max_momentary_lufs" + percentiles + peaks +
			" plr_lu rms_dbfs crest_factor_db noise_floor_lufs"},
		{"3 s", []part{{3, -20}}, all},
		{"3 s below the gate", []part{{3, -80}}, always + " max_momentary_lufs max_short_term_lufs" + peaks +
			" rms_dbfs crest_factor_db noise_floor_lufs"},
	}
	for _, test := range tests {
		for _, rate := range []int{8000, 11025, 44100} {
			r, _ := measure(t, rate, audio.Stereo, tone(rate, 1000, 2, test.parts...))
			if got := defined(r); got != test.want {
				t.Errorf("%s at %d Hz: defined are %s, want %s", test.name, rate, got, test.want)
			}
		}
	}
}

func TestSamplesThatAreNoNumbers(t *testing.T) {
	b := tone(48000, 1000, 2, part{5, -20})
	odd := []float32{float32(math.NaN()), float32(math.Inf(1)), float32(math.Inf(-1))}
	for i := range 300 {
		b[i%2][1000+i*700] = odd[i%3]
	}
	m := newMeter(t, 48000, audio.Stereo)
	m.Write(b)
	r, _ := m.Finish()
	if m.BadSamples() != 300 {
		t.Errorf("%d bad samples, want 300", m.BadSamples())
	}
	near(t, "integrated", r.Integrated, -19.99, 0.1)
	near(t, "sample peak", r.SamplePeak, -20, 0.01)
	huge := audio.Block{make([]float32, 48000)}
	for i := range huge[0] {
		huge[0][i] = math.MaxFloat32 * float32(1-2*(i/50%2))
	}
	r, _ = measure(t, 48000, audio.Mono, huge)
	for name, v := range map[string]float64{"integrated": float64(r.Integrated), "true peak": float64(r.TruePeak), "PLR": float64(r.PLR)} {
		if !audio.Defined(v) {
			t.Errorf("the largest samples there are: %s is %g", name, v)
		}
	}
}

func TestResetForgets(t *testing.T) {
	b := music(4, 44100, 5*44100)
	want, wantLine := measure(t, 44100, audio.Stereo, b)
	m := newMeter(t, 44100, audio.Stereo)
	m.Write(tone(44100, 50, 2, part{7.777, 6}))
	m.Finish()
	m.Reset()
	m.Write(b)
	if got, line := m.Finish(); got != want || !reflect.DeepEqual(line, wantLine) {
		t.Errorf("after Reset %+v, want %+v", got, want)
	}
}

// Each entry of the timeline describes the window that ends with it; the last may end in silence.
func TestTimeline(t *testing.T) {
	r, line := measure(t, 48000, audio.Stereo, tone(48000, 1000, 2, part{1, -20}, part{1, silent}, part{2.55, -10}))
	if n := len(line.Momentary); n != 46 || len(line.ShortTerm) != n || len(line.Peak) != n || line.Step != 0.1 {
		t.Fatalf("%d values a %g s in a programme of %g s", n, line.Step, r.Duration)
	}
	for _, at := range []struct {
		seconds, momentary, shortTerm, peak float64
	}{
		{0.1, -20, -20, -20},         // windows are shorter at the start
		{1, -20, -20, -20},           //
		{1.2, -23.01, -20.79, -1000}, // half of 400 ms, 1 s of 1.2 s
		{1.5, math.Inf(-1), -21.76, -1000},
		{4.5, -10, -10.79, -10},    // 2.5 s of 3 s
		{4.6, -10.58, -10.71, -10}, // 350 ms of 400, 2.55 s of 3 s
	} {
		i := int(math.Round(at.seconds*10)) - 1
		check := func(what string, got float32, want float64) {
			if want < -900 {
				if got > -100 {
					t.Errorf("%s at %.1f s: %g, want silence", what, at.seconds, got)
				}
				return
			}
			near(t, fmt.Sprintf("%s at %.1f s", what, at.seconds), float64(got), want, 0.03)
		}
		check("momentary", line.Momentary[i], at.momentary)
		check("short-term", line.ShortTerm[i], at.shortTerm)
		check("peak", line.Peak[i], at.peak)
	}
}

func TestWriteDoesNotAllocate(t *testing.T) {
	m, b := newMeter(t, 48000, audio.Stereo), music(5, 48000, audio.BlockFrames)
	for range 200 {
		m.Write(b)
	}
	m.Reset() // the lists keep their room
	if n := testing.AllocsPerRun(100, func() { m.Write(b) }); n != 0 {
		t.Errorf("%g allocations a block", n)
	}
}
