package demo

import (
	"math/rand/v2"

	"evenshelf/engine/audio"
)

// scene is a moment of a film in its parts: what is whispered, what slams, what the room sounds like and
// what the music does. Stereo and 5.1 mixes are made from the same parts.
type scene struct {
	rate     int
	seconds  float64
	dialogue track
	effects  *stage
	tone     *stage // the room when nothing happens
	music    *stage
	rumble   track // what of the effects goes to the low-frequency channel
}

// shoot records a scene: two people whisper, doors slam, music swells near the end.
func shoot(name string, rate int, seconds float64) scene {
	r := dice(name)
	near, far := ada, boris
	near.breath, far.breath, near.pauses, far.pauses = 0.75, 0.9, 1.8, 1.8
	a, b := turns(r, rate, seconds, near, far, -3)
	a.add(0, b, 1)

	s := scene{rate: rate, dialogue: a, seconds: seconds, rumble: silence(rate, seconds)}
	s.effects, s.tone, s.music = newStage(rate, seconds), newStage(rate, seconds), newStage(rate, seconds)
	for _, at := range []float64{0.28, 0.55, 0.86} {
		bang := slam(r, rate)
		s.effects.put(at*seconds, bang, 0.65, between(r, -0.7, 0.7))
		s.rumble.add(s.effects.frame(at*seconds), bang, 0.5)
	}
	s.rumble.through(lowpass(rate, 90, 0.7), lowpass(rate, 90, 0.7))
	s.effects.room(0.9, 0.25)
	s.tone.l.add(0, hiss(r, len(a), 0.006).through(lowpass(rate, 300, 0.6)), 1)
	s.tone.r.add(0, hiss(r, len(a), 0.006).through(lowpass(rate, 300, 0.6)), 1)
	s.tone.floor(name, 3e-4)

	start := 0.6 * seconds
	for i, note := range []float64{38, 45, 50, 57, 62, 65} {
		t := pad.note(r, rate, hertz(note), seconds-start-1).fade(rate, 0.3*seconds, 1)
		s.music.put(start, t, 0.07, 0.8*(float64(i)-2.5)/2.5)
	}
	s.music.room(1.8, 0.25)
	return s
}

// slam is a heavy door: a blow, wood, and a latch that rattles after.
func slam(r *rand.Rand, rate int) track {
	t := silence(rate, 0.9)
	blow := hiss(r, int(0.3*float64(rate)), 0.8).through(lowpass(rate, 900, 0.7)).fade(rate, 0.002, 0.29)
	t.add(0, blow, 1)
	for _, hz := range []float64{62, 97, 148, 231} {
		o := turning(rate, hz*between(r, 0.95, 1.05), 0.5, 0.5)
		for i := range t {
			t[i] += o.tick()
		}
	}
	for at := 0.06; at < 0.4; at += between(r, 0.03, 0.09) {
		t.add(int(at*float64(rate)), hiss(r, rate/80, 0.25).through(highpass(rate, 2500, 0.7)).fade(rate, 0.001, 0.01), 1)
	}
	return t.fade(rate, 0.002, 0.2)
}

// stereo is the mix for two loudspeakers.
func (s scene) stereo() audio.Block {
	m := newStage(s.rate, s.seconds)
	m.put(0, s.dialogue, 0.35, 0)
	for _, part := range []*stage{s.effects, s.tone, s.music} {
		m.l.add(0, part.l, 1)
		m.r.add(0, part.r, 1)
	}
	return m.block()
}

// surround is the mix for 5.1 in the order of the channel mask: L R C LFE Ls Rs.
func (s scene) surround() audio.Block {
	n := len(s.dialogue)
	var out [6]track
	for c := range out {
		out[c] = make(track, n)
	}
	out[2].add(0, s.dialogue, 0.5)
	out[3].add(0, s.rumble, 0.7)
	for _, c := range []int{0, 4} {
		share := 1.0
		if c == 4 {
			share = 0.4
		}
		out[c].add(0, s.music.l, share)
		out[c+1].add(0, s.music.r, share)
		out[c].add(0, s.tone.l, 1)
		out[c+1].add(0, s.tone.r, 1)
	}
	out[0].add(0, s.effects.l, 1)
	out[1].add(0, s.effects.r, 1)
	delay := s.effects.frame(0.02) // the rear hears the slam by way of the walls
	out[4].add(delay, s.effects.r, 0.35)
	out[5].add(delay, s.effects.l, 0.35)
	r := dice("surround floor")
	for _, c := range []int{2, 3} {
		out[c].add(0, hiss(r, n, 1e-4), 1)
	}
	return toBlock(out[:]...)
}
