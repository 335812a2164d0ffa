package meter

import (
	"encoding/json"
	"math"
	"os"
	"testing"

	"evenshelf/engine/audio"
)

// The signals of testdata/expected.py, by the same formulas. Each maker gives the channels in float64;
// expectedSound fades and rounds them.
var expectedSignals = map[string]struct {
	make     func(rate, n int) [][]float64
	rate     int
	seconds  float64
	channels int
}{
	"sweep":     {sweepSound, 48000, 8, 2},
	"steps":     {stepsSound, 44100, 17, 2},
	"steps 48":  {stepsSound, 48000, 17, 2},
	"steps 11":  {stepsSound, 11025, 16.21, 2},
	"steps 22":  {stepsSound, 22050, 12.5, 2},
	"bursts":    {burstsSound, 8000, 11.3, 1},
	"bursts 16": {burstsSound, 16000, 9.05, 1},
	"surround":  {surroundSound, 48000, 6.5, 6},
	"tones 32":  {tonesSound, 32000, 7, 2},
	"tones 96":  {tonesSound, 96000, 6, 2},
}

// numpy and scipy, sharing nothing with this package, read the same: testdata/expected.json is what
// testdata/expected.py wrote.
func TestScipyReadsTheSame(t *testing.T) {
	const tolerance, tolerancePeak = 0.005, 0.05
	file, err := os.ReadFile("testdata/expected.json")
	if err != nil {
		t.Fatal(err)
	}
	var table map[string]Reading
	if err := json.Unmarshal(file, &table); err != nil {
		t.Fatal(err)
	}
	if len(table) != len(expectedSignals) {
		t.Errorf("%d signals in the table, %d here", len(table), len(expectedSignals))
	}
	worst := make(map[string]float64)
	for name, signal := range expectedSignals {
		want := table[name]
		b := expectedSound(signal.make, signal.rate, signal.seconds)
		r, _ := measure(t, signal.rate, audio.UsualLayout(signal.channels), b)
		if r.SampleRate != want.SampleRate || r.Channels != want.Channels || r.Frames != want.Frames {
			t.Errorf("%s: %d Hz, %d channels, %d frames in the table", name, want.SampleRate, want.Channels, want.Frames)
		}
		got, stay := levelsOf(r)
		for figure, v := range stay {
			got[figure] = v
		}
		expected, stay := levelsOf(want)
		for figure, v := range stay {
			expected[figure] = v
		}
		for figure, v := range got {
			limit := tolerance
			if figure == "true peak" || figure == "PLR" || figure == "PSR" {
				limit = tolerancePeak
			}
			near(t, name+": "+figure, v, expected[figure], limit)
			worst[figure] = max(worst[figure], math.Abs(v-expected[figure]))
		}
	}
	for figure, d := range worst {
		t.Logf("largest difference %.5f: %s", d, figure)
	}
}

//go:norace
func expectedSound(make func(rate, n int) [][]float64, rate int, seconds float64) audio.Block {
	n, fade := int(math.Round(seconds*float64(rate))), float64(rate/100)
	channels := make(rate, n)
	b := audio.NewBlock(len(channels), n)
	for c, x := range channels {
		for i, v := range x {
			b[c][i] = float32(v * (0.5 - 0.5*math.Cos(math.Pi*min(1, float64(min(i, n-1-i))/fade))))
		}
	}
	return b
}

// congruent returns noise: a 32-bit linear congruence, its top 24 bits as −1 … 1, through two one-pole
// low-passes.
//
//go:norace
func congruent(seed uint32, n int) []float64 {
	x := make([]float64, n)
	y, z := 0.0, 0.0
	for i := range x {
		seed = seed*1664525 + 1013904223
		y += 0.25 * (float64(seed>>8)/8388608 - 1 - y)
		z += 0.25 * (y - z)
		x[i] = z
	}
	return x
}

// gainOf returns the gain at frame i that takes the next value of a list, round and round.
func gainOf(i, rate int, seconds float64, decibels ...float64) float64 {
	return math.Pow(10, decibels[int(float64(i)/(seconds*float64(rate)))%len(decibels)]/20)
}

// fill returns n values of a formula.
//
//go:norace
func fill(n int, value func(i int) float64) []float64 {
	x := make([]float64, n)
	for i := range x {
		x[i] = value(i)
	}
	return x
}

func sweepSound(rate, n int) [][]float64 {
	length := float64(n) / float64(rate)
	phase := func(i int) float64 {
		t := float64(i) / float64(rate)
		return 2 * math.Pi * 20 * length / math.Log(1000) * (math.Pow(1000, t/length) - 1)
	}
	return [][]float64{
		fill(n, func(i int) float64 { return 0.5 * math.Sin(phase(i)) }),
		fill(n, func(i int) float64 { return 0.25 * math.Sin(phase(i)+1) }),
	}
}

func stepsSound(rate, n int) [][]float64 {
	l, r := congruent(1, n), congruent(2, n)
	gain := func(i int) float64 { return gainOf(i, rate, 1.37, 0, -15, -30, -3, -45, 2, -20, -10, -60, -6, -35) }
	return [][]float64{
		fill(n, func(i int) float64 { return gain(i) * l[i] }),
		fill(n, func(i int) float64 { return 0.7 * gain(i) * r[i] }),
	}
}

func burstsSound(rate, n int) [][]float64 {
	hiss := congruent(3, n)
	return [][]float64{fill(n, func(i int) float64 {
		t := float64(i) / float64(rate)
		envelope := 0.0
		if within := math.Mod(t, 0.7); within < 0.3 {
			envelope = 0.5 - 0.5*math.Cos(2*math.Pi*within/0.3)
		}
		return gainOf(i, rate, 0.7, 0, -6, -12, -18, -24)*envelope*math.Sin(2*math.Pi*1234.5*t) + 0.001*hiss[i]
	})}
}

func surroundSound(rate, n int) [][]float64 {
	x := make([][]float64, 6)
	for c, g := range []float64{0.5, 0.4, 0.6, 0, 0.3, 0.35} {
		hiss := congruent(uint32(10+c), n)
		x[c] = fill(n, func(i int) float64 { return g * gainOf(i, rate, 0.9, 0, -8, -20) * hiss[i] })
	}
	x[3] = fill(n, func(i int) float64 { return 0.9 * math.Sin(2*math.Pi*50*float64(i)/float64(rate)) })
	return x
}

func tonesSound(rate, n int) [][]float64 {
	at := func(hz float64, i int, phase float64) float64 {
		return math.Sin(2*math.Pi*hz*float64(i)/float64(rate) + phase)
	}
	swell := func(i int) float64 { return 0.6 + 0.4*at(0.31, i, 0) }
	top := float64(rate)
	return [][]float64{
		fill(n, func(i int) float64 { return swell(i) * (0.4*at(997, i, 0) + 0.2*at(0.21*top, i, 0.3)) }),
		fill(n, func(i int) float64 { return swell(i) * (0.3*at(440, i, 0) + 0.25*at(0.437*top, i, 0)) }),
	}
}
