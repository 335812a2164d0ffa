package demo

import (
	"math"
	"math/rand/v2"
)

// Each function below renders one note or one stroke, peaking near ±1, mono, dry.

// kick is a drum whose pitch falls as the head slackens.
func kick(rate int) track {
	t := silence(rate, 0.35)
	phase := 0.0
	for i := range t {
		s := float64(i) / float64(rate)
		phase += (48 + 130*math.Exp(-s*32)) / float64(rate)
		t[i] = math.Sin(2*math.Pi*phase) * math.Exp(-s*11) * min(1, s*1500)
	}
	return t.fade(rate, 0, 0.05)
}

// snare is a short tone of the shell under the rattle of the wires.
func snare(r *rand.Rand, rate int) track {
	t := hiss(r, int(0.22*float64(rate)), 0.5).through(highpass(rate, 1200, 0.7))
	shell := turning(rate, 190, 0.7, 0.18)
	for i := range t {
		s := float64(i) / float64(rate)
		t[i] = (t[i]*math.Exp(-s*22) + shell.tick()) * min(1, s*2500)
	}
	return t.fade(rate, 0, 0.03)
}

// hat is a struck cymbal, short or (open) longer.
func hat(r *rand.Rand, rate int, open bool) track {
	length, decay := 0.06, 70.0
	if open {
		length, decay = 0.3, 14
	}
	t := hiss(r, int(length*float64(rate)), 0.45).through(highpass(rate, 6500, 0.8))
	for i := range t {
		t[i] *= math.Exp(-float64(i) / float64(rate) * decay)
	}
	return t.fade(rate, 0.001, 0.01)
}

// brush is a soft swish on a drum head.
func brush(r *rand.Rand, rate int) track {
	return hiss(r, int(0.24*float64(rate)), 0.3).through(bandpass(rate, 3200, 0.6)).fade(rate, 0.06, 0.17)
}

// timbre describes a sustained note of oscillators through a low-pass filter.
type timbre struct {
	voices  int     // detuned sawtooths sounding together
	detune  float64 // semitones between the outermost
	bright  float64 // corner of the filter, multiples of the note's frequency
	pluck   float64 // seconds in which the filter closes to a third; 0 leaves it open
	attack  float64 // seconds
	release float64 // seconds, after the note's length
	vibrato float64 // semitones, at about 5.5 Hz, setting in late
}

var (
	bassGuitar = timbre{voices: 1, bright: 6, pluck: 0.25, attack: 0.004, release: 0.05}
	synthBass  = timbre{voices: 2, detune: 0.1, bright: 9, pluck: 0.15, attack: 0.003, release: 0.04}
	organ      = timbre{voices: 2, detune: 0.06, bright: 4, attack: 0.015, release: 0.06}
	pad        = timbre{voices: 4, detune: 0.25, bright: 3.5, attack: 0.35, release: 0.5}
	brass      = timbre{voices: 2, detune: 0.12, bright: 7, attack: 0.05, release: 0.1, vibrato: 0.1}
	reed       = timbre{voices: 1, bright: 8, attack: 0.04, release: 0.08, vibrato: 0.3}
	stab       = timbre{voices: 3, detune: 0.2, bright: 8, pluck: 0.12, attack: 0.003, release: 0.05}
)

// note renders a sustained note of a timbre.
func (v timbre) note(r *rand.Rand, rate int, hz, seconds float64) track {
	t := silence(rate, seconds+v.release)
	saws := make([]saw, v.voices)
	steps := make([]float64, v.voices)
	for k := range saws {
		saws[k].phase = r.Float64()
		spread := 0.0
		if v.voices > 1 {
			spread = v.detune * (float64(k)/float64(v.voices-1) - 0.5)
		}
		steps[k] = hz * math.Exp2(spread/12) / float64(rate)
	}
	f := lowpass(rate, hz*v.bright, 0.8)
	shake, bend := turning(rate, between(r, 5.2, 5.9), 1, 0), 1.0
	loud := 1 / math.Sqrt(float64(v.voices))
	for i := range t {
		s := float64(i) / float64(rate)
		if i%64 == 0 && v.pluck > 0 {
			f.retune(lowpass(rate, hz*v.bright*(1+2*math.Exp(-s/v.pluck))/3, 0.8))
		}
		if v.vibrato > 0 {
			bend = 1 + 0.0595*v.vibrato*shake.tick()*min(1, s/0.5)
		}
		x := 0.0
		for k := range saws {
			x += saws[k].tick(steps[k] * bend)
		}
		t[i] = f.tick(x) * loud * min(1, s/v.attack)
	}
	return t.fade(rate, 0, v.release)
}

