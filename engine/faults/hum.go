package faults

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/dsp/fourier"

	"evenshelf/engine/audio"
)

// Mains hum comes from cables, transformers and motors: a tone of the mains frequency and its multiples that
// stays the same from beginning to end and is still there when the programme pauses. A bass or an organ has
// notes as deep, but does not hold them through, and the nearest notes (49.0, 51.9, 58.3 and 61.7 Hz and
// their octaves, at A = 440 Hz) lie 2 % away or more.
//
// So the quietest parts are looked at, one second each, on a mixture of all channels brought down to 1 kHz.
// In most of them a line must stand out at the mains frequency or twice that, and often at another multiple,
// always at the same place and of the same level. Common practice, no source.
//
// Only if it goes on where the programme pauses is it sure to be hum: in the quietest windows of most parts there
// must be as much as the tone and little more. Notes of a bass stop there; a drone may be all there is, and the pedal
// of an organ has no pauses around it. They are a matter for a note.
const (
	humRate     = 1000  // Hz, roughly, that the sound is brought down to
	humLines    = 1024  // samples a spectrum is made of, every half of that
	humParts    = 32    // how many of the quietest are kept
	humQuiet    = 10    // the quietest tenth of all parts is looked at, in a long recording those that are kept
	humLeast    = 6     // parts of it, or nothing can be said
	humSilent   = 1e-10 // mean square: a part below is digital silence, and says nothing
	humLoud     = 1e6   // mean square: a part above is damaged
	humMultiple = 6     // highest multiple looked at
	humOff      = 0.008 // of the frequency, how far it may be off: a recorder's speed varies more than the mains
	humDrift    = 0.35  // Hz between the middle half of the parts
	humSwing    = 6.0   // dB between the middle half of them
	humProud    = 12.0  // dB over the sound beside it, 3 to 8 Hz away
	humIn       = 0.75  // of the parts: in so many the stronger one must stand out
	humAlsoIn   = 0.5   // in so many the others
	humApart    = 0.004 // of the frequency, how far they may be from being multiples of one
	humLowest   = -80.0 // dBFS, inaudible in all but the quietest recording
	humUnder    = 55.0  // dB under the programme: inaudible
	humCrest    = 10.0  // dB from the rms of usual sound to its peaks in 100 ms
	humPause    = 15.0  // dB under the programme: a window this soft is a pause, as is one with no more in it than the tone
	humRecent   = 11    // windows: about as long as a part
	humAll      = 3.0   // dB under the programme: the tone may be all there is
	humBad      = 12.0  // dB under the programme: nothing can be done for such a recording by levelling it
)

// hum finds it.
type hum struct {
	rate    float64 // of the sound brought down
	fft     *fourier.FFT
	taper   []float64
	sound   []float64 // a second
	filled  int       // samples of them that are there
	work    []float64
	lines   []complex128
	parts   []humPart          // the quietest so far
	loudest int                // index of the loudest of them
	total   int                // parts there have been
	peaks   float64            // sum of the squared peaks of all windows
	recent  [humRecent]float64 // peaks of the last windows
	windows int
}

// humPart is a quiet part.
type humPart struct {
	power float64
	pause float64   // the lowest peak of its windows, in all their bandwidth
	lines []float32 // power spectrum
}

// newHum makes a check for sound that is brought down to a rate.
func newHum(f audio.Format, rate float64) check {
	if f.Rate < humRate*8/10 {
		return nothing{}
	}
	h := &hum{rate: rate, fft: fourier.NewFFT(humLines), taper: hann(humLines)}
	h.sound, h.work = make([]float64, humLines), make([]float64, humLines)
	h.lines = make([]complex128, humLines/2+1)
	h.parts = make([]humPart, humParts)
	for i := range h.parts {
		h.parts[i].lines = make([]float32, min(len(h.lines), h.line(60*(humMultiple+1))))
	}
	h.parts = h.parts[:0]
	return h
}

func (h *hum) look(w window) {
	peak := float64(slices.Max(w.peak))
	h.peaks += peak * peak
	h.recent[h.windows%humRecent] = peak
	h.windows++
	for _, v := range w.low {
		h.sound[h.filled] = v
		if h.filled++; h.filled == humLines {
			h.part()
			h.filled = copy(h.sound, h.sound[humLines/2:])
		}
	}
}

// part keeps the spectrum of the second in sound if they are among the quietest so far.
//
//go:norace
func (h *hum) part() {
	mean := 0.0
	for _, v := range h.sound {
		mean += v / humLines
	}
	power := 0.0
	for i, v := range h.sound {
		v -= mean
		power += v * v / humLines
		h.work[i] = v * h.taper[i]
	}
	h.total++
	if power < humSilent || power > humLoud {
		return
	}
	var p *humPart
	switch {
	case len(h.parts) < humParts:
		h.parts = h.parts[:len(h.parts)+1]
		p = &h.parts[len(h.parts)-1]
	case power < h.parts[h.loudest].power:
		p = &h.parts[h.loudest]
	default:
		return
	}
	h.fft.Coefficients(h.lines, h.work)
	p.power, p.pause = power, slices.Min(h.recent[:min(h.windows, humRecent)])
	for i := range p.lines {
		re, im := real(h.lines[i]), imag(h.lines[i])
		p.lines[i] = float32(re*re + im*im)
	}
	for i, q := range h.parts {
		if q.power > h.parts[h.loudest].power {
			h.loudest = i
		}
	}
}

