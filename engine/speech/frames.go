package speech

import "math"

const (
	framesPerStep   = 5 // a frame begins every 20 ms
	framesPerSecond = framesPerStep * StepsPerSecond
	frameLength     = 0.040 // seconds

	bands     = 24
	lowEdge   = 100.0 // Hz, of the first band
	bandWidth = 140.0 // Hz; the last band ends at 3460 Hz
	near, far = 2, 7  // frames over which change is measured: 40 and 140 ms
)

// groups are the bands at which the four parts of the spectrum end.
var groups = [parts]int{3, 7, 14, bands}

const parts = 4

// frame is what is kept of 40 ms of sound. All but level do not depend on how loud it is.
type frame struct {
	level    int16        // in the bands together, 1/64 dB re an arbitrary zero
	part     [parts]uint8 // how far each part of the spectrum is below the whole, 1/2 dB
	centroid uint8        // of the bands' magnitudes, 14 Hz over the first band
	flatness uint8        // arithmetic over geometric mean of the bands, 1/8 dB
	shape    [2]uint8     // change of the bands since near and far frames ago: see change
	detail   [2]uint8     // change of the bins, in which single partials show, since then
	pitch    uint8        // the likeliest: see pitches
	voiced   uint8        // how much the partials of that pitch stand out of what is between them, 0 … 255
}

// silent is the level of a frame without sound.
const silent = math.MinInt16

// framer cuts sound into frames.
type framer struct {
	rate     float64 // Hz, of the sound it is given
	line     []float64
	first    int64 // index of line[0]
	window   []float64
	spectrum *spectrum
	place    []place
	pitches  *pitches
	shapes   [far + 1][]float64 // magnitudes in the bands in the latest frames, of unit length; frame i's at i mod far+1
	details  [far + 1][]float64 // the same of the bins
	frames   []frame
}

// place says which bands a bin belongs to.
type place struct {
	band  int     // it and the next one
	share float64 // of the bin that is in the first of them
}

// newFramer returns a framer for sound of a rate in Hz.
func newFramer(rate float64) *framer {
	f := &framer{rate: max(1, rate)}
	n := max(2, int(math.Round(frameLength*f.rate)))
	for i := range n { // von Hann's
		s := math.Sin(math.Pi * (float64(i) + 0.5) / float64(n))
		f.window = append(f.window, s*s)
	}
	length := 512
	for length < n {
		length *= 2
	}
	f.spectrum = newSpectrum(length)
	width := f.rate / float64(length) // of a bin, Hz
	for k := 0; k < length/2; k++ {
		low, high := (float64(k)-0.5)*width, (float64(k)+0.5)*width
		band := math.Floor((low - lowEdge) / bandWidth)
		if int(band) >= bands {
			break
		}
		edge := lowEdge + (band+1)*bandWidth
		f.place = append(f.place, place{int(band) + 1, min(1, (edge-low)/(high-low))})
	}
	for i := range f.shapes {
		f.shapes[i], f.details[i] = make([]float64, bands), make([]float64, len(f.place))
	}
	f.pitches = newPitches(width, len(f.place))
	return f
}

// start is the index of the first sample of a frame.
func (f *framer) start(i int) int64 { return int64(float64(i) * f.rate / framesPerSecond) }

// add takes sound and keeps the frames that it completes.
func (f *framer) add(sound []float64) {
	f.line = append(f.line, sound...)
	at := int(f.start(len(f.frames)) - f.first)
	for ; at+len(f.window) <= len(f.line); at = int(f.start(len(f.frames)) - f.first) {
		now := len(f.frames) % (far + 1)
		f.spectrum.power(f.details[now], f.line[at:at+len(f.window)], f.window)
		f.keep(f.details[now], f.shapes[now])
	}
	drop := min(at, len(f.line))
	f.line = f.line[:copy(f.line, f.line[drop:])]
	f.first += int64(drop)
}

// keep describes the frame whose power spectrum is in bins. It leaves the magnitudes of the bins there, and those
// of the bands in shape, both of unit length.
//
//go:norace
func (f *framer) keep(bins, shape []float64) {
	var padded [bands + 3]float64 // what is below the first band comes first, what is above the last one last
	for k, p := range f.place {
		v := bins[k]
		padded[p.band] += v * p.share
		padded[p.band+1] += v * (1 - p.share)
		bins[k] = math.Sqrt(v)
	}
	power := padded[1 : bands+1]
	var total, magnitudes, moment, logs float64
	for b, p := range power {
		total += p
		a := math.Sqrt(p)
		shape[b] = a
		magnitudes += a
		moment += a * float64(b)
	}
	if total < 1e-30 { // far below what 32-bit samples can make
		clear(shape)
		clear(bins)
		f.frames = append(f.frames, frame{level: silent})
		return
	}
	whole := decibels(total)
	for _, p := range power {
		logs += decibels(p + 1e-6*total)
	}
	k := frame{
		level:    int16(min(math.MaxInt16, max(silent+1, math.Round(64*whole)))),
		centroid: small(10 * moment / magnitudes),
		flatness: small(8 * (whole - 10*math.Log10(bands) - logs/bands)),
	}
	from := 0
	for g, to := range groups {
		sum := 1e-6 * total
		for _, p := range power[from:to] {
			sum += p
		}
		k.part[g] = small(2 * (whole - decibels(sum)))
		from = to
	}
	k.pitch, k.voiced = f.pitches.best(bins)
	unit(shape)
	unit(bins)
	for i, ago := range [...]int{near, far} {
		if was := len(f.frames) - ago; was >= 0 {
			k.shape[i] = change(shape, f.shapes[was%(far+1)])
			k.detail[i] = change(bins, f.details[was%(far+1)])
		}
	}
	f.frames = append(f.frames, k)
}

// unit scales v to length one.
//
//go:norace
func unit(v []float64) {
	sum := 0.0
	for _, x := range v {
		sum += x * x
	}
	g := 1 / math.Sqrt(max(sum, 1e-300))
	for i := range v {
		v[i] *= g
	}
}

// change is how much two spectra differ: 255 times the root of one less the cosine of the angle between them.
//
//go:norace
func change(a, b []float64) uint8 {
	same := 0.0
	b = b[:len(a)]
	for i, v := range a {
		same += v * b[i]
	}
	return small(255 * math.Sqrt(max(0, 1-same)))
}

// small rounds to a byte.
func small(v float64) uint8 { return uint8(min(255, max(0, v)) + 0.5) }

// decibels is 10·log10 of a positive, normal number to within 1e-6 dB: the series of the inverse hyperbolic
// tangent on a mantissa between the roots of a half and of two.
func decibels(v float64) float64 {
	const oneHalf = 0x3fe6a09e667f3bcd // the bits of √½
	bits := math.Float64bits(v)
	exponent := int64(bits-oneHalf) >> 52
	t := math.Float64frombits(bits - uint64(exponent)<<52)
	t = (t - 1) / (t + 1)
	u := t * t
	ln := 2 * t * (1 + u*(1.0/3+u*(1.0/5+u*(1.0/7+u*(1.0/9)))))
	return (10 / math.Ln10) * (float64(exponent)*math.Ln2 + ln)
}