// pluckString is a plucked string after Karplus and Strong (1983): a burst of noise goes round a delay line one
// period long, losing treble each time. Seconds is how long it rings; bright (0…1) how hard it is plucked.
func pluckString(r *rand.Rand, rate int, hz, seconds, bright float64) track {
	t := silence(rate, seconds)
	period := float64(rate)/hz - 0.5 // the averaging below delays by half a sample
	n := int(period)
	fraction := period - float64(n) // read between two samples, or high notes would be out of tune
	line := make([]float64, n+2)
	soft := glide{pace: 0.15 + 0.85*bright}
	mean := 0.0
	for i := range line {
		line[i] = soft.to(white(r))
		mean += line[i] / float64(len(line))
	}
	for i := range line {
		line[i] -= mean // what does not vibrate would never die away
	}
	keep := math.Exp(-6.908 / (hz * max(seconds, 0.4)))
	last := 0.0
	for i, at := 0, 0; i < len(t); i++ {
		older, old := line[at], line[(at+1)%len(line)]
		x := older*fraction + old*(1-fraction)
		t[i] = x
		line[at] = keep * 0.5 * (x + last)
		last = x
		if at++; at == len(line) {
			at = 0
		}
	}
	return t.fade(rate, 0.0005, 0.04)
}

// struck is a piano-like string: partials stretched by stiffness, high ones dying first; force 0…1 is how
// hard the hammer falls and so how bright the note is.
func struck(r *rand.Rand, rate int, hz, seconds, force float64) track {
	t := silence(rate, seconds)
	sustain := 6 * math.Sqrt(110/hz)
	sound := func(f, a, decay float64) {
		o := turning(rate, f, a, decay)
		for i := range t[:min(len(t), int(1.2*decay*float64(rate)))] { // to −72 dB
			t[i] += o.tick()
		}
	}
	for k := 1.0; k <= 9 && k*hz < min(9000, 0.42*float64(rate)); k++ {
		f := hz * k * math.Sqrt(1+0.0004*k*k)
		a := math.Pow(k, -1.1) * math.Exp(-k*(1-force)*0.55) * math.Abs(math.Sin(k*math.Pi/7.3))
		sound(f, a, sustain/(0.6+0.4*k))
		if k < 4 { // two strings a note, a hair apart, beat against each other
			sound(f*(1+between(r, 2, 6)*1e-4), 0.6*a, 1.3*sustain/(0.6+0.4*k))
		}
	}
	knock := hiss(r, int(0.02*float64(rate)), 0.15*force).through(lowpass(rate, 1800, 0.7)).fade(rate, 0.001, 0.015)
	t.add(0, knock, 1)
	return t.times(0.8*(0.15+0.85*force*force)).fade(rate, 0.002, 0.12)
}

// chime is a struck metal bar: few partials, far apart, ringing long.
func chime(rate int, hz, seconds float64) track {
	t := silence(rate, seconds)
	for _, p := range [][3]float64{{1, 1, 1}, {2.76, 0.5, 0.5}, {5.4, 0.25, 0.25}, {8.93, 0.12, 0.12}} {
		if hz*p[0] > 0.42*float64(rate) {
			break
		}
		o := turning(rate, hz*p[0], 0.5*p[1], 3*p[2])
		for i := range t {
			t[i] += o.tick()
		}
	}
	return t.fade(rate, 0.001, 0.08)
}
