package faults

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

// made returns seconds of a sound, one sample after the other, in one channel at 48 kHz.
func made(seconds float64, fn func(s float64) float64) audio.Block {
	x := make([]float32, int(seconds*48000))
	for i := range x {
		x[i] = float32(fn(float64(i) / 48000))
	}
	return audio.Block{x}
}

// organ is a note of 50 Hz with two overtones.
func organ(s float64) float64 {
	p := 2 * math.Pi * 50 * s
	return 0.2*math.Sin(p) + 0.1*math.Sin(2*p) + 0.05*math.Sin(3*p)
}

// A steady tone of the mains frequency is a matter for a person to hold a copy back for only if it goes on where
// the programme pauses.
func TestSteadyTonesMayBeMeant(t *testing.T) {
	rng := rand.New(rand.NewPCG(11, 12))
	hiss := func(level float64) float64 { return level * rng.NormFloat64() }
	for name, test := range map[string]struct {
		sound    func(s float64) float64
		severity Severity
		pauses   bool
	}{
		"notes of half a second": {func(s float64) float64 {
			if math.Mod(s, 1) < 0.5 {
				return organ(s) + hiss(3e-4)
			}
			return hiss(3e-4)
		}, Note, false},
		"one long note":                  {organ, Note, false},
		"a pedal under a steady descant": {func(s float64) float64 { return 0.25*organ(s) + 0.2*math.Sin(2*math.Pi*1500*s) + hiss(0.1) }, Note, false},
		"hum under sound that pauses": {func(s float64) float64 {
			if math.Mod(s, 8) < 6 {
				return 0.25*organ(s) + hiss(0.1)
			}
			return 0.25*organ(s) + hiss(3e-4)
		}, Doubt, true},
		"soft hum under sound that pauses": {func(s float64) float64 {
			if math.Mod(s, 8) < 6 {
				return 0.02*organ(s) + hiss(0.1)
			}
			return 0.02*organ(s) + hiss(3e-4)
		}, Note, true},
	} {
		f := find(t, look(48000, made(40, test.sound)), "hum")
		if f.Severity != test.severity || strings.Contains(f.Words, "pauses") != test.pauses || strings.Contains(f.Words, "meant") == test.pauses {
			t.Errorf("%s: %+v", name, f)
		}
	}
}

// Chips play square waves that were never cut, with rests too, and pulses that are narrow.
func TestSquareWavesAreNotClipped(t *testing.T) {
	for name, wave := range map[string]func(s float64) float64{
		"square": func(s float64) float64 { return math.Copysign(0.5, 0.5-math.Mod(110*s, 1)) },
		"pulse": func(s float64) float64 {
			if math.Mod(220*s, 1) < 0.25 {
				return 0.75
			}
			return -0.25
		},
		"notes": func(s float64) float64 {
			if math.Mod(s, 0.3) > 0.2 {
				return 0
			}
			return math.Copysign(0.5, 0.5-math.Mod(440*s, 1))
		},
	} {
		if found := codes(look(48000, made(3, wave))); strings.Contains(found, "clipped") {
			t.Errorf("%s: %s", name, found)
		}
	}
}

// A flat top below the recording's extreme is not clipped for being played six times; six flat tops at the same
// height are.
func TestRepeatsAreNotClipped(t *testing.T) {
	rng := rand.New(rand.NewPCG(13, 14))
	bar := func() []float32 {
		x := make([]float32, 24000)
		for i := range x {
			x[i] = float32(0.1 * rng.NormFloat64())
		}
		for i := range 5 {
			x[9000+i] = 0.7
		}
		return x
	}
	loop := bar()
	var looped, played []float32
	for range 6 {
		looped, played = append(looped, loop...), append(played, bar()...)
	}
	looped, played = append(looped, 0.9), append(played, 0.9)
	if found := codes(look(48000, audio.Block{looped})); strings.Contains(found, "clipped") {
		t.Errorf("looped: %s", found)
	}
	if f := find(t, look(48000, audio.Block{played}), "clipped"); !strings.Contains(f.Words, "clipped 6 times") {
		t.Errorf("played: %+v", f)
	}
}

// Time-signal pips and keyed Morse, cut at the top of the wave, stop as they were meant to; a dropout in a note that
// goes on is one still.
func TestKeyedTonesAreNotDropouts(t *testing.T) {
	tone := func(s float64) float64 { return 0.3 * math.Cos(2*math.Pi*1000*s) }
	morse := []byte("#.###.#...###.#.###.#.......###.###.#.###...###.###.###.......")
	for name, on := range map[string]func(s float64) bool{
		"pips":  func(s float64) bool { return math.Mod(s, 1) < 0.1 },
		"morse": func(s float64) bool { return morse[int(s/0.06)%len(morse)] == '#' },
		"slow":  func(s float64) bool { return morse[int(s/0.2)%len(morse)] == '#' },
	} {
		sound := made(20, func(s float64) float64 {
			if on(s) {
				return tone(s)
			}
			return 0
		})
		if found := codes(look(48000, sound)); found != "" {
			t.Errorf("%s: %s", name, found)
		}
	}
	sound := made(20, tone)
	for at := 48000; at < len(sound[0]); at += 48000 {
		clear(sound[0][at : at+4800])
	}
	if f := find(t, look(48000, sound), "dropouts"); !strings.Contains(f.Words, "19 times") {
		t.Errorf("dropouts of a tenth of a second: %+v", f)
	}
}

// What was told of as a dropout or as no number is not told of as a click too; a single zero and a stray sample in
// silence are clicks.
func TestNothingIsReportedTwice(t *testing.T) {
	sound := func() []float32 {
		return made(4, func(s float64) float64 { return 0.3 * math.Cos(2*math.Pi*300*s) })[0]
	}
	for name, test := range map[string]struct {
		harm func(x []float32)
		want string
	}{
		"hole":       {func(x []float32) { clear(x[96000:96480]) }, "dropouts"},
		"short hole": {func(x []float32) { clear(x[96000:96100]) }, "dropouts"},
		"no number":  {func(x []float32) { x[96000] = float32(math.NaN()) }, "not-numbers"},
		"no numbers": {func(x []float32) { x[96000], x[96900] = float32(math.NaN()), float32(math.Inf(1)) }, "not-numbers"},
		"one zero":   {func(x []float32) { x[96000] = 0 }, "clicks"},
		"two zeros":  {func(x []float32) { clear(x[96000:96002]) }, "clicks"},
		"in silence": {func(x []float32) { clear(x[48000:]); x[96000] = 0.5; x[190000] = 0.3 }, "clicks"},
	} {
		x := sound()
		test.harm(x)
		got := strings.Fields(codes(look(48000, audio.Block{x})))
		want := strings.Fields(test.want)
		slices.Sort(got)
		slices.Sort(want)
		if !slices.Equal(got, want) {
			t.Errorf("%s: %v, want %v", name, got, want)
		}
	}
}