// line returns the line of the spectra that is nearest to a frequency.
func (h *hum) line(hz float64) int { return int(math.Round(hz * humLines / h.rate)) }

// stands looks for a line near a frequency in one part. It returns its frequency and its mean square, and
// whether it stands out.
func (h *hum) stands(p humPart, hz float64) (at, power float64, ok bool) {
	const near, far = 3, 8 // lines beside it that are compared
	from, to := h.line(hz*(1-humOff)), h.line(hz*(1+humOff))
	best := from
	for i := from; i <= to; i++ {
		if p.lines[i] > p.lines[best] {
			best = i
		}
	}
	if best-far < 0 || best+far >= len(p.lines) {
		return 0, 0, false
	}
	var beside [2 * (far - near + 1)]float32
	n := copy(beside[:], p.lines[best-far:best-near+1])
	copy(beside[n:], p.lines[best+near:best+far+1])
	slices.Sort(beside[:])
	a, b, c := math.Sqrt(float64(p.lines[best-1])), math.Sqrt(float64(p.lines[best])), math.Sqrt(float64(p.lines[best+1]))
	if b < a || b < c || float64(p.lines[best]) < float64(beside[len(beside)/2])*math.Pow(10, humProud/10) {
		return 0, 0, false
	}
	// The two highest lines of a Hann-windowed tone give its place: (2r − 1)/(r + 1) for their ratio r.
	offset := 0.0
	if r := c / b; c > a {
		offset = (2*r - 1) / (r + 1)
	} else if r := a / b; a > 0 {
		offset = -(2*r - 1) / (r + 1)
	}
	for i := best - 2; i <= best+2; i++ {
		power += float64(p.lines[i])
	}
	// The lines of a tone of amplitude A sum to A²N²/16 · 1.5, the Hann window's noise bandwidth.
	return (float64(best) + offset) * h.rate / humLines, power * 16 / 1.5 / (humLines * humLines) / 2, true
}

// family looks for the mains frequency and its multiples and returns the mean square of those that are there,
// 0 if it is not hum.
func (h *hum) family(mains float64) (power float64) {
	multiples, base, sure := 0, 0.0, false
	for m := 1; m <= humMultiple; m++ {
		var at, powers []float64
		for _, p := range h.parts {
			if hz, v, ok := h.stands(p, mains*float64(m)); ok {
				at, powers = append(at, hz/float64(m)), append(powers, v)
			}
		}
		n := len(at)
		if float64(n) < humAlsoIn*float64(len(h.parts)) {
			continue
		}
		slices.Sort(at)
		slices.Sort(powers)
		if (at[3*n/4]-at[n/4])*float64(m) > humDrift || 10*math.Log10(powers[3*n/4]/powers[n/4]) > humSwing {
			continue
		}
		if base == 0 {
			base = at[n/2]
		}
		if math.Abs(at[n/2]-base) > humApart*base {
			continue
		}
		power += powers[n/2]
		multiples++
		sure = sure || m <= 2 && float64(n) >= humIn*float64(len(h.parts))
	}
	if !sure || multiples < 2 {
		return 0
	}
	return power
}

func (h *hum) faults(e extent) []Fault {
	slices.SortFunc(h.parts, func(a, b humPart) int { return cmp.Compare(a.power, b.power) })
	if h.parts = h.parts[:min(len(h.parts), max(humLeast, h.total/humQuiet))]; h.total < 2*humLeast || len(h.parts) < humLeast {
		return nil
	}
	programme := 10*math.Log10(h.peaks/float64(h.windows)) - humCrest
	mains, power := 50.0, 0.0
	for _, hz := range []float64{50, 60} {
		if p := h.family(hz); p > power {
			mains, power = hz, p
		}
	}
	level := 10 * math.Log10(power)
	if power == 0 || level < humLowest || level < programme-humUnder {
		return nil
	}
	slices.SortFunc(h.parts, func(a, b humPart) int { return cmp.Compare(a.pause, b.pause) })
	pause := audio.ToDB(h.parts[len(h.parts)/2].pause)
	sure := level < programme-humAll && pause >= level && pause-humCrest <= max(level, programme-humPause)
	f := Fault{Code: "hum", Severity: Note, Length: e.Seconds(e.frames)}
	tone := fmt.Sprintf("%.0f Hz and its multiples, %s dBFS", mains, audio.Number(level, 0))
	switch {
	case !sure:
		f.Words = "a steady tone at " + tone + ": mains hum, or meant to be so"
	case level < programme-humBad:
		f.Words = "mains hum at " + tone + ", also in the pauses"
	default:
		f.Severity = Doubt
		f.Words = "mains hum at " + tone + ", also in the pauses, hardly softer than the sound itself"
	}
	return []Fault{f}
}
