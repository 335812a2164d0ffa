package faults

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

// several returns noise, different in each channel of a layout but silent in those named.
func several(l audio.Layout, seconds int, silent ...audio.Speaker) audio.Block {
	rng := rand.New(rand.NewPCG(15, 16))
	b := audio.NewBlock(l.Channels, seconds*48000)
	for c, x := range b {
		loud := float32(0.1)
		for _, p := range silent {
			if l.Position(c) == p {
				loud = 0
			}
		}
		for i := range x {
			x[i] = loud * float32(rng.NormFloat64())
		}
	}
	return b
}

// in returns the faults of a sound in a layout.
func in(l audio.Layout, b audio.Block) []Fault {
	d := New(audio.Format{Rate: 48000, Layout: l})
	d.Write(b)
	found, _ := d.Finish()
	return found
}

// Channels without sound are named by their place, but for an effects channel, which may well be silent.
func TestUnusedChannels(t *testing.T) {
	side := audio.Layout{Channels: 6, Mask: audio.FrontLeft | audio.FrontRight | audio.FrontCentre | audio.LowFrequency | audio.SideLeft | audio.SideRight}
	for _, test := range []struct {
		layout audio.Layout
		silent []audio.Speaker
		words  string
	}{
		{audio.UsualLayout(6), []audio.Speaker{audio.FrontCentre}, "the centre channel carries no sound"},
		{audio.UsualLayout(6), []audio.Speaker{audio.BackLeft, audio.BackRight}, "the left surround channel and the right surround channel carry no sound"},
		{side, []audio.Speaker{audio.SideLeft}, "the left surround channel carries no sound"},
		{audio.UsualLayout(8), []audio.Speaker{audio.FrontCentre, audio.BackLeft, audio.SideRight}, "the centre channel, the left back channel and the right side channel carry no sound"},
		{audio.UsualLayout(6), []audio.Speaker{audio.FrontLeft, audio.FrontRight}, "the left channel and the right channel carry no sound"},
		{audio.Layout{Channels: 3}, []audio.Speaker{0}, ""},
		{audio.UsualLayout(6), []audio.Speaker{audio.LowFrequency}, ""},
		{audio.UsualLayout(6), nil, ""},
		{audio.Stereo, []audio.Speaker{audio.FrontLeft}, "the left channel is missing: only the right channel carries sound"},
		{audio.UsualLayout(6), []audio.Speaker{audio.FrontRight}, "the right channel is missing: only the left channel carries sound"},
	} {
		words := ""
		for _, f := range in(test.layout, several(test.layout, 2, test.silent...)) {
			if f.Code != "silent" {
				words += f.Words
			}
			if f.Code == "channel-unused" && f.Severity != Note {
				t.Errorf("%+v", f)
			}
		}
		if words != test.words {
			t.Errorf("%v without %v: %q, want %q", test.layout, test.silent, words, test.words)
		}
	}
	unknown := audio.Layout{Channels: 3}
	b := several(unknown, 2)
	clear(b[1])
	if f := find(t, in(unknown, b), "channel-unused"); f.Words != "channel 2 carries no sound" {
		t.Errorf("%+v", f)
	}
}

// Hum that is upside down in one channel of a pair is found, and what an effects channel plays neither is hum nor
// hides the edge of the others' spectrum.
func TestChannelsDoNotCancel(t *testing.T) {
	programme := func(i int) float32 {
		if i%(8*48000) < 6*48000 {
			return 1
		}
		return 0.003
	}
	b := several(audio.Stereo, 20)
	for i := range b[0] {
		hum := float32(0.05 * organ(float64(i)/48000))
		b[0][i], b[1][i] = b[0][i]*programme(i)+hum, b[1][i]*programme(i)-hum
	}
	if f := find(t, in(audio.Stereo, b), "hum"); !strings.Contains(f.Words, "hum at 50 Hz") {
		t.Errorf("%+v", f)
	}
	l := audio.UsualLayout(6)
	b = several(l, 20)
	low := 0.0
	for c, x := range b {
		if l.Position(c) == audio.LowFrequency {
			for i, v := range x {
				low += 0.02 * (float64(v) - low)
				x[i] = float32(organ(float64(i)/48000) + 5*low)
			}
			continue
		}
		for i := range x {
			x[i] *= programme(i)
		}
	}
	if found := codes(in(l, b)); found != "" {
		t.Errorf("an effects channel that rumbles: %s", found)
	}
	narrow := several(l, 6)
	lowpass(narrow[0], 4000.0/48000)
	for c, x := range narrow {
		if l.Position(c) != audio.LowFrequency {
			copy(x, narrow[0])
		}
	}
	if f := find(t, in(l, narrow), "narrow-band"); !strings.Contains(f.Words, "sampled at 8 kHz") {
		t.Errorf("%+v", f)
	}
}

// lowpass leaves nothing above a frequency, of the rate: a windowed sinc of 801 taps.
//
//go:norace
func lowpass(x []float32, edge float64) {
	const half = 400
	taps := hann(2*half + 2)[1:]
	for i := range taps {
		if p := float64(i - half); p != 0 {
			taps[i] *= math.Sin(2*math.Pi*edge*p) / (math.Pi * p)
		} else {
			taps[i] *= 2 * edge
		}
	}
	from := append(append(make([]float32, half), x...), make([]float32, half)...)
	for i := range x {
		v := 0.0
		for k, t := range taps {
			v += t * float64(from[i+k])
		}
		x[i] = float32(v)
	}
}

// An offset is one of the sounding part of a recording; the condition's figure is the plain mean.
func TestOffsetBetweenSilences(t *testing.T) {
	b := made(60, func(s float64) float64 {
		if s < 6.3 || s > 55.3 {
			return 0
		}
		return 0.02 + 0.3*math.Sin(2*math.Pi*440*s)
	})
	d := New(audio.Format{Rate: 48000, Layout: audio.Mono})
	d.Write(b)
	found, state := d.Finish()
	if f := find(t, found, "dc-offset"); f.Words != "the sound lies 2.0 % of full scale above the middle (DC offset): a cut in it may click" {
		t.Errorf("%+v", f)
	}
	if want := 0.02 * 49 / 60; math.Abs(float64(state.Offset)-want) > 1e-4 {
		t.Errorf("the mean is %g, want %g", state.Offset, want)
	}
}

func TestCounts(t *testing.T) {
	for n, want := range map[int64]string{1: "once", 2: "twice", 3: "3 times", 999: "999 times", 11060: "11,060 times", 1234567: "1,234,567 times"} {
		if got := times(n); got != want {
			t.Errorf("times(%d) = %q, want %q", n, got, want)
		}
	}
}
