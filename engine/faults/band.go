package faults

import (
	"fmt"
	"math"
	"math/bits"
	"slices"

	"gonum.org/v1/gonum/dsp/fourier"

	"evenshelf/engine/audio"
)

// A recording made at a low rate, sent over a telephone or coded by a lossy coder that leaves the treble out
// keeps an edge in its long-term spectrum however it is stored later: sound up to some frequency and next to
// nothing above. Instruments, voices and worn tapes have little treble too, but lose it gradually, over
// octaves. So the edge must be as steep as only a filter is. Lossy ancestors by their cut-off: B. D'Alessandro
// and Y. Q. Shi, MM&Sec 2009; the limits here are common practice, no source.
const (
	bandEvery   = 10      // windows from one spectrum to the next, until there are bandOften
	bandOften   = 30      // spectra
	bandSeldom  = 50      // windows from one to the next then
	bandHeard   = -50.0   // dBFS peak: what is softer says nothing about treble
	bandLeast   = 4       // spectra
	bandLow     = 2500.0  // Hz, the lowest edge looked for
	bandHigh    = 16400.0 // Hz: above, nearly nobody misses anything
	bandShare   = 0.82    // of half the rate: the edge of a converter lies higher
	bandEdge    = 0.06    // of the edge's frequency: the width of the slope
	bandBelow   = 0.10    // of it: the width of what is compared below the slope
	bandFilled  = 4       // a quarter of those lines may be weaker than what is compared: it is not a tone
	bandDrop    = 25.0    // dB from below the slope to the highest part above it
	bandNearest = 25.0    // Hz between lines of the spectrum, at most
)

// band finds such an edge. It follows the mixture of all channels.
type band struct {
	rate    int
	mixture []float64 // weight of each channel
	windows int       // since the last spectrum
	fft     *fourier.FFT
	taper   []float64
	sound   []float64
	lines   []complex128
	power   []float64 // sum of all spectra
	spectra int
	sorted  []float64 // room to sort in
}

func newBand(f audio.Format) check {
	if bandLow > bandShare/2*float64(f.Rate) {
		return nothing{}
	}
	n := 1 << bits.Len(uint(float64(f.Rate)/bandNearest)) // shorter than a window of 100 ms
	b := &band{rate: f.Rate, mixture: mixture(f.Layout), fft: fourier.NewFFT(n), taper: hann(n), sound: make([]float64, n)}
	b.lines, b.power = make([]complex128, n/2+1), make([]float64, n/2+1)
	return b
}

// hann returns a Hann window of n values.
func hann(n int) []float64 {
	w := make([]float64, n)
	for i := range w {
		w[i] = 0.5 - 0.5*math.Cos(2*math.Pi*float64(i)/float64(n))
	}
	return w
}

//go:norace
func (b *band) look(w window) {
	if b.windows++; b.windows < bandEvery || b.spectra >= bandOften && b.windows < bandSeldom || w.Frames() < len(b.sound) {
		return
	}
	b.windows = 0
	clear(b.sound)
	heard := false
	for c, x := range w.Block {
		weight := b.mixture[c]
		if weight == 0 {
			continue
		}
		heard = heard || float64(w.peak[c]) > audio.DB(bandHeard).Linear()
		for i, v := range x[:len(b.sound)] {
			b.sound[i] += weight * float64(v)
		}
	}
	if !heard {
		return
	}
	for i, t := range b.taper {
		b.sound[i] *= t
	}
	b.fft.Coefficients(b.lines, b.sound)
	for i, v := range b.lines {
		b.power[i] += real(v)*real(v) + imag(v)*imag(v)
	}
	b.spectra++
}

// edge returns the highest frequency in Hz there is sound at, 0 if the spectrum has no edge.
func (b *band) edge() float64 {
	step := float64(b.rate) / float64(len(b.sound))
	line := func(hz float64) int { return int(math.Round(hz / step)) }
	drop, middle := math.Pow(10, bandDrop/10), 0.0
	for i := line(bandLow); ; i++ {
		hz := float64(i) * step
		slope := line(hz * (1 + bandEdge))
		if slope >= len(b.power) {
			break
		}
		b.sorted = append(b.sorted[:0], b.power[line(hz*(1-bandBelow)):i+1]...)
		slices.Sort(b.sorted)
		below, above := b.sorted[len(b.sorted)/bandFilled], max(slices.Max(b.power[slope:]), math.SmallestNonzeroFloat64)
		if d := below / above; d > drop {
			drop, middle = d, math.Sqrt(below)*math.Sqrt(above)
		}
	}
	if middle == 0 {
		return 0
	}
	i := len(b.power) - 1
	for b.power[i] < middle {
		i--
	}
	if hz := float64(i) * step; hz <= min(bandHigh, bandShare/2*float64(b.rate)) {
		return hz
	}
	return 0
}

func (b *band) faults(e extent) []Fault {
	if b.spectra < bandLeast {
		return nil
	}
	hz := b.edge()
	if hz == 0 {
		return nil
	}
	return []Fault{{Code: "narrow-band", Severity: Note, Length: e.Seconds(e.frames),
		Words: fmt.Sprintf("nothing above %.1f kHz: it %s", hz/1000, ancestor(hz))}}
}

// ancestor says what a recording without anything above a frequency seems to come from.
func ancestor(hz float64) string {
	for _, a := range []struct {
		to   float64
		what string
	}{
		{4200, "seems to come from a telephone or from a recording sampled at 8 kHz"},
		{5900, "seems to come from a recording sampled at 11 or 12 kHz"},
		{8300, "seems to come from a wideband telephone or from a recording sampled at 16 kHz"},
		{12300, "seems to come from a recording sampled at 22 or 24 kHz"},
		{14200, "seems to have been coded at a low bit rate"},
	} {
		if hz <= a.to {
			return a.what
		}
	}
	return "seems to have been broadcast on FM, recorded at 32 kHz or coded at a low bit rate"
}
