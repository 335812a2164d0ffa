package faults

import (
	"math"
	"math/rand/v2"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

// look returns the faults of a sound.
func look(rate int, b audio.Block) []Fault {
	d := New(audio.Format{Rate: rate, Layout: audio.UsualLayout(len(b))})
	d.Write(b)
	found, _ := d.Finish()
	return found
}

// find returns the fault of a code, or fails.
func find(t testing.TB, found []Fault, code string) Fault {
	t.Helper()
	for _, f := range found {
		if f.Code == code {
			return f
		}
	}
	t.Fatalf("%q was not found, but %v", code, found)
	return Fault{}
}

// codes lists what was found.
func codes(found []Fault) string {
	var all []string
	for _, f := range found {
		all = append(all, f.Code)
	}
	return strings.Join(all, " ")
}

// clone copies a sound, so that it can be harmed.
func clone(b audio.Block) audio.Block {
	c := audio.NewBlock(len(b), b.Frames())
	for i := range b {
		copy(c[i], b[i])
	}
	return c
}

// each replaces every sample.
func each(b audio.Block, fn func(c, i int, v float64) float64) audio.Block {
	out := clone(b)
	for c, x := range out {
		for i, v := range x {
			x[i] = float32(fn(c, i, float64(v)))
		}
	}
	return out
}

// driven returns b with its largest sample brought gain dB past full scale, clipped there, brought down by
// fade dB again and written to 16 bits.
func driven(b audio.Block, gain, fade float64) audio.Block {
	peak := 0.0
	for _, x := range b {
		top, bottom := extremes(x)
		peak = max(peak, float64(top), float64(bottom))
	}
	up, down := math.Pow(10, gain/20)/peak, math.Pow(10, -fade/20)
	return each(b, func(_, _ int, v float64) float64 {
		return math.Round(min(1, max(-1, v*up))*down*32767) / 32768
	})
}

// Nothing but what is truly there may be said of real recordings. The readings of the speech carry an
// offset of 0.7 % of full scale, as their own mean shows; the music and the single words are clean.
func TestNoFalseAlarms(t *testing.T) {
	seconds, alarms := 0.0, 0
	for _, r := range recordings(t) {
		mean := 0.0
		for _, v := range r.sound[0] {
			mean += float64(v) / float64(r.sound.Frames())
		}
		found := look(r.rate, r.sound)
		seconds += float64(r.sound.Frames()) / float64(r.rate)
		for _, f := range found {
			if f.Code == "dc-offset" && f.Severity == Note && math.Abs(mean) > offsetNote {
				continue
			}
			alarms++
			t.Errorf("%s: %+v", filepath.Base(r.path), f)
		}
	}
	t.Logf("%d false alarms in %.0f s", alarms, seconds)
}

func TestClippingIsFound(t *testing.T) {
	for _, r := range recordings(t) {
		for _, test := range []struct{ gain, fade float64 }{{12, 0}, {12, 9}} {
			f := find(t, look(r.rate, driven(r.sound, test.gain, test.fade)), "clipped")
			if f.Severity != Serious {
				t.Errorf("%s clipped by %g dB, then %g dB down: %+v", filepath.Base(r.path), test.gain, test.fade, f)
			}
		}
		for _, f := range look(r.rate, driven(r.sound, 1, 0)) {
			if f.Code == "clipped" && f.Severity != Note {
				t.Errorf("%s with a few clipped tops: %+v", filepath.Base(r.path), f)
			}
		}
	}
}

// The count, place and words of clipping that is put in by hand: ten tops of five samples.
func TestClippingIsCounted(t *testing.T) {
	x := make([]float32, 44100*4)
	for i := range x {
		x[i] = float32(0.5 * math.Sin(2*math.Pi*440*float64(i)/44100))
	}
	for k := range 10 {
		at := 44100 + 8820*k
		for j := range 5 {
			x[at+j] = -0.9
		}
	}
	f := find(t, look(44100, audio.Block{x}), "clipped")
	want := Fault{Code: "clipped", Severity: Note, At: 1, Length: 50.0 / 44100, Words: "clipped 10 times, first at 0:01.0"}
	if f != want {
		t.Errorf("got %+v, want %+v", f, want)
	}
}

// Round tops are flat at 16 bits, let alone 8, and loud masters touch the top with single samples.
func TestRoundTopsAreNotClipping(t *testing.T) {
	for _, steps := range []float64{128, 32768, 1 << 23} {
		for _, rate := range []int{16000, 44100, 96000, 192000} {
			for _, hz := range []float64{20, 31.5, 50, 100, 440, 1000, 3000} {
				for _, level := range []float64{0, -6, -20, -40} {
					amplitude := math.Pow(10, level/20) * (1 - 1/steps)
					x := make([]float32, rate/2)
					for i := range x {
						x[i] = float32(math.Round(amplitude*math.Sin(2*math.Pi*hz*float64(i)/float64(rate))*steps) / steps)
					}
					if found := codes(look(rate, audio.Block{x})); strings.Contains(found, "clipped") {
						t.Errorf("%g Hz at %g dBFS in steps of 1/%g at %d Hz: %s", hz, level, steps, rate, found)
					}
				}
			}
		}
	}
}

func TestFaultsPutInAreFound(t *testing.T) {
	var music, speech recording
	for _, r := range recordings(t) {
		if len(r.sound) == 2 {
			music = r
		} else if r.sound.Frames() > speech.sound.Frames() {
			speech = r
		}
	}
	b, rate := music.sound, music.rate
	padded := func(head, tail float64) audio.Block {
		h := int(head * float64(rate))
		out := audio.NewBlock(2, h+b.Frames()+int(tail*float64(rate)))
		for c := range out {
			copy(out[c][h:], b[c])
		}
		return out
	}
	hole := func(sound audio.Block, at, frames int) audio.Block {
		return each(sound, func(_, i int, v float64) float64 {
			if i >= at && i < at+frames {
				return 0
			}
			return v
		})
	}
	tests := []struct {
		name     string
		rate     int
		sound    audio.Block
		code     string
		severity Severity
		at       float64
		words    string // part of it
	}{
		{"offset", rate, each(b, func(c, _ int, v float64) float64 { return v*0.5 + 0.02*float64(c) }), "dc-offset", Note, 0, "the right channel lies 2."},
		{"large offset", rate, each(b, func(_, _ int, v float64) float64 { return v*0.5 - 0.1 }), "dc-offset", Doubt, 0, "below the middle"},
		{"silence", rate, each(b, func(_, _ int, v float64) float64 { return v * 1e-5 }), "silent", Serious, 0, "nothing in it is above −70 dBFS"},
		{"head", rate, padded(2.5, 0), "head-silence", Note, 0, "s of silence before the first sound"},
		{"tail", rate, padded(0, 4), "tail-silence", Note, float64(b.Frames()) / float64(rate), "s of silence after the last sound"},
		{"not numbers", rate, each(b, func(c, i int, v float64) float64 {
			if c == 1 && (i == rate || i == 2*rate) {
				return math.NaN()
			}
			return v
		}), "not-numbers", Serious, 1, "2 samples are not numbers, first at 0:01.0"},
		{"infinite", rate, each(b, func(c, i int, v float64) float64 {
			if c == 0 && i == rate {
				return math.Inf(-1)
			}
			return v
		}), "not-numbers", Serious, 1, "one sample, at 0:01.0"},
		{"no right", rate, each(b, func(c, _ int, v float64) float64 { return v * float64(1-c) }), "channel-missing", Doubt, 0, "the right channel is missing"},
		{"hiss left", rate, each(b, func(c, i int, v float64) float64 {
			if c == 0 {
				return 3e-4 * math.Sin(float64(i))
			}
			return v
		}), "channel-missing", Doubt, 0, "the left channel is missing"},
		{"twins", rate, audio.Block{b[0], b[0]}, "dual-mono", Note, 0, "the same sound"},
		{"quieter twin", rate, each(audio.Block{b[0], b[0]}, func(c, _ int, v float64) float64 { return v / float64(1+c) }), "dual-mono", Note, 0, "the same sound"},
		{"far quieter twin", rate, each(audio.Block{b[0], b[0]}, func(c, _ int, v float64) float64 { return v * (1 - 0.7*float64(c)) }), "unbalanced", Doubt, 0, "the right channel is 10 dB weaker than the left channel"},
		{"to the left", rate, each(b, func(c, _ int, v float64) float64 { return v * (1 - 0.8*float64(c)) }), "unbalanced", Note, 0, "the right channel is 1"},
		{"very low", rate, each(b, func(_, _ int, v float64) float64 { return v * 0.008 }), "near-silent", Note, 0, "almost silent: nothing in it is above −4"},
		{"pause", rate, hole(b, 12*rate, 5*rate/2), "silence-inside", Note, 12, "complete silence inside once, first at 0:12.0, 2.5 s in all"},
		{"hole on the right", rate, each(b, func(c, i int, v float64) float64 {
			if c == 1 && i >= 20*rate && i < 20*rate+220 {
				return 0
			}
			return v
		}), "dropouts", Doubt, 20, "the right channel breaks off once, first at 0:20.0; the longest hole lasts 10 ms"},
		{"stray samples", rate, each(b, func(c, i int, v float64) float64 {
			if i == 10*rate || c == 1 && i == 20*rate {
				return v - 0.9*math.Copysign(1, v)
			}
			return v
		}), "clicks", Note, 10, "it clicks twice, first at 0:10.0"},
		{"upside down", rate, each(b, func(c, _ int, v float64) float64 { return v * float64(1-2*c) }), "polarity", Doubt, 0, "upside down"},
		{"hole", rate, hole(b, 20*rate, 220), "dropouts", Doubt, 20, "breaks off once, first at 0:20.0; the longest hole lasts 10 ms"},
		{"hole across windows", rate, hole(b, 20*rate-22, 66), "dropouts", Doubt, 20, "breaks off once, first at 0:20.0; the longest hole lasts 3 ms"},
	}
	for _, test := range tests {
		t.Run(test.name, func(t *testing.T) {
			found := look(test.rate, test.sound)
			f := find(t, found, test.code)
			if f.Severity != test.severity || math.Abs(f.At-test.at) > 0.05 || !strings.Contains(f.Words, test.words) {
				t.Errorf("got %+v, want %s at %g s: …%s…", f, test.severity, test.at, test.words)
			}
		})
	}
}

// How surely a dropout is found: holes of 3 to 300 ms at random places of the sounding music.
func TestDropoutsAreFoundAnywhere(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 8))
	r := recordings(t)[0]
	piece := r.sound.Cut(make(audio.Block, 2), 15*r.rate, 20*r.rate)
	found, tries := 0, 100
	for range tries {
		sound := clone(piece)
		at, length := r.rate+rng.IntN(3*r.rate), 3*r.rate/1000+rng.IntN(297*r.rate/1000)
		for _, x := range sound {
			clear(x[at : at+length])
		}
		if f := look(r.rate, sound); strings.Contains(codes(f), "dropouts") && math.Abs(find(t, f, "dropouts").At-float64(at)/float64(r.rate)) < 1e-3 {
			found++
		}
	}
	t.Logf("%d of %d found", found, tries)
	if found < 80 {
		t.Errorf("only %d of %d holes were found", found, tries)
	}
}

