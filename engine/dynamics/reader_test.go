package dynamics

import (
	"math"
	"os/exec"
	"strconv"
	"testing"

	"encoding/binary"

	"evenshelf/engine/audio"
	"evenshelf/engine/meter"
)

// These tests read true peaks by a reader of their own, longer and written otherwise than the one the ceiling
// follows: 32 points a sample, 384 taps of a sinc under a Kaiser window (β = 10), silence before and after.

const (
	points  = 32
	halfLen = 192
)

// grid[p] gives the value p/points after a sample from the halfLen samples up to it and the halfLen after it.
var grid = func() (h [points][2 * halfLen]float64) {
	for p := range h {
		for i := range h[p] {
			x := float64(i-(halfLen-1)) - float64(p)/points
			h[p][i] = 1
			if x != 0 {
				h[p][i] = math.Sin(math.Pi*x) / (math.Pi * x)
			}
			r := x / halfLen
			h[p][i] *= audio.Bessel0(10*math.Sqrt(max(0, 1-r*r))) / audio.Bessel0(10)
		}
	}
	return h
}()

//go:norace
func product(h *[2 * halfLen]float64, x []float64) float64 {
	var a, b, c, d float64
	x = x[:2*halfLen]
	for i := 0; i < 2*halfLen; i += 4 {
		a += h[i] * x[i]
		b += h[i+1] * x[i+1]
		c += h[i+2] * x[i+2]
		d += h[i+3] * x[i+3]
	}
	return a + b + c + d
}

// truePeak returns the largest magnitude of b on the grid. Every interval is read at four points; the other 28 are
// read where one of these comes within 3 dB of the largest: on a grid of a quarter of a sample the steepest
// sound loses less than 0.7 dB.
func truePeak(b audio.Block) (peak float64) {
	for _, x := range b {
		wide := make([]float64, len(x)+2*halfLen)
		for i, v := range x {
			wide[halfLen+i] = float64(v)
			peak = max(peak, math.Abs(float64(v)))
		}
		for i := range len(x) + 1 {
			w := wide[i:] // wide[i+halfLen−1] is sample i−1
			coarse := 0.0
			if len(w) < 2*halfLen {
				break
			}
			for p := 0; p < points; p += 8 {
				coarse = max(coarse, math.Abs(product(&grid[p], w)))
			}
			peak = max(peak, coarse)
			if coarse < 0.7*peak {
				continue
			}
			for p := range grid {
				peak = max(peak, math.Abs(product(&grid[p], w)))
			}
		}
	}
	return peak
}

// A tone whose crests lie between the samples: the reader has to find them (a sine of amplitude A peaks at A).
func TestTheReaderItself(t *testing.T) {
	for _, fraction := range []float64{0.01, 0.25, 0.4, 0.47} {
		x := audio.NewBlock(1, 6000)
		for i := range x[0] {
			fade := math.Sin(math.Pi * float64(i) / 6000)
			x[0][i] = float32(0.5 * fade * fade * math.Sin(2*math.Pi*fraction*float64(i)+0.7854))
		}
		if dB := audio.ToDB(truePeak(x) / 0.5); math.Abs(dB) > 0.01 {
			t.Errorf("a tone at %g of the rate reads %.4f dB off", fraction, dB)
		}
	}
}

// decoded returns part of a file as FFmpeg decodes it.
func decoded(t testing.TB, path string, rate, channels int, from, seconds float64) audio.Block {
	t.Helper()
	text := func(v float64) string { return strconv.FormatFloat(v, 'f', 3, 64) }
	out, err := exec.Command("ffmpeg", "-v", "error", "-nostdin", "-ss", text(from), "-t", text(seconds), "-i", path,
		"-map", "0:a:0", "-f", "f32le", "-ar", strconv.Itoa(rate), "-ac", strconv.Itoa(channels), "-").Output()
	if err != nil || len(out) == 0 {
		t.Fatalf("FFmpeg does not decode %s: %v", path, err)
	}
	b := audio.NewBlock(channels, len(out)/4/channels)
	for i := range b.Frames() * channels {
		b[i%channels][i/channels] = math.Float32frombits(binary.LittleEndian.Uint32(out[4*i:]))
	}
	return b
}

// driven returns b, louder.
func driven(b audio.Block, gain audio.DB) audio.Block {
	out := audio.NewBlock(len(b), b.Frames())
	for c := range b {
		for i, v := range b[c] {
			out[c][i] = float32(float64(v) * gain.Linear())
		}
	}
	return out
}

// ceiling returns a ceiling as the engine makes it.
func ceiling(f audio.Format, at audio.DBTP, t Timing) *Ceiling {
	return NewCeiling(f, at, t, func() PeakReader { return meter.NewEnvelope(f.Layout.Channels) })
}
