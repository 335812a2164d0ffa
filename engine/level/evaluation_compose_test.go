package level_test

import (
	"math"
	"math/rand/v2"

	"evenshelf/engine/audio"
)

// programme is a composed recording together with what is known of it because it was composed.
type programme struct {
	name  string
	sound audio.Block // at 48 kHz
	turns []turn      // what sounds when, in order; nil where that does not matter
}

// turn is a stretch of one sound, without the pauses around it.
type turn struct {
	from, to float64 // s
	kind     kind
	voice    int     // who, of speech
	lufs     float64 // its own loudness in the source
}

type kind string

const (
	speech   kind = "speech"
	whisper  kind = "whisper"
	song     kind = "music"
	effect   kind = "effect"
	applause kind = "applause"
)

func (p programme) seconds() float64 { return float64(p.sound.Frames()) / rate }

// composer puts sounds in a row. All of it is seeded: equal calls make equal sound.
type composer struct {
	recordings
	rng   *rand.Rand
	x     []float32
	turns []turn
	next  [3]int // the recording each voice goes on with
}

func newComposer(r recordings, seed uint64) *composer {
	return &composer{recordings: r, rng: rand.New(rand.NewPCG(seed, 0x1eafe))}
}

func (c *composer) now() float64 { return float64(len(c.x)) / rate }

func (c *composer) pause(least, most float64) {
	c.x = append(c.x, make([]float32, int((least+(most-least)*c.rng.Float64())*rate))...)
}

func (c *composer) add(k kind, voice int, lufs float64, sound audio.Block) {
	sound = at(lufs, sound)
	t := turn{from: c.now(), kind: k, voice: voice, lufs: lufs}
	c.x = append(c.x, sound[0]...)
	t.to = c.now()
	c.turns = append(c.turns, t)
}

// say lets a voice read for some seconds, recording by recording, with a breath between them.
func (c *composer) say(k kind, voice int, lufs, seconds float64) {
	var x []float32
	for float64(len(x)) < (seconds-1)*rate {
		if len(x) > 0 {
			x = append(x, make([]float32, int((0.08+0.12*c.rng.Float64())*rate))...)
		}
		all := c.voices[voice]
		x = append(x, all[c.next[voice]%len(all)]...)
		c.next[voice]++
	}
	if most := int((seconds + 2) * rate); len(x) > most {
		x = x[:most]
	}
	c.add(k, voice, lufs, audio.Block{x})
}

// on returns the programme with a background of noise, mono or on so many channels.
func (c *composer) on(name string, background audio.Block, channels int) programme {
	x := spread(c.x, channels)
	if background != nil {
		x = added(x, background)
	}
	return programme{name, x, c.turns}
}

// room is what is heard of a very quiet one.
func room(seconds float64) audio.Block { return hiss(1, seconds, -75, 0.5) }

// Pauses between turns, s.
var pauses = []struct {
	name        string
	least, most float64
}{{"0.4–1.5 s", 0.4, 1.5}, {"0.25–0.4 s", 0.25, 0.4}, {"none", 0, 0}}

// conversation is so many turns of some 7 s of two voices, the louder at −20 LUFS, the other so many dB below it, over
// room noise at −65 LUFS.
func conversation(r recordings, name string, turns int, difference, least, most float64) programme {
	c := newComposer(r, uint64(difference*100+most*10))
	c.pause(0.5, 0.5)
	for i := range turns {
		c.say(speech, i%2, -20-difference*float64(i%2), 7)
		c.pause(least, most)
	}
	return c.on(name, hiss(2, c.now(), -65, 0.5), 1)
}

// ramp is one reader who gets louder by 40 dB, evenly.
func ramp(r recordings, seconds float64) programme {
	c := newComposer(r, 40)
	for c.now() < seconds {
		c.say(speech, 0, -23, 7)
		c.pause(0.4, 0.8)
	}
	p := c.on("ramp of 40 dB", nil, 1)
	length := p.seconds()
	p.sound = added(shaped(p.sound, func(s float64) float64 { return -29 + 40*s/length }), room(length))
	return p
}

// steps is one reader who gets louder by 40 dB in eight steps of so many seconds or a little more.
func steps(r recordings, seconds float64) programme {
	c := newComposer(r, 8)
	for i := range 8 {
		for from := c.now(); c.now() < from+seconds; {
			c.say(speech, 0, -52+40*float64(i)/7, min(7, seconds))
			c.pause(0.4, 0.9)
		}
	}
	return c.on("8 steps over 40 dB", room(c.now()), 1)
}

// window is one voice after another at any level from a whisper to a shout 40 dB above it.
func window(r recordings, turns int) programme {
	c := newComposer(r, 4)
	for i := range turns {
		c.say(speech, i%3, -52+40*c.rng.Float64(), 6)
		c.pause(0.4, 1.2)
	}
	return c.on("window of 40 dB", room(c.now()), 1)
}

// lecture is a voice far from the microphone, in noise.
func lecture(r recordings) programme {
	c := newComposer(r, 5)
	for c.now() < 45 {
		c.say(speech, 0, -46, 8)
		c.pause(0.5, 2)
	}
	return c.on("quiet noisy lecture", hiss(5, c.now(), -60, 0.8), 1)
}

// buzzing is speech in a room with a steady noise and pauses in which only that is heard.
func buzzing(r recordings, name string, noise func(seconds float64) audio.Block) programme {
	c := newComposer(r, 6)
	for c.now() < 60 {
		c.say(speech, c.rng.IntN(3), -24-6*c.rng.Float64(), 7)
		c.pause(0.8, 4)
	}
	return c.on(name, noise(c.now()), 1)
}

// hum is 50 Hz with harmonics that fall off.
func hum(seconds float64) audio.Block {
	sum := sine(50, seconds, -50)
	for k := 2; k < 12; k++ {
		sum = added(sum, sine(50*float64(k), seconds, -50-6*math.Log2(float64(k))))
	}
	return added(at(-52, sum), hiss(4, seconds, -68, 0.5))
}

// fan is the steady noise of one.
func fan(seconds float64) audio.Block { return hiss(12, seconds, -48, 0.9) }

// alone is a voice by itself.
func alone(r recordings, name string, seconds, lufs float64, channels int) programme {
	c := newComposer(r, uint64(seconds))
	for c.now() < seconds {
		c.say(speech, 0, lufs, min(7, seconds))
		c.pause(0.3, 0.8)
	}
	p := c.on(name, hiss(3, c.now(), lufs-45, 0.5), channels)
	p.sound = p.sound.Cut(make(audio.Block, channels), 0, min(p.sound.Frames(), int(seconds*rate)))
	return p
}
