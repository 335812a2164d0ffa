package level_test

import (
	"math"
	"math/rand/v2"

	"evenshelf/engine/audio"
)

// film is a mix for pictures: dialogue at −27 LUFS, whispers at −45, effects at −13, over a bed of music at −50
// that swells now and then. With six channels speech is in the centre, all else on the left, the right and behind.
func film(r recordings, name string, scenes, channels int) programme {
	c := newComposer(r, 27)
	var effects audio.Block = make(audio.Block, 2) // on the left and the right, as long as c.x
	catchUp := func() {
		for i := range effects {
			effects[i] = append(effects[i], make([]float32, len(c.x)-len(effects[i]))...)
		}
	}
	for i := range scenes {
		switch i % 8 {
		case 3, 6: // a whispered scene
			c.say(whisper, 2, -45, 6)
		case 4: // something happens
			catchUp()
			e := at(-13, crash(c.rng, r.music[i%3], 5))
			c.turns = append(c.turns, turn{from: c.now(), to: c.now() + 5, kind: effect, lufs: -13})
			c.pause(5, 5)
			for ch := range effects {
				effects[ch] = append(effects[ch], e[ch]...)
			}
		default:
			c.say(speech, i%2, -27, 7)
		}
		c.pause(0.5, 2)
	}
	catchUp()
	c.x = added(audio.Block{c.x}, room(c.now()))[0]
	bed := shaped(stretch(r.music[0], 60, c.now()), func(s float64) float64 { return -27 + 4*math.Sin(s/9) })
	effects = added(effects, bed)
	p := programme{name: name, turns: c.turns}
	if channels == 2 {
		p.sound = added(amplified(spread(c.x, 2), -3.01), effects)
		return p
	}
	rumble := hiss(8, c.now(), -40, 1)[0]
	behind := amplified(effects, -9)
	p.sound = audio.Block{effects[0], effects[1], c.x, rumble, behind[1], behind[0]}
	return p
}

// crash is a burst of noise that dies away, again and again, over loud music.
func crash(rng *rand.Rand, music audio.Block, seconds float64) audio.Block {
	noise := spread(hiss(rng.Uint64(), seconds, -18, 0.6)[0], 2)
	noise = shaped(noise, func(s float64) float64 { return -30 * math.Mod(s, 1.1) })
	return added(noise, stretch(music, 30+60*rng.Float64(), seconds))
}

// wide is real music played with a wide range: over a piece, whose own level hardly moves, lies a plan of levels
// as players would make it, moving slowly or changing from one bar to the next.
func wide(r recordings, name string, piece int, seed uint64, seconds, depth float64, abrupt bool) programme {
	rng := rand.New(rand.NewPCG(seed, 0xa1))
	var times, levels []float64
	for s, last := 0.0, 0.0; s < seconds+20; {
		level := -depth * math.Pow(rng.Float64(), 0.8)
		if math.Abs(level-last) < depth/4 {
			continue
		}
		times, levels, last = append(times, s), append(levels, level), level
		s += 7 + 9*rng.Float64()
	}
	plan := func(s float64) float64 {
		i := 0
		for i+2 < len(times) && times[i+1] <= s {
			i++
		}
		x := (s - times[i]) / (times[i+1] - times[i])
		if abrupt {
			x = min(1, (s-times[i])/0.4)
			if i == 0 {
				return levels[0]
			}
			return levels[i-1] + (levels[i]-levels[i-1])*x
		}
		return levels[i] + (levels[i+1]-levels[i])*(1-math.Cos(math.Pi*x))/2
	}
	return programme{name: name, sound: shaped(stretch(at(-14, r.music[piece]), 20, seconds), plan)}
}

// tutti is a quiet passage after which everybody plays at once, two times: 26 dB and 14 dB up.
func tutti(r recordings) programme {
	plan := func(s float64) float64 {
		switch {
		case s < 22:
			return -26
		case s < 36:
			return 0
		case s < 54:
			return -14
		default:
			return 0
		}
	}
	p := programme{name: "quiet, then tutti", sound: shaped(stretch(at(-14, r.music[1]), 25, 68), plan)}
	for i, from := range []float64{0, 22, 36, 54} {
		p.turns = append(p.turns, turn{from: from, to: append([]float64{22, 36, 54}, p.seconds())[i], kind: song})
	}
	return p
}

const fadeSeconds = 10

// faded is music that comes up from nothing and goes back to it, 10 s each, evenly in dB.
func faded(r recordings, piece int, seconds float64) programme {
	return programme{name: "fades, " + pieces[piece], sound: shaped(stretch(at(-18, r.music[piece]), 30, seconds), func(s float64) float64 {
		return -50 * max(0, 1-s/fadeSeconds, 1-(seconds-s)/fadeSeconds)
	})}
}

// over is speech 10 dB over music that goes on all the time.
func over(r recordings, piece int) programme {
	c := newComposer(r, uint64(10+piece))
	for c.now() < 45 {
		c.say(speech, c.rng.IntN(3), -20, 7)
		c.pause(0.2, 0.5)
	}
	return c.on("speech 10 dB over "+pieces[piece], at(-30, stretch(r.music[piece], 60, c.now())), 2)
}

// magazine is so many parts of speech and music in turns, as on the radio.
func magazine(r recordings, parts int) programme {
	c := newComposer(r, 9)
	for i := range parts {
		if i%2 == 0 {
			for from := c.now(); c.now() < from+14; {
				c.say(speech, (i/2)%3, -24, 7)
				c.pause(0.3, 0.9)
			}
			continue
		}
		c.add(song, 0, -18, stretch(r.music[i%3], 40+float64(10*i), 16))
		c.pause(0.3, 0.6)
	}
	return c.on("speech and music in turns", hiss(9, c.now(), -66, 0.5), 1)
}

// silent is a programme with 8 s in which nobody speaks, meant so, between two voices 10 dB apart.
func silent(r recordings) programme {
	c := newComposer(r, 11)
	for i := range 6 {
		c.say(speech, 0, -20, 7)
		if i == 3 {
			c.pause(8, 8)
		} else {
			c.pause(0.4, 1)
		}
		if i >= 3 {
			c.say(speech, 1, -30, 7)
			c.pause(0.4, 1)
		}
	}
	return c.on("silence of 8 s", hiss(10, c.now(), -62, 0.5), 1)
}

// clapped is a talk at the end of which people clap: dense short bursts of noise, each from somewhere.
func clapped(r recordings) programme {
	c := newComposer(r, 13)
	for c.now() < 40 {
		c.say(speech, 0, -26, 7)
		c.pause(0.4, 1)
	}
	hands := audio.NewBlock(1, 12*rate)
	for range 4000 {
		from, size := c.rng.IntN(len(hands[0])-rate/50), 0.1+c.rng.Float64()
		for i := range rate / 50 {
			hands[0][from+i] += float32(size * c.rng.NormFloat64() * math.Exp(-float64(i)/90))
		}
	}
	hands = shaped(hands, func(s float64) float64 { return -20*max(0, 1-s) - 24*max(0, s-8)/4 })
	c.add(applause, 0, -36, hands)
	c.say(speech, 0, -26, 7)
	return c.on("applause after speech", hiss(14, c.now(), -64, 0.5), 1)
}
