package demo

import "math"

// swell is a piece for a string orchestra with drums and brass that grows from nothing to everything a
// hall can hold and falls back: the recording with the widest range on the shelf.
func swell(name string, rate int, seconds float64) *stage {
	st := newStage(rate, seconds)
	r := dice(name)
	chords := [][]float64{ // MIDI notes; invented, in D minor
		{38, 50, 57, 62, 65}, {34, 46, 58, 62, 65}, {41, 53, 57, 60, 69}, {43, 50, 58, 62, 67},
		{45, 52, 57, 61, 64}, {38, 50, 57, 65, 69}, {36, 48, 55, 64, 67}, {45, 57, 61, 64, 73},
	}
	const chordSeconds = 4.2
	// Loudness climbs evenly in dB to the peak at three quarters and falls faster than it rose.
	peak := 0.76 * seconds
	dynamic := func(t float64) float64 {
		if t < peak {
			return -40 * (1 - t/peak)
		}
		return -34 * (t - peak) / (seconds - peak)
	}
	for n := 0; float64(n)*chordSeconds < seconds-1; n++ {
		at := float64(n) * chordSeconds
		force := 1 + dynamic(at)/40 // 0 … 1
		desk := timbre{voices: 5, detune: 0.22, bright: 2.5 + 6*force, attack: 0.5, release: 0.9, vibrato: 0.12}
		for i, note := range chords[n%len(chords)] {
			length := min(chordSeconds, seconds-at-0.95)
			st.put(at, desk.note(r, rate, hertz(note), length), 0.14, 0.8*(float64(i)-2)/2)
			if force > 0.7 && i > 2 {
				st.put(at, brass.note(r, rate, hertz(note), length), 0.12*force, 0.3)
			}
		}
		if force > 0.6 {
			for t := 0.0; t < chordSeconds; t += 0.075 { // a roll on the kettledrum
				st.put(at+t, kettledrum(rate, hertz(chords[n%len(chords)][0])), 0.1*force, -0.3)
			}
		}
	}
	for i := range st.l {
		g := gain(dynamic(float64(i) / float64(rate)))
		st.l[i] *= g
		st.r[i] *= g
	}
	st.room(2.2, 0.3).floor(name, 4e-5)
	st.l.fade(rate, 0.5, 1.5)
	st.r.fade(rate, 0.5, 1.5)
	return st
}

// kettledrum is one stroke on a tuned drum: the membrane's partials, from memory about 1 : 1.5 : 2 : 2.4.
func kettledrum(rate int, hz float64) track {
	t := silence(rate, 0.9)
	for k, ratio := range []float64{1, 1.5, 1.99, 2.44} {
		o := turning(rate, hz*ratio, 0.6/float64(k+1), 0.8/float64(k+1))
		for i := range t {
			t[i] += o.tick()
		}
	}
	return t.fade(rate, 0.003, 0.1)
}

// solo is a slow piece for one piano: broken chords below, a line above, every note with its own weight.
func solo(name string, rate int, seconds float64) *stage {
	st := newStage(rate, seconds)
	r := dice(name)
	s := song{root: 45, minor: true}
	chords := []int{0, 5, 3, 4, 0, 2, 6, 4}
	const beat = 0.52
	for n := 0; ; n++ {
		at := 0.15 + float64(n)*beat + between(r, 0, 0.025)
		left := seconds - at
		if left < 3 {
			break
		}
		chord := chords[n/6%len(chords)]
		// Phrases of four bars rise and sink again.
		force := 0.32 + 0.3*math.Sin(math.Pi*math.Mod(float64(n), 24)/24) + between(r, -0.06, 0.06)
		low := s.degree(chord + []int{0, 4, 7, 9, 7, 4}[n%6])
		st.put(at, struck(r, rate, hertz(low), min(left, 3), force*0.8), 0.3, -0.3)
		if n%6 == 0 || n%3 == 1 || r.IntN(4) == 0 {
			high := s.degree(chord+[]int{0, 2, 4, 7}[r.IntN(4)]) + 24
			st.put(at, struck(r, rate, hertz(high), min(left, 2.6), force), 0.4, 0.3)
		}
	}
	return st.room(1.4, 0.12).floor(name, 2e-5)
}

// choir sings vowels without words: many detuned voices through the resonances of a throat.
func choir(name string, rate int, seconds float64) *stage {
	st := newStage(rate, seconds)
	r := dice(name)
	s := song{root: 43}
	chords := []int{0, 3, 5, 4, 1, 4, 0}
	const length = 4.0
	singer := timbre{voices: 5, detune: 0.35, bright: 12, attack: 0.7, release: 1.1, vibrato: 0.25}
	for n := 0; float64(n)*length < seconds-2; n++ {
		at := float64(n) * length
		chord := chords[n%len(chords)]
		v := vowels[[]int{0, 3, 4, 1}[n%4]]
		for i, step := range []int{0, 4, 9, 14, 16} {
			stretch := 1 + 0.05*float64(i) // higher voices come from shorter throats
			t := singer.note(r, rate, hertz(s.degree(chord+step)), min(length, seconds-at-1.2))
			t.through(formant(rate, v[0]*stretch, 90), formant(rate, v[1]*stretch, 110), formant(rate, v[2]*stretch, 170))
			st.put(at, t, 0.05*(1+0.4*math.Sin(float64(n))), 0.9*(float64(i)-2)/2)
		}
	}
	return st.room(3, 0.35).floor(name, 3e-5)
}