func TestEmptyRecording(t *testing.T) {
	if found := codes(look(48000, audio.NewBlock(2, 0))); found != "empty" {
		t.Errorf("an empty recording: %q", found)
	}
}

func TestFinishIsNeverNilAndOrdered(t *testing.T) {
	x := make([]float32, 48000)
	for i := range x {
		x[i] = float32(0.5 * math.Sin(float64(i)/10))
	}
	if found := look(48000, audio.Block{x}); found == nil || len(found) != 0 {
		t.Errorf("a clean tone: %#v", found)
	}
	y := append(make([]float32, 3*48000), x...)
	y[len(y)-100] = float32(math.NaN())
	found := look(48000, audio.Block{y, make([]float32, len(y))})
	if got, want := codes(found), "not-numbers channel-missing head-silence"; got != want {
		t.Errorf("got %q, want %q", got, want)
	}
}

// However a recording is cut into blocks, the same is found.
func TestBlocksDoNotMatter(t *testing.T) {
	r := recordings(t)[0]
	sound := driven(r.sound.Cut(make(audio.Block, 2), 0, 20*r.rate), 9, 3)
	for _, x := range sound {
		clear(x[150000:150250])
	}
	want := look(r.rate, sound)
	if !strings.Contains(codes(want), "clipped") || !strings.Contains(codes(want), "dropouts") {
		t.Fatalf("the sound should be clipped and broken: %v", want)
	}
	rng := rand.New(rand.NewPCG(9, 10))
	d := New(audio.Format{Rate: r.rate, Layout: audio.Stereo})
	view := make(audio.Block, 2)
	for at := 0; at < sound.Frames(); {
		to := min(at+rng.IntN(9000), sound.Frames())
		d.Write(sound.Cut(view, at, to))
		at = to
	}
	if got, _ := d.Finish(); !slices.Equal(got, want) {
		t.Errorf("in blocks %v, at once %v", got, want)
	}
}

// An absurd sample and samples in units of 16-bit integers are doubtful; a mix 20 dB too hot is not.
func TestScale(t *testing.T) {
	tone := audio.NewBlock(1, 48000)
	for i := range tone[0] {
		tone[0][i] = float32(0.5 * math.Sin(float64(i)/20))
	}
	if found := codes(look(48000, each(tone, func(_, _ int, v float64) float64 { return 20 * v }))); strings.Contains(found, "scale") {
		t.Errorf("20 dB over full scale: %s", found)
	}
	for name, b := range map[string]audio.Block{
		"integers": each(tone, func(_, _ int, v float64) float64 { return 32768 * v }),
		"one sample": each(tone, func(_, i int, v float64) float64 {
			if i == 20000 {
				return 1e30
			}
			return v
		}),
	} {
		if f := find(t, look(48000, b), "scale"); f.Severity != Doubt {
			t.Errorf("%s: %+v", name, f)
		}
	}
}
