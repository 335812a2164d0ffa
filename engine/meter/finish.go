package meter

import "evenshelf/engine/audio"

// Finish ends the programme and returns what was measured. Call it once; after Reset, once again.
//
// What is not defined is audio.Undefined or −Inf: everything but SampleRate to Duration for silence,
// Integrated and MaxMomentary under 400 ms, MaxShortTerm and Range under 3 s.
func (m *Meter) Finish() (Reading, Timeline) {
	m.runOut()
	f := m.format
	steps := wholeSteps(m.written, f.Rate)
	programme := course{f.Rate, m.energies[:steps]}
	followed := course{f.Rate, m.energies[:steps+rangeTail]}
	r := Reading{
		SampleRate:   f.Rate,
		Channels:     f.Layout.Channels,
		Frames:       m.written,
		Duration:     f.Seconds(m.written),
		Integrated:   integrated(programme.whole(momentarySteps)),
		Range:        audio.LU(audio.Undefined),
		MaxMomentary: audio.LUFS(audio.Undefined),
		MaxShortTerm: audio.LUFS(audio.Undefined),
		TruePeak:     audio.DBTP(audio.ToDB(m.truePeak)),
		SamplePeak:   audio.DBFS(audio.ToDB(m.samplePeak)),
	}
	if steps >= momentarySteps {
		r.MaxMomentary = audio.LUFS(loudness(m.maxMoment))
	}
	r.ShortTerm10, r.ShortTerm50, r.ShortTerm95 = r.Integrated, r.Integrated, r.Integrated
	if steps >= shortTermSteps {
		r.MaxShortTerm = audio.LUFS(loudness(m.maxShort))
		r.Range = loudnessRange(followed.whole(shortTermSteps))
		r.ShortTerm10, r.ShortTerm50, r.ShortTerm95 = spread(programme.whole(shortTermSteps))
	}
	r.PLR = audio.LU(float64(r.TruePeak) - float64(r.Integrated))
	return r, m.timeline()
}

// spread returns the 10th, 50th and 95th percentile of the short-term powers above −70 LUFS.
func spread(shortTerm []float64) (p10, p50, p95 audio.LUFS) {
	kept := sortedAbove(shortTerm, power(absoluteGate))
	if len(kept) == 0 {
		none := audio.LUFS(audio.Undefined)
		return none, none, none
	}
	at := func(p float64) audio.LUFS { return audio.LUFS(loudness(percentile(kept, p))) }
	return at(10), at(50), at(95)
}

// runOut feeds the silence after the programme: past the reach of the true-peak kernel, and until the
// step under way and the tail of the loudness range are complete.
func (m *Meter) runOut() {
	if m.ended {
		return
	}
	m.ended = true
	end := max(stepsEnd(m.steps()+rangeTail, m.format.Rate), m.written+lead)
	for m.weighed < end {
		for c := range m.lanes {
			clear(m.lanes[c].raw[m.filled:])
		}
		m.work()
	}
}

// steps returns how many steps the programme touches.
func (m *Meter) steps() int {
	n := wholeSteps(m.written, m.format.Rate)
	if stepsEnd(n, m.format.Rate) < m.written {
		n++
	}
	return n
}

// timeline returns the course of the programme. A last step that is not whole ends in silence.
func (m *Meter) timeline() Timeline {
	n := m.steps()
	t := Timeline{
		Step:      1.0 / stepsPerSecond,
		Momentary: make([]float32, n),
		ShortTerm: make([]float32, n),
		Peak:      append([]float32{}, m.peaks[:n]...),
	}
	c := course{m.format.Rate, m.energies}
	for i := range n {
		t.Momentary[i] = float32(loudness(c.mean(i, momentarySteps)))
		t.ShortTerm[i] = float32(loudness(c.mean(i, shortTermSteps)))
	}
	return t
}
