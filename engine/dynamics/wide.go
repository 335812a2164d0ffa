package dynamics

import (
	"math"
	"sync"

	"evenshelf/engine/audio"
)

// wide reads true peaks of sound that reaches up to half the rate. The last few per cent of the band have no one
// true peak: the more samples a reader looks at, the more of them it sees. Noise and clipped sound have
// something there; a ceiling that follows a reader of 64 samples leaves them up to 0.8 dB over for one that looks
// at 384. So what another reader finds near the limit is read again over 192, 320 and 512 samples, and the largest
// counts.
//
// Reading again is slow, but only what lies near half the rate can make a difference. Its amplitude, as seen a few
// periods to either side, says first whether it is worth while (see near).
type wide struct {
	inner PeakReader
	limit float32     // what stays under it need not be exact
	env   []float32   // what is known of the last wideReach intervals, and room for a chunk
	x     audio.Block // the samples that are still needed, and room for a chunk
	part  audio.Block // scratch
	known []float32   // envelope of the sound to come, if it is as another reader has read it
	sure  bool        // it is
	stale bool        // the inner reader has missed something
}

const (
	wideReach = 256             // samples on either side
	wideSpan  = 2*wideReach - 1 // samples needed besides a new one
	phases    = 32              // points from one sample to the next
)

// reaches are those of the kernels. What a reader of another length sees lies, nearly, between what two of these and
// the inner reader see.
var reaches = [...]int{wideReach, 160, 96}

// within is how far under the limit, linear, a peak may be to be read again.
var within = audio.DB(-2).Linear()

// newWide returns a reader for peaks over a limit. The delay of the inner reader must not be over wideReach.
func newWide(channels int, inner PeakReader, limit float64) *wide {
	inner.SetFloor(0.999 * limit * within) // for rounding
	return &wide{
		inner: inner,
		limit: below(limit),
		env:   make([]float32, wideReach+chunk),
		x:     audio.NewBlock(channels, wideSpan+chunk),
		part:  make(audio.Block, channels),
	}
}

// Delay implements PeakReader.
func (w *wide) Delay() int { return wideReach }

// SetFloor implements PeakReader. There is one floor, the limit.
func (w *wide) SetFloor(float64) {}

// expect says what another reader has found in the sound that is to come, exact over the limit less 2 dB, and
// whether that sound, and all that this reader still has in view, is what it read: then it is not read twice.
func (w *wide) expect(peaks []float32, unaltered bool) { w.known, w.sure = peaks, unaltered }

// Process implements PeakReader, for up to chunk frames.
func (w *wide) Process(dst []float32, src audio.Block) {
	n := len(dst)
	clear(w.env[wideReach:])
	w.known = w.known[copy(w.env[wideReach:wideReach+n], w.known):]
	if w.sure {
		w.stale = true
	} else {
		w.read(src, n)
	}
	for c, x := range src {
		clean(w.x[c][wideSpan:wideSpan+n], x)
	}
	copy(dst, w.env)
	k, least := kernels(), w.limit*float32(within)
	for i, e := range dst {
		if e > least {
			for _, x := range w.x {
				e = max(e, k.read(x[i:i+2*wideReach], e, w.limit))
			}
			dst[i] = e
		}
	}
	copy(w.env, w.env[n:n+wideReach])
	for _, x := range w.x {
		copy(x, x[n:n+wideSpan])
	}
}

// read has the inner reader look at sound. If it has missed some, it is shown first what still matters of
// that; what it finds at the seam is long past.
func (w *wide) read(src audio.Block, n int) {
	late := wideReach - w.inner.Delay()
	for at := 0; w.stale && at < wideSpan; at += chunk {
		end := min(at+chunk, wideSpan)
		w.inner.Process(w.env[wideReach:wideReach+end-at], w.x.Cut(w.part, at, end))
	}
	w.stale = false
	w.inner.Process(w.env[late:late+n], src)
}

// kernelSet is what a wide reader reads with.
type kernelSet struct {
	sincs [3]sinc // of several lengths
	edge  [edgeTaps]float32
}

// edgeTaps samples see the top 6 % of the band.
const edgeTaps = 32

var kernels = sync.OnceValue(func() *kernelSet {
	k := new(kernelSet)
	for i, reach := range reaches {
		k.sincs[i] = newSinc(reach)
	}
	for i := range k.edge { // a Hann window, turned from 0 Hz to half the rate
		k.edge[i] = float32((1 - math.Cos(2*math.Pi*float64(i+1)/(edgeTaps+1))) / (edgeTaps + 1) * float64(1-i%2*2))
	}
	return k
})

// read returns the largest magnitude in the interval in the middle of x, as far as it may be over limit. What another
// reader found there is e.
func (k *kernelSet) read(x []float32, e, limit float32) float32 {
	if e+2*k.near(x) <= limit {
		return e
	}
	for i, reach := range reaches {
		e = max(e, k.sincs[i].peak(x[wideReach-reach:], limit))
	}
	return e
}

// near returns the amplitude of what lies near half the rate around the middle of x. In the middle itself it is
// smallest just where it does most: where its crests lie between the samples.
func (k *kernelSet) near(x []float32) (amplitude float32) {
	const first = wideReach - edgeTaps/2
	for _, d := range [...]int{16, 48, 120} {
		amplitude = max(amplitude, magnitude(dot(k.edge[:], x[first-d:])), magnitude(dot(k.edge[:], x[first+d:])))
	}
	return amplitude
}

// sinc interpolates at a grid of points after a sample: sinc[p] is a sinc under a Kaiser window for point p.
type sinc [phases][]float32

func newSinc(reach int) (s sinc) {
	const beta = 8
	for p := range s {
		s[p] = make([]float32, 2*reach)
		for i := range s[p] {
			x := float64(i-(reach-1)) - float64(p)/phases
			h := audio.Bessel0(beta*math.Sqrt(max(0, 1-x*x/float64(reach*reach)))) / audio.Bessel0(beta)
			if x != 0 {
				h *= math.Sin(math.Pi*x) / (math.Pi * x)
			}
			s[p][i] = float32(h)
		}
	}
	return s
}

// peak returns the largest magnitude in the interval in the middle of x, or, if that is under limit, what it saw of it.
func (s *sinc) peak(x []float32, limit float32) float32 {
	at := func(p int) float32 { return magnitude(dot(s[p], x)) }
	best, where := float32(0), 0
	for p := phases / 4; p < phases; p += phases / 4 {
		if v := at(p); v > best {
			best, where = v, p
		}
	}
	if best*1.09 <= limit { // between two points a quarter of a sample apart no more than 0.69 dB can be lost
		return best
	}
	for step := phases / 8; step > 0; step /= 2 {
		left, right := at(where-step), at(where+step)
		switch {
		case left > max(best, right):
			best, where = left, where-step
		case right > best:
			best, where = right, where+step
		}
	}
	return best
}

// dot returns the sum of h·x over the length of h, a multiple of 4.
//
//go:norace
func dot(h, x []float32) float32 {
	var a, b, c, d float32
	x = x[:len(h)]
	for len(h) >= 4 && len(x) >= 4 {
		a += h[0] * x[0]
		b += h[1] * x[1]
		c += h[2] * x[2]
		d += h[3] * x[3]
		h, x = h[4:], x[4:]
	}
	return (a + b) + (c + d)
}

func magnitude(v float32) float32 { return math.Float32frombits(math.Float32bits(v) &^ (1 << 31)) }
