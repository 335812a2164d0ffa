package demo

import (
	"math"
	"math/rand/v2"
)

// talker is an invented voice: a source (vocal folds and breath) and a tract (resonances) after the
// source–filter picture of speech. What it says is no language; it has the rhythm of one.
type talker struct {
	pitch  float64 // Hz, the middle of the voice
	lilt   float64 // semitones between a stressed and an unstressed syllable
	tract  float64 // resonances relative to a long throat's; a shorter throat has higher ones
	pace   float64 // syllables a second
	breath float64 // 0 clear, 1 whispered: how much of the source is air
	effort float64 // 0 soft to 1 shouted: how sharply the folds close, how even the syllables are
	pauses float64 // length of the pauses between phrases; 1 is unhurried
}

var (
	ada   = talker{pitch: 205, lilt: 4, tract: 1.16, pace: 4.3, breath: 0.10, effort: 0.45, pauses: 1}
	boris = talker{pitch: 112, lilt: 3, tract: 1.00, pace: 3.9, breath: 0.05, effort: 0.50, pauses: 1.1}
	cleo  = talker{pitch: 168, lilt: 5, tract: 1.09, pace: 4.8, breath: 0.18, effort: 0.35, pauses: 0.8}
)

// utter is one speech sound: where its resonances lie and what drives them.
type utter struct {
	f1, f2, f3  float64 // Hz
	voice, air  float64 // level of the folds and of breath through the whole tract
	rush, rushF float64 // level and centre (Hz) of noise made at the teeth
	pitch       float64 // relative to the talker's
	seconds     float64
}

// Resonances of vowels are rounded textbook averages for men's voices, from memory.
var vowels = [][3]float64{
	{730, 1090, 2440}, {530, 1840, 2480}, {270, 2290, 3010}, {570, 840, 2410},
	{300, 870, 2240}, {660, 1720, 2410}, {490, 1350, 1690}, {500, 1500, 2500},
}

// consonants before a vowel; zero resonances mean "already those of the vowel to come".
var consonants = []struct {
	kind  string
	parts []utter
}{
	{"s", []utter{{rush: 0.5, rushF: 5600, seconds: 0.09}}},
	{"sh", []utter{{rush: 0.5, rushF: 3000, seconds: 0.09}}},
	{"f", []utter{{rush: 0.15, rushF: 4500, seconds: 0.07}}},
	{"z", []utter{{f1: 300, f2: 1500, f3: 2500, voice: 0.35, rush: 0.25, rushF: 5000, seconds: 0.07}}},
	{"t", []utter{{seconds: 0.05}, {rush: 0.8, rushF: 4200, seconds: 0.012}, {air: 0.25, seconds: 0.03}}},
	{"k", []utter{{seconds: 0.05}, {rush: 0.7, rushF: 2000, seconds: 0.016}, {air: 0.3, seconds: 0.035}}},
	{"b", []utter{{f1: 200, f2: 800, f3: 2200, voice: 0.12, seconds: 0.05}, {rush: 0.3, rushF: 900, seconds: 0.008}}},
	{"d", []utter{{f1: 200, f2: 1700, f3: 2600, voice: 0.12, seconds: 0.045}, {rush: 0.4, rushF: 3500, seconds: 0.008}}},
	{"m", []utter{{f1: 250, f2: 1000, f3: 2200, voice: 0.45, seconds: 0.07}}},
	{"n", []utter{{f1: 250, f2: 1500, f3: 2500, voice: 0.45, seconds: 0.06}}},
	{"l", []utter{{f1: 350, f2: 1050, f3: 2700, voice: 0.6, seconds: 0.06}}},
	{"r", []utter{{f1: 350, f2: 1150, f3: 1600, voice: 0.6, seconds: 0.06}}},
	{"w", []utter{{f1: 300, f2: 650, f3: 2200, voice: 0.55, seconds: 0.06}}},
	{"", nil},
}

// phrase invents one breath of speech: syllables whose pitch sinks towards the end, a turn up or down on
// the last one, and a pause in which the talker may be heard to breathe in.
func (t talker) phrase(r *rand.Rand) []utter {
	var out []utter
	count := 5 + r.IntN(9)
	stress := r.IntN(2)
	for i := range count {
		stressed := (i+stress)%3 == 0 || r.IntN(7) == 0
		semitones := 1.5 - 3*float64(i)/float64(count)
		loud, long := between(r, 0.5, 0.7)+0.2*t.effort, 0.72
		if stressed {
			semitones += t.lilt * between(r, 0.6, 1.2)
			loud, long = 1, 1.25
		}
		if i == count-1 {
			long *= 1.5
			semitones += [3]float64{-4, -3, 5}[r.IntN(3)]
		}
		v := vowels[r.IntN(len(vowels))]
		pitch := math.Exp2(semitones / 12)
		left := long / t.pace * between(r, 0.85, 1.15)
		for _, p := range consonants[r.IntN(len(consonants))].parts {
			if p.f1 == 0 {
				p.f1, p.f2, p.f3 = v[0], v[1], v[2]
			}
			p.pitch = pitch
			out = append(out, p)
			left -= p.seconds
		}
		vowel := utter{f1: v[0], f2: v[1], f3: v[2], voice: loud, pitch: pitch, seconds: max(left, 0.06)}
		if i == count-1 { // the last syllable dies away
			vowel.seconds /= 2
			out = append(out, vowel)
			vowel.voice *= 0.4
		}
		out = append(out, vowel)
	}
	rest := utter{f1: 500, f2: 1500, f3: 2500, pitch: 1, seconds: t.pauses * between(r, 0.25, 0.8)}
	out = append(out, rest)
	if r.IntN(2) == 0 {
		rest.air, rest.seconds = 0.05, between(r, 0.25, 0.4)
		out = append(out, rest)
		rest.air, rest.seconds = 0, 0.08
		out = append(out, rest)
	}
	return out
}

