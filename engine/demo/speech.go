package demo

import (
	"math"
	"math/rand/v2"

	"evenshelf/engine/audio"
)

// The scenes in which the voices are heard.

// alone is one voice close to a microphone, with the room's own noise under it (dB relative to the voice).
func alone(name string, t talker, rate int, seconds, noise float64) audio.Block {
	r := dice(name)
	v := t.speak(r, rate, seconds)
	v.add(0, hiss(r, len(v), 0.1*gain(noise)).through(lowpass(rate, 2500, 0.6)), 1)
	v.add(0, hiss(r, len(v), 0.1*gain(noise-14)), 1)
	return toBlock(v)
}

// turns lets two voices answer each other; each turn says who, how long, and how loud in dB.
func turns(r *rand.Rand, rate int, seconds float64, a, b talker, levelB float64) (first, second track) {
	first, second = silence(rate, seconds), silence(rate, seconds)
	at, side := 0.2, 0
	for at < seconds-2 {
		length := min(between(r, 3.5, 7), seconds-at-0.3)
		n := int(at * float64(rate))
		if side == 0 {
			first.add(n, a.speak(r, rate, length), 1)
		} else {
			second.add(n, b.speak(r, rate, length), gain(levelB))
		}
		at += length + between(r, 0.25, 0.7)
		side = 1 - side
	}
	return first, second
}

// interview is two people in one small room, the guest far quieter than the host.
func interview(name string, rate int, seconds, difference float64) audio.Block {
	r := dice(name)
	host, guest := turns(r, rate, seconds, boris, ada, -difference)
	s := newStage(rate, seconds)
	s.put(0, host, 1, -0.25)
	s.put(0, guest, 1, 0.25)
	return s.room(0.35, 0.08).floor(name, 0.1*gain(-52)).block()
}

// phoneIn is a presenter and a caller on a telephone line: 300 to 3400 Hz, a rough line.
func phoneIn(name string, rate int, seconds float64) audio.Block {
	r := dice(name)
	presenter, caller := turns(r, rate, seconds, cleo, boris, -2)
	for i, x := range caller {
		caller[i] = math.Tanh(6*x)/6 + 0.0008*white(r) // a carbon-like microphone bends the wave and hisses
	}
	caller.through(highpass(rate, 300, 0.54), highpass(rate, 300, 1.3), lowpass(rate, 3400, 0.54), lowpass(rate, 3400, 1.3))
	presenter.add(0, caller, 1.2)
	presenter.add(0, hiss(r, len(presenter), 0.1*gain(-58)), 1)
	return toBlock(presenter)
}

// commentary is an excited voice over a crowd that swells where something happens.
func commentary(name string, rate int, seconds float64) audio.Block {
	r := dice(name)
	t := cleo
	t.pace, t.lilt, t.effort, t.pauses, t.pitch = 5.6, 7, 0.85, 0.45, 190
	s := newStage(rate, seconds)
	for pan := -1.0; pan <= 1; pan += 0.5 {
		s.put(0, crowd(r, rate, seconds, []float64{seconds * 0.35, seconds * 0.8}), 0.35, pan)
	}
	s.put(0, t.speak(r, rate, seconds), 1.3, 0)
	return s.block()
}

// crowd is many people at once: noise shaped like voices, each band stirring on its own, with a roar
// around each of the given times.
func crowd(r *rand.Rand, rate int, seconds float64, roars []float64) track {
	out := silence(rate, seconds)
	for _, hz := range []float64{280, 520, 900, 1500, 2600, 4200} {
		f := bandpass(rate, hz*between(r, 0.9, 1.1), 1.4)
		stir := gliding(1, 0.12, float64(rate))
		target := 1.0
		for i := range out {
			if i%(rate/10) == 0 {
				target = between(r, 0.5, 1.4)
			}
			out[i] += f.tick(white(r)) * stir.to(target) * math.Sqrt(500/(hz+200))
		}
	}
	out.times(0.05 / out.rms())
	for i := range out {
		t := float64(i) / float64(rate)
		g := 1.0
		for _, at := range roars {
			d := t - at
			w := 0.8 // swells fast …
			if d > 0 {
				w = 2.5 // … and dies down slowly
			}
			g += 4 * math.Exp(-d*d/(w*w))
		}
		out[i] *= g
	}
	return out
}

// distant is a talk from the back of a hall, recorded far too low: the recorder's hiss is close under it.
func distant(name string, rate int, seconds float64) audio.Block {
	r := dice(name)
	s := newStage(rate, seconds)
	s.put(0, boris.speak(r, rate, seconds), 0.5, 0)
	s.room(1.1, 0.25)
	s.l.add(0, hiss(r, len(s.l), 0.1*gain(-34)), 1)
	return toBlock(s.l)
}
