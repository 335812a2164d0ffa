package demo

import (
	"math"
	"math/rand/v2"

	"evenshelf/engine/audio"
)

// wear is what the years and a worn machine have done to a reel, levels relative to a programme RMS of 0.1.
type wear struct {
	hiss    float64 // dB
	hum     float64 // dB, of the 50 Hz fundamental
	wow     float64 // share by which the speed wavers
	crackle float64 // clicks a second
	top     float64 // Hz, where the band ends
}

// reel plays a recording on a worn machine: the speed wavers, the treble is gone, and hiss, hum and
// crackle lie over it. Mono.
func reel(name string, rate int, programme track, w wear) audio.Block {
	r := dice(name + " reel")
	t := wowed(programme, rate, w.wow, r)
	t.times(0.1 / max(t.rms(), 1e-9))
	for i, x := range t {
		t[i] = 0.35 * math.Tanh(x/0.35) // tape saturates gently
	}
	t.add(0, crackle(r, rate, len(t), w.crackle), 1)
	t.through(highpass(rate, 70, 0.7), lowpass(rate, w.top, 0.54), lowpass(rate, w.top, 1.3))
	t.add(0, hiss(r, len(t), 0.1*gain(w.hiss)).through(highpass(rate, 400, 0.5), lowpass(rate, w.top*1.1, 0.7)), 1)
	for k, g := range []float64{1, 0.35, 0.5, 0.12, 0.25} { // mains hum: odd harmonics stand out
		o := turning(rate, 50*float64(k+1), 0.1*gain(w.hum)*math.Sqrt2*g, 0)
		for i := range t {
			t[i] += o.tick()
		}
	}
	return toBlock(t)
}

// wowed returns the track played at a speed that wavers twice and seven times a second.
func wowed(t track, rate int, depth float64, r *rand.Rand) track {
	out := make(track, len(t))
	slow, quick := turning(rate, between(r, 0.5, 0.8), depth, 0), turning(rate, between(r, 6, 8), depth/5, 0)
	at := 0.0
	for i := range out {
		n := int(at)
		if n+1 >= len(t) {
			break
		}
		f := at - float64(n)
		out[i] = t[n]*(1-f) + t[n+1]*f
		at += 1 + slow.tick() + quick.tick()
	}
	return out
}

// crackle is dust: short clicks at random times, few of them strong.
func crackle(r *rand.Rand, rate, frames int, perSecond float64) track {
	t := make(track, frames)
	for at := 0.0; perSecond > 0; {
		at += r.ExpFloat64() / perSecond * float64(rate)
		if int(at) >= frames {
			break
		}
		size := 0.06 * math.Exp(r.NormFloat64()*0.7)
		for i := range min(rate/2000, frames-int(at)) {
			t[int(at)+i] += min(size, 0.35) * white(r)
		}
	}
	return t
}
