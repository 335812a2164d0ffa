package dynamics

import (
	"fmt"
	"math"
	"testing"

	"evenshelf/engine/audio"
)

// sine returns a tone at so many dB re full scale in every channel, from a crest on, as no fade would have it.
func sine(f audio.Format, hz float64, level audio.DB, seconds float64) audio.Block {
	b := audio.NewBlock(f.Layout.Channels, int(seconds*float64(f.Rate)))
	for c := range b {
		for i := range b[c] {
			b[c][i] = float32(level.Linear() * math.Cos(2*math.Pi*math.Mod(hz*float64(i)/float64(f.Rate), 1)))
		}
	}
	return b
}

// residue returns THD+N as AES17 has it: what is left of x, dB re its whole power, when the tone is taken out. x is a
// second, or more of them, so that a tone of whole Hz is periodic in it.
func residue(x []float32, rate int, hz float64) float64 {
	var total, re, im float64
	for i, v := range x {
		s, c := math.Sincos(2 * math.Pi * math.Mod(hz*float64(i)/float64(rate), 1))
		y := float64(v)
		re, im, total = re+y*c, im+y*s, total+y*y
	}
	n := float64(len(x))
	left := 0.0
	for i, v := range x {
		s, c := math.Sincos(2 * math.Pi * math.Mod(hz*float64(i)/float64(rate), 1))
		d := float64(v) - 2*(re*c+im*s)/n
		left += d * d
	}
	return 10 * math.Log10(max(left, 1e-300)/total)
}

// Steady tones under steady limiting and compression have to stay tones. 997 Hz is the frequency of AES17 and IEC
// 61606; the lowest ones are as low as Timing allows: half a period of 2·look-ahead + hold.
func TestTonesStayClean(t *testing.T) {
	talk := Compression{Threshold: -20, Ratio: 3, Knee: 6, Release: 0.15}
	fast := Compression{Threshold: -20, Ratio: 3, Knee: 6, Release: 0.08}
	for _, test := range []struct {
		hz          float64
		timing      string
		compression *Compression
		most        float64 // dB
	}{
		{997, "speech", nil, -105}, {997, "music", nil, -105}, {997, "concert", nil, -105},
		{997, "", &talk, -95}, {997, "music", &talk, -95}, {997, "speech", &fast, -95},
		{440, "", &talk, -95}, {512, "", &talk, -95}, {3000, "", &talk, -95}, {6007, "", &talk, -95}, {6007, "music", nil, -105},
		{84, "speech", nil, -105}, {60, "music", nil, -105}, {25, "music", nil, -105}, {20, "concert", nil, -105}, {17, "concert", nil, -105},
		{100, "", &talk, -95}, {60, "", &talk, -95}, {30, "", &talk, -80},
	} {
		for _, rate := range []int{44100, 48000} {
			name := fmt.Sprintf("%g Hz at %d Hz, %s", test.hz, rate, test.timing)
			f := audio.Format{Rate: rate, Layout: audio.Mono}
			x := sine(f, test.hz, -3, 3)
			if test.compression != nil {
				name += fmt.Sprintf(", compressor %.0f ms", 1000*test.compression.Release)
				x = through(NewCompressor(f, *test.compression), x, whole)
			}
			if test.timing != "" {
				x = driven(x, audio.DB(-1+6-audio.ToDB(truePeak(audio.Block{x[0][rate : rate+5000]})))) // 6 dB over
				x = through(ceiling(f, -1, timings[test.timing]), x, whole)
			}
			dB := residue(x[0][rate:2*rate], rate, test.hz)
			t.Logf("%-50s %.1f dB", name, dB)
			if dB > test.most {
				t.Errorf("%s: THD+N %.1f dB, want %g", name, dB, test.most)
			}
		}
	}
}