// speak renders speech of a length at an RMS of about 0.1, pauses included.
func (t talker) speak(r *rand.Rand, rate int, seconds float64) track {
	out := silence(rate, seconds)
	m := newMouth(t, r, rate)
	for at := 0; at < len(out); {
		for _, u := range t.phrase(r) {
			n := min(int(u.seconds*float64(rate)), len(out)-at)
			m.say(out[at:at+n], u)
			at += n
		}
	}
	out.fade(rate, 0.01, 0.15)
	return out.times(0.1 / max(out.rms(), 1e-9))
}

// mouth is the synthesiser: everything that glides from one speech sound to the next.
type mouth struct {
	t                      talker
	r                      *rand.Rand
	rate                   int
	f1, f2, f3             glide
	voice, air, rush, bend glide
	tract                  [5]biquad
	teeth                  biquad
	phase, wobble, amp     float64 // of the glottal cycle: place, this cycle's jitter and shimmer
	flow                   float64 // last sample's air flow
}

// controlHz is how often resonances are moved: finer than any articulation.
const controlHz = 400

func newMouth(t talker, r *rand.Rand, rate int) *mouth {
	m := &mouth{t: t, r: r, rate: rate, wobble: 1, amp: 1}
	m.f1, m.f2, m.f3 = gliding(500, 0.02, controlHz), gliding(1500, 0.025, controlHz), gliding(2500, 0.025, controlHz)
	m.bend = gliding(1, 0.05, controlHz)
	m.voice, m.air, m.rush = gliding(0, 0.008, float64(rate)), gliding(0, 0.012, float64(rate)), gliding(0, 0.004, float64(rate))
	m.tract[3] = formant(rate, 3500*t.tract, 200)
	m.tract[4] = formant(rate, 4500*t.tract, 300)
	return m
}

// say renders one speech sound into dst.
func (m *mouth) say(dst track, u utter) {
	voice, air := u.voice*(1-m.t.breath), u.air+u.voice*0.25*m.t.breath
	if u.rush > 0 {
		m.teeth.retune(bandpass(m.rate, u.rushF*(0.5+0.5*m.t.tract), 1.6))
	}
	every := m.rate / controlHz
	for start := 0; start < len(dst); start += every {
		m.tract[0].retune(formant(m.rate, m.f1.to(u.f1*m.t.tract*(1+0.2*m.t.effort)), 70))
		m.tract[1].retune(formant(m.rate, m.f2.to(u.f2*m.t.tract), 95))
		m.tract[2].retune(formant(m.rate, m.f3.to(u.f3*m.t.tract), 140))
		step := m.t.pitch * m.bend.to(u.pitch) / float64(m.rate)
		for i := start; i < min(start+every, len(dst)); i++ {
			pulse := m.glottis(step)
			n := white(m.r)
			// Breath is drawn by the same folds: it comes in gusts with each cycle.
			x := pulse*m.voice.to(voice) + n*(0.3*(m.air.to(air)+1e-5))*(0.6+0.4*math.Abs(pulse))
			for k := range m.tract {
				x = m.tract[k].tick(x)
			}
			// Some breath passes the lips without resonating, up to the top of the band.
			dst[i] = x + n*0.004*(m.voice.value+m.air.value) + m.rush.to(u.rush)*m.teeth.tick(n)*0.5
		}
	}
}

// glottis returns the change of air flow through the folds: they open slowly and close sharply, no two
// cycles quite alike. Effort shortens the closing, which is what makes a loud voice bright.
func (m *mouth) glottis(step float64) float64 {
	m.phase += step * m.wobble
	if m.phase >= 1 {
		m.phase--
		m.wobble, m.amp = 1+0.012*m.r.NormFloat64(), 1+0.05*m.r.NormFloat64()
	}
	const opening = 0.42
	closing := 0.26 - 0.16*m.t.effort
	var flow float64
	switch p := m.phase; {
	case p < opening:
		flow = 0.5 - 0.5*math.Cos(math.Pi*p/opening)
	case p < opening+closing:
		flow = math.Cos(math.Pi / 2 * (p - opening) / closing)
	}
	flow *= m.amp
	d := (flow - m.flow) / step * 0.1
	m.flow = flow
	return d
}
