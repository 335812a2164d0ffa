package demo

import (
	"math/rand/v2"
)

// song is a piece for the little band: a tempo, a key, a row of chords and, for each player, a pattern of
// one bar. A pattern has one character a step (x loud, o soft, . rest) and any number of steps.
type song struct {
	name   string
	rate   int
	tempo  float64 // beats a minute
	beats  int     // in a bar
	root   float64 // MIDI note of the key, in the octave of the bass
	minor  bool
	chords []int   // degree of the scale the chord stands on, one a bar, repeated
	bars   int     // in all
	swing  float64 // how much every second step comes late, parts of a step

	kick, snare, hat, brush string
	bass, comp, lead        string

	low, mid, top timbre // the players of bass, comp and lead …

	pluckedComp, pluckedLead bool // … unless the part is played on plucked strings
	chimes                   bool // … or the lead on metal bars
	build                    bool // players enter one after another

	hall, wet float64 // the room: seconds, and its level
}

var (
	majorScale = [7]float64{0, 2, 4, 5, 7, 9, 11}
	minorScale = [7]float64{0, 2, 3, 5, 7, 8, 10}
)

// degree returns the MIDI note n steps up the song's scale from its root.
func (s song) degree(n int) float64 {
	scale := majorScale
	if s.minor {
		scale = minorScale
	}
	octave := 0
	for ; n < 0; n += 7 {
		octave--
	}
	return s.root + scale[n%7] + 12*float64(octave+n/7)
}

func (s song) barSeconds() float64 { return float64(s.beats) * 60 / s.tempo }

// seconds is how long the piece is, the last notes ringing out.
func (s song) seconds() float64 { return float64(s.bars)*s.barSeconds() + 1.2 }

// each calls fn for every struck step of a pattern in a bar, with its time, strength and the time to the next.
func (s song) each(bar int, pattern string, fn func(step int, at, strength, length float64)) {
	if pattern == "" {
		return
	}
	width := s.barSeconds() / float64(len(pattern))
	for i, c := range pattern {
		if c == '.' {
			continue
		}
		next := i + 1
		for next < len(pattern) && pattern[next] == '.' {
			next++
		}
		strength, late := 1.0, 0.0
		if c == 'o' {
			strength = 0.5
		}
		if i%2 == 1 {
			late = s.swing
		}
		fn(i, float64(bar)*s.barSeconds()+(float64(i)+late)*width, strength, float64(next-i)*width)
	}
}

// playing says whether a player who enters in the given place is heard in a bar.
func (s song) playing(bar, place int) bool {
	return !s.build || bar >= place*2 || bar == s.bars-1
}

// play renders the piece.
func (s song) play() *stage {
	st := newStage(s.rate, s.seconds())
	r := dice(s.name)
	s.drums(st, r)
	for bar := range s.bars {
		chord := s.chords[bar%len(s.chords)]
		if s.playing(bar, 0) {
			s.each(bar, s.comp, func(_ int, at, strength, length float64) { s.strum(st, r, chord, at, strength, length) })
		}
		if s.playing(bar, 1) {
			s.each(bar, s.bass, func(step int, at, strength, length float64) {
				n := chord
				if step > 0 && r.IntN(3) == 0 {
					n += [3]int{2, 4, 7}[r.IntN(3)]
				}
				st.put(at, s.low.note(r, s.rate, hertz(s.degree(n)), length*0.9), 0.34*strength, 0)
			})
		}
	}
	s.melody(st, r)
	if s.wet > 0 {
		st.room(s.hall, s.wet)
	}
	return st.floor(s.name, 2e-5)
}

func (s song) drums(st *stage, r *rand.Rand) {
	k, sn, closed, open, br := kick(s.rate), snare(r, s.rate), hat(r, s.rate, false), hat(r, s.rate, true), brush(r, s.rate)
	for bar := range s.bars {
		if !s.playing(bar, 2) {
			continue
		}
		human := func() float64 { return between(r, 0, 0.004) }
		s.each(bar, s.kick, func(_ int, at, v, _ float64) { st.put(at+human(), k, 0.75*v, 0) })
		s.each(bar, s.snare, func(_ int, at, v, _ float64) { st.put(at+human(), sn, 0.5*v, 0.05) })
		s.each(bar, s.brush, func(_ int, at, v, _ float64) { st.put(at+human(), br, 0.4*v, -0.2) })
		s.each(bar, s.hat, func(step int, at, v, _ float64) {
			h := closed
			if step == len(s.hat)-2 && bar%2 == 1 {
				h = open
			}
			st.put(at+human(), h, 0.3*v*between(r, 0.7, 1), 0.35)
		})
	}
}

// strum plays the three notes of a chord, plus its octave on plucked strings.
func (s song) strum(st *stage, r *rand.Rand, chord int, at, strength, length float64) {
	for i, step := range []int{0, 2, 4, 7} {
		hz := hertz(s.degree(chord+step) + 12)
		pan := 0.5 * (float64(i) - 1.5) / 1.5
		switch {
		case s.pluckedComp:
			st.put(at+0.018*float64(i), pluckString(r, s.rate, hz, min(2.5, length+0.6), 0.45+0.3*strength), 0.4*strength, pan)
		case step != 7:
			st.put(at, s.mid.note(r, s.rate, hz, length*0.8), 0.13*strength, pan)
		}
	}
}

// melody walks the scale in small steps, comes to rest on notes of the chord, and repeats its first two
// bars often enough to sound like a tune.
func (s song) melody(st *stage, r *rand.Rand) {
	theme := make([]int, 64)
	place := 0
	for i := range theme {
		place += [7]int{-2, -1, -1, 1, 1, 2, 0}[r.IntN(7)]
		place = max(-3, min(7, place))
		theme[i] = place
	}
	for bar := range s.bars {
		if !s.playing(bar, 3) {
			continue
		}
		chord, i := s.chords[bar%len(s.chords)], (bar%2)*16
		if bar%8 >= 6 {
			i += 32
		}
		s.each(bar, s.lead, func(step int, at, strength, length float64) {
			n := chord + theme[i]
			if step == 0 {
				n = chord + []int{0, 2, 4}[(theme[i]+9)%3]
			}
			i++
			hz := hertz(s.degree(n) + 24)
			var t track
			switch {
			case s.chimes:
				t = chime(s.rate, hz*2, 1.6)
			case s.pluckedLead:
				t = pluckString(r, s.rate, hz, min(3, length+1.2), 0.5+0.5*strength)
			default:
				t = s.top.note(r, s.rate, hz, length*0.85)
			}
			st.put(at, t, 0.24*strength, -0.15)
		})
	}
}
