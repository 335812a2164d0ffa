package demo

import (
	"hash/fnv"
	"math"
	"math/rand/v2"
)

// track is one channel of sound while it is being made; full scale ±1.0.
type track []float64

// silence returns a silent track of that length.
func silence(rate int, seconds float64) track { return make(track, int(seconds*float64(rate))) }

// dice returns the random numbers that belong to a name: the same name always gets the same ones, and an
// item added to the shelf changes no other.
func dice(name string) *rand.Rand {
	h := fnv.New64a()
	h.Write([]byte(name)) // never fails, says package hash
	return rand.New(rand.NewPCG(h.Sum64(), 0x5e1f))
}

// between returns a number drawn evenly from [low, high).
func between(r *rand.Rand, low, high float64) float64 { return low + (high-low)*r.Float64() }

// white returns one sample of white noise, even over ±1: its RMS is 1/√3.
func white(r *rand.Rand) float64 { return 2*r.Float64() - 1 }

// hertz returns the frequency of a MIDI note number: 69 is 440 Hz, 12 are an octave.
func hertz(note float64) float64 { return 440 * math.Exp2((note-69)/12) }

// gain returns the factor for a level in dB.
func gain(db float64) float64 { return math.Pow(10, db/20) }

// biquad is a second-order filter in transposed direct form II.
type biquad struct{ b0, b1, b2, a1, a2, z1, z2 float64 }

func (f *biquad) tick(x float64) float64 {
	y := f.b0*x + f.z1
	f.z1 = f.b1*x - f.a1*y + f.z2
	f.z2 = f.b2*x - f.a2*y
	return y
}

// retune takes over the coefficients of g and keeps the sound still ringing in f.
func (f *biquad) retune(g biquad) { f.b0, f.b1, f.b2, f.a1, f.a2 = g.b0, g.b1, g.b2, g.a1, g.a2 }

// The filters below are bilinear transforms of the analogue prototypes 1, s² and s/Q over s² + s/Q + 1.
// A corner above 0.45 of the rate is moved there, where the transform still behaves.

func prototype(rate int, hz, q float64) (cos, alpha float64) {
	w := 2 * math.Pi * min(hz/float64(rate), 0.45)
	return math.Cos(w), math.Sin(w) / (2 * q)
}

func lowpass(rate int, hz, q float64) biquad {
	c, a := prototype(rate, hz, q)
	n := 1 / (1 + a)
	return biquad{b0: (1 - c) / 2 * n, b1: (1 - c) * n, b2: (1 - c) / 2 * n, a1: -2 * c * n, a2: (1 - a) * n}
}

func highpass(rate int, hz, q float64) biquad {
	c, a := prototype(rate, hz, q)
	n := 1 / (1 + a)
	return biquad{b0: (1 + c) / 2 * n, b1: -(1 + c) * n, b2: (1 + c) / 2 * n, a1: -2 * c * n, a2: (1 - a) * n}
}

// bandpass passes its centre at gain 1.
func bandpass(rate int, hz, q float64) biquad {
	c, a := prototype(rate, hz, q)
	n := 1 / (1 + a)
	return biquad{b0: a * n, b2: -a * n, a1: -2 * c * n, a2: (1 - a) * n}
}

// formant is a two-pole resonance with gain 1 at 0 Hz, so that a chain of them is a vocal tract.
func formant(rate int, hz, width float64) biquad {
	t := math.Pi / float64(rate)
	a2 := math.Exp(-2 * width * t)
	a1 := -2 * math.Exp(-width*t) * math.Cos(2*min(hz, 0.47*float64(rate))*t)
	return biquad{b0: 1 + a1 + a2, a1: a1, a2: a2}
}

// through runs the track through filters, one after the other, in place, and returns it.
func (t track) through(filters ...biquad) track {
	for _, f := range filters {
		for i, x := range t {
			t[i] = f.tick(x)
		}
	}
	return t
}

// times scales the track in place and returns it.
func (t track) times(g float64) track {
	for i := range t {
		t[i] *= g
	}
	return t
}

// add mixes src into t from frame at, scaled; what falls outside t is lost.
func (t track) add(at int, src track, g float64) {
	if at < 0 {
		src, at = src[min(-at, len(src)):], 0
	}
	if at >= len(t) {
		return
	}
	for i, x := range src[:min(len(src), len(t)-at)] {
		t[at+i] += g * x
	}
}

// fade brings the first and last seconds of the track up from and down to nothing, in place.
func (t track) fade(rate int, in, out float64) track {
	ni, no := min(int(in*float64(rate)), len(t)), min(int(out*float64(rate)), len(t))
	for i := range ni {
		t[i] *= 0.5 - 0.5*math.Cos(math.Pi*float64(i)/float64(ni))
	}
	for i := range no {
		t[len(t)-1-i] *= 0.5 - 0.5*math.Cos(math.Pi*float64(i)/float64(no))
	}
	return t
}

// rms returns the root of the mean square, 0 for an empty track.
func (t track) rms() float64 {
	var sum float64
	for _, x := range t {
		sum += x * x
	}
	return math.Sqrt(sum / max(1, float64(len(t))))
}

// hiss returns white noise of the given RMS.
func hiss(r *rand.Rand, frames int, rms float64) track {
	t := make(track, frames)
	for i := range t {
		t[i] = white(r) * rms * math.Sqrt(3)
	}
	return t
}

// saw is a sawtooth whose jump is rounded by a two-sample polynomial, which keeps aliasing out of the ear's way.
type saw struct{ phase float64 }

// tick returns the next sample for a step of frequency/rate cycles.
func (s *saw) tick(step float64) float64 {
	s.phase += step
	if s.phase >= 1 {
		s.phase--
	}
	y := 2*s.phase - 1
	switch {
	case s.phase < step:
		u := s.phase / step
		y -= 2*u - u*u - 1
	case s.phase > 1-step:
		u := (s.phase - 1) / step
		y -= u*u + 2*u + 1
	}
	return y
}

// rotor is a sine wave made by turning a vector: two multiplications a sample instead of a call to Sin.
type rotor struct{ x, y, cos, sin float64 }

// turning returns a rotor at the frequency whose length shrinks by 60 dB in the given seconds (0: never).
func turning(rate int, hz, amplitude, decay float64) rotor {
	keep := 1.0
	if decay > 0 {
		keep = math.Exp(-6.908 / (decay * float64(rate)))
	}
	w := 2 * math.Pi * hz / float64(rate)
	return rotor{x: amplitude, cos: keep * math.Cos(w), sin: keep * math.Sin(w)}
}

func (o *rotor) tick() float64 {
	o.x, o.y = o.x*o.cos-o.y*o.sin, o.x*o.sin+o.y*o.cos
	return o.y
}

// glide follows a target along an exponential.
type glide struct{ value, pace float64 }

// gliding starts at a value and covers 63 % of a change in the given seconds, at rate steps a second.
func gliding(value, seconds, rate float64) glide {
	return glide{value, 1 - math.Exp(-1/(seconds*rate))}
}

func (g *glide) to(target float64) float64 {
	g.value += g.pace * (target - g.value)
	return g.value
}
